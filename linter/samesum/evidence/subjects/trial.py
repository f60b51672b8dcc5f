"""Subjects that need projects: how far results lie apart, and worked examples that do not come out."""

from __future__ import annotations

import math
from collections.abc import Iterator
from fractions import Fraction

from samesum.evidence.subjects.branches import basics
from samesum.evidence.subjects.kinds import CANNOT_TELL, AttributeValue, Subject
from samesum.evidence.trial.examples import described
from samesum.evidence.trial.outcome import TrialEvidence
from samesum.written import percent


def trial_subjects(trial: TrialEvidence) -> Iterator[Subject]:
    """One subject for all projects tried, and one a worked example, both at the result's declaration."""
    result = trial.graph.model.result
    if result is None:
        return
    span, clause = result.about.name_span, result.about.clause
    spreads = trial.spreads()
    known = [place for place, spread in enumerate(spreads) if math.isfinite(spread)]
    widest = max(known, key=lambda place: (spreads[place], -place), default=None)
    spread = Fraction(f"{spreads[widest]:.9g}") if widest is not None else None
    attributes: dict[str, AttributeValue] = {
        **basics(result.name, clause),
        "spread": CANNOT_TELL if spread is None else spread,
        "spread_percent": "" if spread is None else percent(spread),
        "widest_case": "" if widest is None else trial.names[widest],
        "case_count": len(trial),
        "cases_without_result": len(trial.proof.stuck_cases),
        "outcome": trial.proof.verdict.replace(" ", "_"),
        "first_to_close": trial.closing[0].general if trial.closing else "",
        "left_then": percent(Fraction(f"{trial.closing[0].left:.9g}")) if trial.closing else "",
    }
    yield Subject("trial", result.name, "spread", span, clause, attributes)
    for example in trial.examples:
        attributes = {
            **basics(result.name, clause),
            "agrees": example.agrees,
            "case_name": example.case,
            "finding": described(example),
        }
        yield Subject("worked_example", result.name, example.case, span, clause, attributes)
