"""The figures of ``trial`` agree with a brute-force evaluator on generated rulebooks and projects.

Held to: routes, distinct results, lowest, highest, reference, swing and left_if_closed to 1e-9 relative. The
meaning that brute force follows stands in ``brute.trial``.
"""

from __future__ import annotations

import math
import time
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
import pytest

from brute import trial as brute
from brute.evaluate import Evaluator
from brute.generate import Dice, case, rulebook
from brute.linear import TooLarge
from brute.points import representative
from brute.rulebooks import Range, Rulebook
from brute.text import render
from samesum.evidence.choosing.batches import batches_of
from samesum.evidence.trial.blame import Blame, find_blame
from samesum.evidence.trial.figures import figures_of
from samesum.evidence.trial.outcome import CaseTrial, End, case_trial
from samesum.reading.cases import Case
from samesum.reading.read import Reader, make_reader, read
from samesum.spans import START

RULEBOOKS = 1_000
EACH = 100
PROJECTS = 3
SECONDS = 60.0


@pytest.fixture(scope="module")
def reader() -> Reader:
    return make_reader(None)


@dataclass(frozen=True)
class Pair:
    """What brute force and samesum say of one project."""

    case: brute.Case
    expected: brute.Trial
    found: CaseTrial


def pairs(made: Rulebook, cases: list[brute.Case], reader: Reader) -> tuple[list[Pair], list[Blame]]:
    reading = read(render(made), "generated.rulebook", reader=reader)
    assert reading.problems == ()
    assert reading.model is not None
    given = [
        Case(str(k), {n: tuple(v) if isinstance(v, list) else v for n, v in each.items()}, None, START)
        for k, each in enumerate(cases)
    ]
    figures = []
    found: dict[int, CaseTrial] = {}
    for batch in batches_of(reading.model, given):
        figures.append(figures_of(batch, time.monotonic() + SECONDS))
        for row, place in enumerate(batch.places.tolist()):
            found[place] = case_trial(given[place].name, figures[-1], row)
    blame = find_blame(figures, time.monotonic() + SECONDS)
    return [Pair(each, brute.trial(made, each), found[k]) for k, each in enumerate(cases)], blame


def same(one: float, other: float) -> bool:
    return math.isclose(one, other, rel_tol=1e-9, abs_tol=1e-9)


@pytest.mark.parametrize("first", range(0, RULEBOOKS, EACH))
def test_every_figure_agrees_with_brute_force(first: int, reader: Reader) -> None:
    for seed in range(first, first + EACH):
        made = rulebook(seed)
        compare(made, seed, reader)


def compare(made: Rulebook, seed: int, reader: Reader) -> None:
    dice = Dice(seed)
    cases = [case(made, dice) for _ in range(PROJECTS)]
    text = render(made)
    both, blame = pairs(made, cases, reader)
    for pair in both:
        what = difference(made, pair)
        assert not what, f"seed {seed}: {what}\n{pair.case}\n{text}"
    what = blamed(made, both, blame)
    assert not what, f"seed {seed}: {what}\n{cases}\n{text}"


def free_numbers(made: Rulebook, given: Mapping[str, object]) -> bool:
    return any(isinstance(s.domain, Range) and s.name not in given for s in made.settings)


def difference(made: Rulebook, pair: Pair) -> str:
    """What differs between the two, in a few words; "" when nothing does."""
    expected, found = pair.expected, pair.found
    if found.outside != expected.outside:
        return f"outside {found.outside}, brute {expected.outside}"
    if expected.outside:
        return ""
    if found.routes != expected.routes:
        return f"routes {found.routes}, brute {expected.routes}"
    free = free_numbers(made, pair.case)
    if (found.distinct_results is None and not free) or (
        found.distinct_results is not None and not free and found.distinct_results != len(expected.results)
    ):
        return f"distinct {found.distinct_results}, brute {len(expected.results)}: {expected.results}"
    for name, one, other, sign in (
        ("lowest", found.lowest, expected.lowest, 1),
        ("highest", found.highest, expected.highest, -1),
    ):
        if (one is None) != (other is None):
            return f"{name} {one}, brute {other}"
        if one is None or other is None:
            continue
        if free:
            # Brute force tries some values of each setting: it can miss an extreme, not go beyond it.
            if found.complete and sign * (one.value - other.value) > 1e-9 * max(1.0, abs(other.value)):
                return f"{name} {one.value}, brute finds {other.value}"
        elif not same(one.value, other.value):
            return f"{name} {one.value}, brute {other.value}"
        if not attained(made, pair.case, one):
            return f"{name} {one} is not what its route gives"
    if (found.reference is None) != (expected.reference is None):
        return f"reference {found.reference}, brute {expected.reference}"
    if found.reference is not None and expected.reference is not None:
        if not same(found.reference.value, expected.reference.value):
            return f"reference {found.reference.value}, brute {expected.reference.value}"
        if dict(found.reference.route) != expected.reference.route:
            return f"reference route {found.reference.route}, brute {expected.reference.route}"
        clear = abs(expected.reference.value) > 1e-6 and not free
        if clear and not same(-1.0 if found.spread is None else found.spread, expected.spread or 0.0):
            return f"spread {found.spread}, brute {expected.spread}"
    return ""


def attained(made: Rulebook, given: brute.Case, end: End) -> bool:
    """Whether the route is open at the settings and judgements given with it and has the value claimed."""
    free = {name: Fraction(v) if isinstance(v, float) else v for name, v in (*end.settings, *end.judgements)}
    inputs = {**free, **given}
    project, values = brute.project(made, inputs)
    points = representative(project, values)
    # An extreme that is only approached lies a hair's breadth inside its condition: so once more, to the letter.
    return _gives(Evaluator(project, points), end) or _gives(Evaluator(project, points, 0.0), end)


def _gives(evaluator: Evaluator, end: End) -> bool:
    try:
        passes = list(evaluator.passes())
    except TooLarge:
        return False  # closer to a condition's edge than this evaluator can tell
    for one in passes:
        if one.states == dict(end.route) and one.complete.any():
            values = np.broadcast_to(one.result.it, (len(one.mask),))[one.complete]
            return bool(same(float(values[0]), end.value))
    return False


def blamed(made: Rulebook, both: list[Pair], blame: list[Blame]) -> str:
    usable = [pair for pair in both if pair.expected.reference and abs(pair.expected.reference.value) > 1e-6]
    if len(usable) != sum(bool(pair.expected.reference) for pair in both):
        return ""  # a reference of nearly zero: shares of it mean nothing
    if any(free_numbers(made, pair.case) for pair in both):
        return ""
    known = {each.mover.id: each for each in blame}
    ids = {id for pair in usable for id, _ in pair.expected.swing} | set(known)
    for id in sorted(ids):
        swing = max((dict(pair.expected.swing).get(id, 0.0) for pair in usable), default=0.0)
        each = known.get(id)
        if each is None:
            if swing > 1e-9:
                return f"{id} moves the result by {swing} and is not told"
            continue
        left = max(
            (dict(pair.expected.left_if_closed).get(id, pair.expected.spread or 0.0) for pair in usable), default=0.0
        )
        if usable and not same(each.swing or 0.0, swing):
            return f"swing of {id} {each.swing}, brute {swing}"
        if usable and not same(each.left or 0.0, left):
            return f"left of {id} {each.left}, brute {left}"
    return ""
