"""A project on which results lie far apart: looked for among the domains' ends, thresholds and in between.

The search draws the same projects every time; what it finds is reached, so it is a lower bound of the worst case.
"""

from __future__ import annotations

import random
import time
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from samesum.evidence.choosing.batches import middle, rows_of
from samesum.evidence.routes.witness import Value, usual
from samesum.evidence.trial.arrays import Array
from samesum.evidence.trial.extremes import Extremes, find_extremes, find_range
from samesum.evidence.trial.figures import Figures, reference_of, spread_of
from samesum.evidence.trial.plan import Plan
from samesum.evidence.trial.values import Rows, TooMany
from samesum.reading import model as m
from samesum.reading.cases import Case
from samesum.spans import START

SEED = 20_06
DRAWN = 96
ROUNDS = 14
MUTANTS = 64
WIDE = Fraction(1000)  # how far to look where a fact has no bound

Project = dict[str, Value]


@dataclass(frozen=True, slots=True)
class Worst:
    """The widest spread found. ``values`` by name as in a file of cases; ``spread`` None where none was found."""

    spread: float | None
    values: Mapping[str, Value | tuple[Value, ...]]
    lowest: tuple[tuple[str, str], ...] = ()
    highest: tuple[tuple[str, str], ...] = ()
    case: str = ""


def drawn(plan: Plan, draw: random.Random) -> list[Project]:
    """Projects of full size at the domains' ends, at thresholds and in between."""
    marks = _marks(plan)
    return [_drawn(plan, draw, marks) for _ in range(DRAWN)]


def widest(plan: Plan, deadline: float, seed: int = SEED) -> Worst:
    """The widest spread found over projects of full size, by drawing and then changing a few facts at a time."""
    draw = random.Random(seed)
    marks = _marks(plan)
    best = _tried(plan, drawn(plan, draw))
    for _ in range(ROUNDS):
        if best is None or time.monotonic() > deadline:
            break
        mutants = [best[1], *(_changed(plan, best[1], draw, marks) for _ in range(MUTANTS))]
        found = _tried(plan, mutants)
        if found is not None and found[0] > best[0]:
            best = found
    if best is None:
        return Worst(None, {})
    return worst_at(plan, best[1])


def worst_at(plan: Plan, project: Project) -> Worst:
    """The spread of one project, with the routes that give its ends."""
    from samesum.evidence.trial.figures import codes_of

    extremes, spread = _spreads(plan, [project])
    points = plan.graph.branch_points

    def route(codes: Mapping[str, int]) -> tuple[tuple[str, str], ...]:
        return tuple((id, point.branches[codes[id]]) for id, point in points.items() if id in codes)

    found = float(spread[0])
    return Worst(
        found if np.isfinite(found) else None,
        values_of(plan, project),
        route(codes_of(extremes.lowest, 0)),
        route(codes_of(extremes.highest, 0)),
    )


def worst_case_of(figures: Sequence[Figures], names: Sequence[str]) -> tuple[float, str, Figures, int] | None:
    """The widest spread among the cases given."""
    best: tuple[float, str, Figures, int] | None = None
    for each in figures:
        known = np.where(np.isfinite(each.spread), each.spread, -1.0)
        if len(known) and known.max() >= 0:
            row = int(np.argmax(known))
            if best is None or known[row] > best[0]:
                best = (float(known[row]), names[int(each.batch.places[row])], each, row)
    return best


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


def project_at(plan: Plan, rows: Rows, row: int) -> Project:
    """The facts of one row, by id; numbers as the shortest decimals that are these floats."""
    project: Project = {}
    for fact in plan.graph.model.facts:
        size = plan.graph.sizes.get(fact.index, 0)
        for element in range(1, size + 1) if fact.index else (0,):
            id = f"{fact.name}@{element}" if fact.index else fact.name
            if isinstance(fact.domain, m.OneOf):
                project[id] = fact.domain.values[int(rows.codes[id][row])]
            elif isinstance(fact.domain, m.YesNo):
                project[id] = bool(rows.flags[id][row])
            else:
                project[id] = Fraction(repr(float(rows.numbers[id][row])))
    return project


