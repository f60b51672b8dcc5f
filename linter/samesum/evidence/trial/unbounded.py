"""Whether the worst case has no bound: a project whose reference is zero, or as near zero as wanted, results apart.

The projects looked at are the same every time: some drawn, some where the plan turns, and where the reference comes
nearest to zero. Floats only propose them; a zero and a difference are worked out exactly before they are believed.
"""

from __future__ import annotations

import random
import time
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from samesum.evidence.routes.witness import Value
from samesum.evidence.trial.arrays import Array
from samesum.evidence.trial.certain import ends_of
from samesum.evidence.trial.climbing import climbed
from samesum.evidence.trial.extremes import find_range
from samesum.evidence.trial.figures import reference_of
from samesum.evidence.trial.plan import Plan
from samesum.evidence.trial.projects import Project, clipped, rows_at
from samesum.evidence.trial.turning import at_turns
from samesum.evidence.trial.values import TooMany
from samesum.evidence.trial.worst import SEED, drawn

APART = 1e-9  # of the larger result: nearer ones are not worth a closer look
HALVINGS = 60
SHRINKS = (20, 40)  # between these halvings a reference that goes through zero has come much nearer to it
MUCH = 64
SHOWN = 36  # the halving whose projects show it: their results are still told well by floats
NEAR_ZERO = 1e9  # times of the reference that results lie apart where a change of sign is a way through zero
DESCENTS = 3
MOST_CHECKED = 12
MOST_AT_TURNS = 4


@dataclass(frozen=True, slots=True)
class NoBound:
    """``why``: in words; ``project``: one that shows it."""

    why: str
    project: Project


AT_ZERO = "the reference result is zero for a project whose results lie apart"
THROUGH_ZERO = "the reference result changes sign, and next to zero results lie apart"


def no_bound(plan: Plan, deadline: float) -> NoBound | None:
    """Why results can lie apart any number of times of the reference; None when nothing says so."""
    projects = drawn(plan, random.Random(SEED))
    found = _tried(plan, projects)
    if found is None:
        return None
    reference, apart = found
    zero = _at_zero(plan, projects, reference, apart)
    if zero is not None:
        return zero
    above, below = (np.flatnonzero((sign * reference > 0) & (apart > 0)).tolist() for sign in (1, -1))
    pair = _alike(projects, above, below)
    through = None
    if pair is not None:
        through, last = _through_zero(plan, *pair)
        zero = _at_zero_of(plan, list(_shorter(plan, last[0])))
        if zero is not None:
            return zero
    if time.monotonic() > deadline:
        return through
    order = [place for place in np.argsort(np.abs(reference), kind="stable").tolist() if apart[place] > 0]
    near = [projects[place] for place in order[:DESCENTS]]
    zero = _at_zero_of(plan, at_turns(plan, near[:1] + projects[:MOST_AT_TURNS]))
    if zero is not None or through is not None:
        return zero or through
    return _at_zero_of(plan, [_nearest_zero(plan, project, deadline) for project in near])


def _tried(plan: Plan, projects: Sequence[Project]) -> tuple[Array, Array] | None:
    """The reference of each project, and how far its results seem to lie apart; 0 where that is next to nothing."""
    rows = rows_at(plan, projects)
    try:
        low, high = find_range(plan, rows, frozenset())
    except TooMany:
        return None
    with np.errstate(all="ignore"):
        apart = np.where(high - low > APART * np.maximum(np.abs(low), np.abs(high)), high - low, 0.0)
    return reference_of(plan, rows).value, apart


def _at_zero_of(plan: Plan, projects: Sequence[Project]) -> NoBound | None:
    found = _tried(plan, projects) if projects else None
    return None if found is None else _at_zero(plan, projects, *found)


def _at_zero(plan: Plan, projects: Sequence[Project], reference: Array, apart: Array) -> NoBound | None:
    """The first project whose reference is exactly zero and whose results lie apart for certain."""
    size = np.nanmax(np.abs(reference), initial=0.0)
    seems = np.flatnonzero((np.abs(reference) <= APART * size) & (apart > 0))
    likely = np.lexsort((-apart[seems], reference[seems] != 0))
    for place in seems[likely][:MOST_CHECKED].tolist():
        ends = ends_of(plan, projects[place])
        if ends is not None and ends.reference.low == 0 == ends.reference.high and ends.apart > 0:
            return NoBound(AT_ZERO, projects[place])
    return None


def _nearest_zero(plan: Plan, project: Project, deadline: float) -> Project:
    """Where the reference is smallest, from a project downwards."""

    def score(projects: Sequence[Project]) -> Array:
        size = np.abs(reference_of(plan, rows_at(plan, projects)).value)
        return np.asarray(np.where(size == 0, np.inf, -size))

    return climbed(plan, project, score, deadline)[1]


# --- a change of sign --------------------------------------------------------------------------


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


def _through_zero(plan: Plan, one: Project, other: Project) -> tuple[NoBound | None, tuple[Project, Project]]:
    """Whether results lie ever further apart on the way from a reference above zero to one below, and the last
    projects on it. A reference that jumps over zero comes no nearer to it."""
    pair = shown = (one, other)
    sizes: list[float] = []
    for _ in range(HALVINGS):
        made = {id: _between(value, pair[1][id]) for id, value in pair[0].items()}
        found = _tried(plan, [made])
        if found is None or found[1][0] == 0 or np.isnan(found[0][0]):
            return None, pair
        value = float(found[0][0])
        if value == 0:
            break  # as near as floats can tell
        pair = (made, pair[1]) if value > 0 else (pair[0], made)
        sizes.append(abs(value))
        shown = pair if len(sizes) <= SHOWN else shown
    first, then = SHRINKS
    if len(sizes) > then and max(sizes[then - 3 : then]) * MUCH > max(sizes[first - 3 : first]):
        return None, pair
    if all(_far(plan, project) for project in pair):
        return NoBound(THROUGH_ZERO, next((each for each in shown if _far(plan, each)), pair[0])), pair
    return None, pair


def _far(plan: Plan, project: Project) -> bool:
    ends = ends_of(plan, project)
    return ends is not None and (ends.spread is None or ends.spread > NEAR_ZERO)


def _between(one: Value, other: Value) -> Value:
    return (one + other) / 2 if isinstance(one, Fraction) and isinstance(other, Fraction) else one


def _shorter(plan: Plan, project: Project) -> Iterator[Project]:
    """The project with its numbers written with ever more digits, inside their domains."""
    for digits in range(10):
        made = dict(project)
        for id, value in project.items():
            if isinstance(value, Fraction):
                made[id] = clipped(Fraction(round(value * 10**digits), 10**digits), plan.numeric[id])
        yield made
