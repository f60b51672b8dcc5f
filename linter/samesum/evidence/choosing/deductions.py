"""The deduction that brings a choice's mean over-issuance back to zero, while the developer goes on choosing.

A deduction is taken off whatever the choice gives (added to an emission, which credits less). The developer answers it:
what is deducted falls short of the truth more often, and a second look is taken more often. So it is solved for with
the behaviour inside, on the same projects and errors throughout.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import partial

from samesum.evidence.choosing import closed_forms as forms
from samesum.evidence.choosing.behaviours import pick_of_all, second_look
from samesum.evidence.choosing.bench import Bench, Terms, alone, offers, prepare
from samesum.evidence.choosing.closed_forms import Noise
from samesum.evidence.choosing.closed_rows import noises_of, slope
from samesum.evidence.choosing.latitudes import Latitude
from samesum.evidence.choosing.linear import linear_in
from samesum.evidence.choosing.projects import Stretch, Supply, projects_of
from samesum.evidence.choosing.tally import Tally, tally

# Projects that a deduction is solved on, at most: each step works every option out again.
MOST_BLOCKS = 2
_MOST_STEPS = 30
_FIRST = 0.05
_LARGEST = 0.95


@dataclass(frozen=True, slots=True)
class Deduction:
    """``share``: what is deducted (0.107 for 10.7 %; below zero where the choice is an emission, to which it is added),
    and its standard ``error`` (0 when it comes from a closed form). ``left``: the over-issuance found with it, and that
    one's standard error."""

    share: float
    error: float
    left: float
    left_error: float


def solve_deductions(
    supply: Supply, parts: Sequence[Stretch], latitudes: Sequence[Latitude], terms: Terms, behaviours: Sequence[str]
) -> Mapping[tuple[str, str], Deduction]:
    """By choice and behaviour (``second look``, ``pick of all``); what no deduction cures is left out."""
    choices = [each for each in latitudes if each.kind == "choice"]
    if not choices:
        return {}
    quiet = replace(terms, join=None)
    benches = [
        prepare(projects_of(supply, stretch, terms.seed), stretch.number, (), quiet, 1)
        for stretch in _spread(parts, MOST_BLOCKS)
    ]
    made: dict[tuple[str, str], Deduction] = {}
    for latitude in choices:
        for behaviour in behaviours:
            found = _exact(benches, latitude, behaviour) if terms.price is None else None
            if found is None:
                found = _solved(partial(_pooled, benches, latitude, behaviour))
            if found is not None:
                made[latitude.id, behaviour] = found
    return made


def _spread(parts: Sequence[Stretch], most: int) -> Sequence[Stretch]:
    """So many blocks, from all over the list."""
    if len(parts) <= most:
        return parts
    return [parts[number * len(parts) // most] for number in range(most)]


def _pooled(benches: Sequence[Bench], latitude: Latitude, behaviour: str, share: float) -> Tally:
    total = Tally()
    for bench in benches:
        one = alone(bench, latitude, share)
        if not one.points:
            issued = bench.truth
        else:
            rule = second_look if behaviour == "second look" else pick_of_all
            issued = one.credited({id: rule(offer) for id, (offer, _) in offers(one).items()})
        total = total + tally(issued, bench.truth)
    return total


def _solved(trial: Callable[[float], Tally]) -> Deduction | None:
    """Secants kept inside a bracket (regula falsi, Illinois variant)."""
    start = trial(0.0)
    level = start.over_issuance
    if not math.isfinite(level):
        return None
    if abs(level) < 1e-12:
        return Deduction(0.0, 0.0, level, start.standard_error)
    # What is far below the standard error is no root worth another step; a closed form has none, and is exact.
    slack = max(1e-12, 0.01 * start.standard_error) if start.projects > 1 else 1e-12
    step = trial(_FIRST).over_issuance - level
    if not math.isfinite(step) or abs(step) < 1e-12:
        return None
    a, at_a = 0.0, level
    # Where a deduction credits more, the choice is an emission, and is added to.
    b = _FIRST if step * level < 0 else -_FIRST
    at_b = trial(b).over_issuance
    while at_b * at_a > 0:
        if abs(b) >= _LARGEST:
            return None
        a, at_a = b, at_b
        b = max(-_LARGEST, min(_LARGEST, 2 * b))
        at_b = trial(b).over_issuance
    low, at_low, high, at_high = a, at_a, b, at_b
    middle, found = b, start
    for _ in range(_MOST_STEPS):
        middle = (low * at_high - high * at_low) / (at_high - at_low)
        found = trial(middle)
        value = found.over_issuance
        if abs(value) <= slack or abs(high - low) < 1e-12:
            break
        if value * at_high < 0:
            low, at_low = high, at_high
        else:
            at_low /= 2
        high, at_high = middle, value
    slope_there = (at_b - level) / b
    return Deduction(middle, found.standard_error / abs(slope_there), found.over_issuance, found.standard_error)


def _exact(benches: Sequence[Bench], latitude: Latitude, behaviour: str) -> Deduction | None:
    """From the closed form, where it holds and the choice counts with one sign in all projects.

    A deduction d turns an option's 1 + e into (1−d)(1+e): another normal, to which the same formula applies.
    """
    bench = next((each for each in benches if latitude.points(each.program)), None)
    if bench is None:
        return None
    one = alone(bench, latitude)
    noises, correlation = noises_of(one)
    if noises is None or not linear_in(bench.program, one.points):
        return None
    signs = set()
    for each in benches:
        other = alone(each, latitude)
        for point in other.points:
            worth = slope(other, point)
            signs |= ({1} if (worth > 0).any() else set()) | ({-1} if (worth < 0).any() else set())
    if len(signs) != 1:
        return None
    sign = signs.pop()
    offer = next(iter(offers(one).values()))[0]
    order = offer.order
    if (order != order[:, :1]).any():
        return None
    ordered = [noises[place] for place in order[:, 0]]
    form = forms.looks_in_order if behaviour == "second look" else forms.pick_of_all

    def trial(share: float) -> Tally:
        inner = [Noise(sign * ((1 - share) * (1 + noise.bias) - 1), abs(1 - share) * noise.error) for noise in ordered]
        return Tally(projects=1, t=1.0, d=form(inner, correlation))

    try:
        found = _solved(trial)
    except ValueError:
        return None
    return None if found is None else Deduction(found.share, 0.0, found.left, 0.0)