def project_of(plan: Plan, numbers: Mapping[str, Fraction], names: Mapping[str, int | bool]) -> Project:
    """A project with these numbers and codes, inside the domains; what is not given stands half-way."""
    project: Project = {}
    for fact in plan.graph.model.facts:
        size = plan.graph.sizes.get(fact.index, 0)
        for element in range(1, size + 1) if fact.index else (0,):
            id = f"{fact.name}@{element}" if fact.index else fact.name
            value = usual(fact.domain)
            if id in numbers and isinstance(fact.domain, m.Range):
                value = _clipped(numbers[id], fact.domain)
            elif id in names:
                code = names[id]
                value = plan.named[id][code] if id in plan.named else bool(code)
            project[id] = value
    return project


def _clipped(value: Fraction, domain: m.Range) -> Fraction:
    low = value if domain.low is None else max(value, domain.low)
    return low if domain.high is None else min(low, domain.high)


def _spreads(plan: Plan, projects: Sequence[Project]) -> tuple[Extremes, Array]:
    cases = [Case("", values_of(plan, project), None, START) for project in projects]
    rows = rows_of(plan, cases)
    extremes = find_extremes(plan, rows)
    return extremes, spread_of(extremes, reference_of(plan, rows))


def _tried(plan: Plan, projects: Sequence[Project]) -> tuple[float, Project] | None:
    rows = rows_of(plan, [Case("", values_of(plan, project), None, START) for project in projects])
    try:
        low, high = find_range(plan, rows, frozenset())
    except TooMany:
        return None
    size = np.abs(reference_of(plan, rows).value)
    with np.errstate(all="ignore"):
        spread = (high - low) / np.where(size > 0, size, np.nan)
    known = np.where(np.isfinite(spread), spread, -1.0)
    place = int(np.argmax(known))
    return (float(known[place]), projects[place]) if known[place] >= 0 else None


def _marks(plan: Plan) -> dict[str, list[Fraction]]:
    """Values of each numeric fact that are worth trying: numbers that comparisons and bands name."""
    numbers: set[Fraction] = {node.number for node in plan.nodes if node.kind == "number"}
    for table in plan.tables.values():
        for row in table.rows:
            for label in row.labels:
                if isinstance(label, m.Band):
                    numbers |= {bound for bound in (label.low, label.high) if bound is not None}
    return {
        name: sorted(number for number in numbers if _inside(number, domain)) for name, domain in plan.numeric.items()
    }


def _inside(value: Fraction, domain: m.Range) -> bool:
    return (domain.low is None or value >= domain.low) and (domain.high is None or value <= domain.high)


def _drawn(plan: Plan, draw: random.Random, marks: Mapping[str, Sequence[Fraction]]) -> Project:
    project: Project = {}
    for fact in plan.graph.model.facts:
        size = plan.graph.sizes.get(fact.index, 0)
        for element in range(1, size + 1) if fact.index else (0,):
            id = f"{fact.name}@{element}" if fact.index else fact.name
            project[id] = _value(fact.domain, draw, marks.get(id, ()))
    return project


def _changed(plan: Plan, project: Project, draw: random.Random, marks: Mapping[str, Sequence[Fraction]]) -> Project:
    made = dict(project)
    domains = {fact.name: fact.domain for fact in plan.graph.model.facts}
    for id in draw.sample(sorted(made), min(len(made), 1 + draw.randrange(3))):
        made[id] = _value(domains[id.partition("@")[0]], draw, marks.get(id, ()), made[id])
    return made


def _value(domain: m.Domain, draw: random.Random, marks: Sequence[Fraction], near: Value | None = None) -> Value:
    if isinstance(domain, m.OneOf):
        return domain.values[draw.randrange(len(domain.values))]
    if isinstance(domain, m.YesNo):
        return draw.random() < 0.5
    centre = middle(domain)
    low = domain.low if domain.low is not None else min(centre, Fraction(0)) - WIDE
    high = domain.high if domain.high is not None else max(centre, Fraction(0)) + WIDE
    way = draw.random()
    if way < 0.2:
        return low
    if way < 0.4:
        return high
    if way < 0.5 and marks:
        return marks[draw.randrange(len(marks))]
    if way < 0.75 and isinstance(near, Fraction):
        step = (high - low) * Fraction(draw.randrange(-50, 51), 1000)
        return min(high, max(low, _short(near + step, high - low)))
    return min(high, max(low, _short(low + (high - low) * Fraction(draw.randrange(0, 1001), 1000), high - low)))


def _short(value: Fraction, width: Fraction) -> Fraction:
    """A short decimal near a value, to a ten-thousandth of the domain's width."""
    step = Fraction(1)
    while step > width / 10_000 and step > Fraction(1, 10**9):
        step /= 10
    while step * 10 <= width / 10_000:
        step *= 10
    return round(value / step) * step
