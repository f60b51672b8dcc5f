"""A project as a search has it: a value for every fact, by id."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from samesum.evidence.choosing.batches import middle, rows_of
from samesum.evidence.routes.witness import Value
from samesum.evidence.trial.plan import Plan
from samesum.evidence.trial.values import Rows
from samesum.reading import model as m
from samesum.reading.cases import Case
from samesum.spans import START

WIDE = Fraction(1000)  # how far to look where a fact has no bound

Project = dict[str, Value]


def values_of(plan: Plan, project: Project) -> dict[str, Value | tuple[Value, ...]]:
    """A project as a case gives it: lists for facts per index."""
    found: dict[str, Value | tuple[Value, ...]] = {}
    for fact in plan.graph.model.facts:
        if fact.index:
            size = plan.graph.sizes.get(fact.index, 0)
            found[fact.name] = tuple(project[f"{fact.name}@{element}"] for element in range(1, size + 1))
        else:
            found[fact.name] = project[fact.name]
    return found


def rows_at(plan: Plan, projects: Sequence[Project]) -> Rows:
    """Projects side by side; settings and judgements left free."""
    return rows_of(plan, [Case("", values_of(plan, project), None, START) for project in projects])


def reach(domain: m.Range) -> tuple[Fraction, Fraction]:
    """Where to look in a domain: all of it, or so far as to show what happens where it has no bound."""
    centre = middle(domain)
    low = domain.low if domain.low is not None else min(centre, Fraction(0)) - WIDE
    high = domain.high if domain.high is not None else max(centre, Fraction(0)) + WIDE
    return low, high


def clipped(value: Fraction, domain: m.Range) -> Fraction:
    """The value of a domain that is nearest."""
    low = value if domain.low is None else max(value, domain.low)
    return low if domain.high is None else min(low, domain.high)
