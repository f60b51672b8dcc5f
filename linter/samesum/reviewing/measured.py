"""What trial and bias say of each place of the register: swing, what is left, over-issuance, a closing that holds."""

from __future__ import annotations

import math
import time
from collections.abc import Mapping
from dataclasses import dataclass

from samesum.evidence.choosing.selection import HEADLINE, Closure, Figure, Found, Selection
from samesum.evidence.trial.blame import Remaining
from samesum.evidence.trial.outcome import TrialEvidence
from samesum.reviewing.compare import Moved
from samesum.reviewing.rows import Measures, Simulated

STANDARD_ERRORS = 4
"""A difference of simulated figures counts from so many of its standard errors on."""


@dataclass(frozen=True, slots=True)
class Tried:
    """The evidence of projects; None where it was not asked or could not be had."""

    trial: TrialEvidence | None = None
    selection: Selection | None = None


def measures_of(tried: Tried, seconds: float = 5.0) -> dict[str, Measures]:
    """Measures by id of the place (all elements of an index together)."""
    swings, left = _blame(tried.trial, seconds) if tried.trial is not None else ({}, {})
    found = {each.latitude.id: each for each in tried.selection.found} if tried.selection is not None else {}
    simulated = simulated_on(tried.selection) if tried.selection is not None else None
    measures = {}
    for id in dict.fromkeys([*swings, *found]):
        over = over_issuance(found[id]) if id in found else None
        closure = closure_text(found[id]) if id in found else ""
        measures[id] = Measures(
            swings.get(id), left.get(id), over, closure, simulated if over is not None or closure else None
        )
    return measures


def simulated_on(selection: Selection) -> Simulated:
    """What a simulation drew its projects from; given ones that are outside or have no result are not counted."""
    supply = selection.supply
    given = supply.cases - supply.outside - supply.without_result if supply.cases else 0
    return Simulated(selection.projects, given, selection.terms.seed)


def _blame(trial: TrialEvidence, seconds: float) -> tuple[Mapping[str, float | None], Mapping[str, float | None]]:
    """The largest swing of a place's elements, and what is left when all of them are held."""
    swings: dict[str, float | None] = {}
    left: dict[str, float | None] = {}
    members: dict[str, set[str]] = {}
    for blame in trial.blame:
        general = blame.mover.general
        members.setdefault(general, set()).add(blame.mover.id)
        known = [each for each in (swings.get(general), blame.swing) if each is not None]
        swings[general] = max(known, default=None)
        left[general] = blame.left
    remaining = Remaining(trial.figures, time.monotonic() + seconds)
    for general, ids in members.items():
        if len(ids) > 1:
            left[general] = remaining.left_over(frozenset(ids))
    return swings, left


def widest_spread(trial: TrialEvidence) -> float | None:
    """The largest spread of a case; None when no case has one."""
    return max((each for each in trial.spreads() if math.isfinite(each)), default=None)


def headline(figures: tuple[Figure, ...]) -> Figure | None:
    """The figure that rankings go by."""
    return next((each for each in figures if each.behaviour == HEADLINE), None)


def over_issuance(found: Found) -> float | None:
    """Over-issuance of a place alone, the others on their reference."""
    figure = headline(found.figures)
    if figure is None or found.latitude.kind == "stated" or not math.isfinite(figure.over_issuance):
        return None
    return figure.over_issuance


def closure_text(found: Found) -> str:
    """The closing that brings the mean nearest to the truth, and the deduction that would let the choice stay."""
    mandated = [each for each in found.closures if each.kind == "mandate" and math.isfinite(each.left.value)]
    if found.latitude.kind != "choice" or not mandated:
        return ""
    reference = found.latitude.candidates[found.latitude.reference]
    best = min(
        mandated, key=lambda each: (abs(each.left.value) > _noise(each), each.option != reference, each.left.value)
    )
    text = f"Mandate `{best.option}` (leaves {_signed(best.left.value)})"
    deduct = next((each for each in found.closures if each.kind == "deduct" and each.behaviour == HEADLINE), None)
    if deduct is not None and deduct.percent is not None and deduct.percent.value > 0.0005:
        text += f", or deduct {deduct.percent.value * 100:.1f} % of the quantity and leave the choice"
    return f"{text}."


def _noise(closure: Closure) -> float:
    return max(STANDARD_ERRORS * closure.left.error, 0.0005)


def _signed(value: float) -> str:
    shown = f"{value * 100:+.1f}"
    return f"{'0.0' if shown in ('+0.0', '-0.0') else shown} % over-issuance"


def moved(before: Tried, after: Tried) -> tuple[Moved, ...]:
    """The widest spread and the over-issuance of two drafts on the same projects and random numbers."""
    found = []
    if before.trial is not None and after.trial is not None:
        found.append(Moved("spread", widest_spread(before.trial), widest_spread(after.trial)))
    if before.selection is not None and after.selection is not None:
        old, new = headline(before.selection.figures), headline(after.selection.figures)
        if old is not None and new is not None:
            noise = STANDARD_ERRORS * math.hypot(old.standard_error, new.standard_error)
            found.append(Moved("over_issuance", old.over_issuance, new.over_issuance, noise))
    return tuple(found)
