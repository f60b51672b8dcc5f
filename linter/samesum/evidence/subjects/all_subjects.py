"""All subjects of one rulebook, in reading order.

Takes the evidence and the unit mismatches that reading found; gives rows that lint rules look at. What only
rules need (equal branches, jumps) is worked out here.
"""

from __future__ import annotations

import time
from collections.abc import Iterable, Sequence
from typing import TYPE_CHECKING

from samesum.evidence.evidence import Evidence
from samesum.evidence.routes.counting import deep
from samesum.evidence.subjects.branches import branch_subjects
from samesum.evidence.subjects.choice import over_issued
from samesum.evidence.subjects.declared import declared_subjects, unit_mismatches
from samesum.evidence.subjects.equal import Workshop
from samesum.evidence.subjects.kinds import Subject
from samesum.evidence.subjects.numbers import branches, equal_branches, jumps, overlaps
from samesum.problems import Problem

if TYPE_CHECKING:
    from samesum.evidence.trial.outcome import TrialEvidence


def subjects_of(
    evidence: Evidence, problems: Iterable[Problem] = (), seconds: float = 5.0, trial: TrialEvidence | None = None
) -> tuple[Subject, ...]:
    """Every subject, sorted by place, kind and key. ``problems``: only unit mismatches are taken in.
    ``seconds`` bounds the work; what is not settled by then has attributes that cannot be told. ``trial``: what
    projects showed, when some were tried."""
    start = time.monotonic()
    found: list[Subject] = []
    with deep():
        workshop = Workshop.of(evidence.graph, seconds / 2)
        found += declared_subjects(evidence)
        found += unit_mismatches(evidence, problems)
        found += branch_subjects(evidence)
        found += branches(evidence, workshop)
        found += equal_branches(evidence, workshop)
        found += overlaps(evidence, workshop)
        found += over_issued(evidence)
        found += jumps(evidence, max(0.2, seconds - (time.monotonic() - start)))
    if trial is not None:
        from samesum.evidence.subjects.trial import trial_subjects

        found += trial_subjects(trial)
    return in_reading_order(found)


def in_reading_order(subjects: Sequence[Subject]) -> tuple[Subject, ...]:
    """By place, then kind and key."""
    return tuple(sorted(subjects, key=lambda each: (each.span, each.kind, each.branch_point, each.key)))
