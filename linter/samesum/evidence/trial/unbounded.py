"""Whether the worst case has no bound: a project whose reference is zero, or as near zero as wanted, results apart.

The projects looked at are the same every time. A reference of zero is worked out exactly before it is believed.
"""

from __future__ import annotations

import random
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from samesum.evidence.choosing.batches import rows_of
from samesum.evidence.routes.witness import Value
from samesum.evidence.subjects.pointwise import Calculation, NoValue
from samesum.evidence.trial.arrays import Array
from samesum.evidence.trial.extremes import find_range
from samesum.evidence.trial.figures import reference_of
from samesum.evidence.trial.plan import Plan
from samesum.evidence.trial.values import TooMany
from samesum.evidence.trial.working import inputs_of
from samesum.evidence.trial.worst import SEED, Project, drawn, values_of
from samesum.reading.cases import Case
from samesum.spans import START

APART = 1e-9  # of the larger result: nearer ones may be one number
HALVINGS = 60
NEAR_ZERO = 1e9  # times of the reference that results lie apart where a change of sign is a way through zero


@dataclass(frozen=True, slots=True)
class NoBound:
    """``why``: in words; ``project``: one that shows it."""

    why: str
    project: Project


AT_ZERO = "the reference result is zero for a project whose results lie apart"
THROUGH_ZERO = "the reference result changes sign, and next to zero results lie apart"
NEXT_TO_ZERO = "the reference result is next to zero for a project whose results lie apart"


def no_bound(plan: Plan) -> NoBound | None:
    """Why results can lie apart any number of times of the reference; None when nothing says so."""
    projects = drawn(plan, random.Random(SEED))
    found = _tried(plan, projects)
    if found is None:
        return None
    reference, apart = found
    for place in np.flatnonzero((reference == 0) & apart)[:8].tolist():
        if _is_zero(plan, projects[place]):
            return NoBound(AT_ZERO, projects[place])
    above, below = (np.flatnonzero((sign * reference > 0) & apart).tolist() for sign in (1, -1))
    pair = _alike(projects, above, below)
    return NoBound(THROUGH_ZERO, pair[0]) if pair is not None and _through_zero(plan, *pair) else None


def _tried(plan: Plan, projects: Sequence[Project]) -> tuple[Array, Array] | None:
    """The reference of each project, and whether its results lie apart."""
    rows = rows_of(plan, [Case("", values_of(plan, project), None, START) for project in projects])
    try:
        low, high = find_range(plan, rows, frozenset())
    except TooMany:
        return None
    with np.errstate(all="ignore"):
        apart = high - low > APART * np.maximum(np.abs(low), np.abs(high))
    return reference_of(plan, rows).value, apart


def _is_zero(plan: Plan, project: Project) -> bool:
    calculation = Calculation(plan.graph, inputs_of(plan.graph, values_of(plan, project)))
    assert plan.graph.model.result is not None
    try:
        return calculation.quantity(plan.graph.model.result.name) == 0
    except NoValue:
        return False


def _alike(projects: Sequence[Project], above: Sequence[int], below: Sequence[int]) -> tuple[Project, Project] | None:
    """Two projects, one of each list, that differ in numbers alone."""

    def names(project: Project) -> tuple[object, ...]:
        return tuple(value for value in project.values() if not isinstance(value, Fraction))

    by_names = {names(projects[place]): projects[place] for place in reversed(above)}
    for place in below:
        found = by_names.get(names(projects[place]))
        if found is not None:
            return found, projects[place]
    return None


def _through_zero(plan: Plan, one: Project, other: Project) -> bool:
    """Whether results lie ever further apart on the way from a reference above zero to one below."""
    for _ in range(HALVINGS):
        made = {id: _between(value, other[id]) for id, value in one.items()}
        found = _tried(plan, [made])
        if found is None or not found[1][0]:
            return False
        if found[0][0] == 0:
            break  # as near as floats can tell
        if found[0][0] > 0:
            one = made
        else:
            other = made
    rows = rows_of(plan, [Case("", values_of(plan, project), None, START) for project in (one, other)])
    low, high = find_range(plan, rows, frozenset())
    with np.errstate(all="ignore"):
        return bool(((high - low) / np.abs(reference_of(plan, rows).value) > NEAR_ZERO).all())


def _between(one: Value, other: Value) -> Value:
    return (one + other) / 2 if isinstance(one, Fraction) and isinstance(other, Fraction) else one
