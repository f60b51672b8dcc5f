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

from samesum.evidence.routes.witness import Value, usual
from samesum.evidence.trial.arrays import Array
from samesum.evidence.trial.climbing import MOST_MOVES, climbed
from samesum.evidence.trial.extremes import Extremes, find_extremes, find_range
from samesum.evidence.trial.figures import Figures, reference_of, spread_of
from samesum.evidence.trial.plan import Plan
from samesum.evidence.trial.projects import Project, clipped, reach, rows_at, values_of
from samesum.evidence.trial.turning import at_turns
from samesum.evidence.trial.values import Rows, TooMany
from samesum.reading import model as m

SEED = 20_06
DRAWN = 96
ROUNDS = 14
MUTANTS = 64
CLIMBED = 3
SMALL = 1e-6  # of the usual reference
NO_WIDER = 1e-9  # more of a spread than was known is the same
CERTAIN = Fraction(1, 10**6)  # how much of a spread may be the rounding of floats


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


def wider(plan: Plan, start: Worst | None, deadline: float) -> Worst | None:
    """A wider spread than ``start`` has, looked for where the plan turns and by climbing from the best projects; None
    where none is found. Its spread is certain, for next to a reference of zero floats are not to be believed."""
    from samesum.evidence.trial.certain import ends_of

    if time.monotonic() > deadline:
        return None
    projects = drawn(plan, random.Random(SEED))
    if start is not None and start.spread is not None:
        known = _project_of(plan, start.values)
        projects += [known] if known is not None else []
    least = _small(plan, projects)

    def score(tried: Sequence[Project]) -> Array:
        try:
            return _spread_of(plan, tried, least)
        except TooMany:
            return np.full(len(tried), np.nan)

    def order(tried: Sequence[Project]) -> list[Project]:
        scores = np.nan_to_num(score(tried), nan=-1.0)
        return [tried[place] for place in np.argsort(-scores, kind="stable").tolist() if scores[place] >= 0]

    most = MOST_MOVES
    if any(setting.name in plan.numeric for setting in plan.graph.model.settings):
        most //= 4  # the extremes over a setting are much work
    starts = order(projects)[:CLIMBED]
    if time.monotonic() > deadline:
        return None
    starts = order([*starts, *at_turns(plan, starts)[:most]])[:CLIMBED]
    found = [climbed(plan, each, score, deadline, most) for each in starts]
    known_spread = -1.0 if start is None or start.spread is None else start.spread
    for spread, project in sorted(
        [*found, *zip(score(starts).tolist(), starts, strict=True)], key=lambda each: -each[0]
    ):
        if not spread > known_spread * (1 + NO_WIDER):
            break
        ends = ends_of(plan, project)
        if ends is not None and ends.spread is not None and ends.spread >= Fraction(spread) * (1 - CERTAIN):
            return worst_at(plan, project)
    return None


def _project_of(plan: Plan, values: Mapping[str, Value | tuple[Value, ...]]) -> Project | None:
    """A project of full size from its values by name; None where it has another size."""
    project: Project = {}
    for fact in plan.graph.model.facts:
        value = values.get(fact.name)
        if isinstance(value, tuple):
            project.update({f"{fact.name}@{number}": each for number, each in enumerate(value, 1)})
            if len(value) != plan.graph.sizes.get(fact.index, 0):
                return None
        elif value is not None:
            project[fact.name] = value
        else:
            return None
    return project


def _small(plan: Plan, projects: Sequence[Project]) -> float:
    """What a reference has to be at least, so that the rounding of floats is nothing beside it."""
    sizes = np.abs(reference_of(plan, rows_at(plan, projects)).value)
    sizes = sizes[np.isfinite(sizes) & (sizes > 0)]
    return SMALL * float(np.median(sizes)) if len(sizes) else 0.0


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
                value = clipped(numbers[id], fact.domain)
            elif id in names:
                code = names[id]
                value = plan.named[id][code] if id in plan.named else bool(code)
            project[id] = value
    return project


def _spreads(plan: Plan, projects: Sequence[Project]) -> tuple[Extremes, Array]:
    rows = rows_at(plan, projects)
    extremes = find_extremes(plan, rows)
    return extremes, spread_of(extremes, reference_of(plan, rows))


def _tried(plan: Plan, projects: Sequence[Project]) -> tuple[float, Project] | None:
    try:
        spread = _spread_of(plan, projects, 0.0)
    except TooMany:
        return None
    known = np.where(np.isfinite(spread), spread, -1.0)
    place = int(np.argmax(known))
    return (float(known[place]), projects[place]) if known[place] >= 0 else None


def _spread_of(plan: Plan, projects: Sequence[Project], least: float) -> Array:
    """The spread of each project; NaN where its reference is not above ``least``."""
    rows = rows_at(plan, projects)
    low, high = find_range(plan, rows, frozenset())
    size = np.abs(reference_of(plan, rows).value)
    with np.errstate(all="ignore"):
        return np.asarray((high - low) / np.where(size > least, size, np.nan))


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
    low, high = reach(domain)
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
