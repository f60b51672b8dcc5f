"""Branches that give one number, and options that give none.

Most branches differ at the first project one looks at, and no more need be asked. Of the rest, two formulas
that are the same polynomial are equal at sight; what is left is put to the solver.
"""

from __future__ import annotations

import time
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Any, Literal

from samesum.evidence.routes import ranges, symbols
from samesum.evidence.routes import solver as s
from samesum.evidence.routes.cells import representative
from samesum.evidence.routes.diagrams import END, Diagrams, Limits, OutOfLimits
from samesum.evidence.routes.ends import OPAQUE
from samesum.evidence.routes.readings import Readings
from samesum.evidence.subjects.pointwise import Calculation, NoValue, some_projects
from samesum.graph import BranchPoint, DecisionGraph
from samesum.reading import model as m
from samesum.reading import walk

Answer = Literal["yes", "no", "cannot tell"]
MOST_WAYS = 400
NOISE = Fraction(1, 10**9)  # what floating point in sqrt, exp and ln may be off by, and far more


@dataclass(slots=True)
class Workshop:
    """Values of branches as diagrams of exact sums. ``deadline`` is on the monotonic clock."""

    readings: Readings
    deadline: float
    looked_at: tuple[Calculation, ...]
    _values: dict[tuple[str, int], int] = field(default_factory=dict)

    @staticmethod
    def of(graph: DecisionGraph, seconds: float) -> Workshop:
        deadline = time.monotonic() + seconds
        looked_at = tuple(Calculation(graph, values) for values in some_projects(graph))
        return Workshop(Readings(graph, Diagrams(Limits(deadline, nodes=400_000))), deadline, looked_at)

    def value(self, point: BranchPoint, branch: int) -> int:
        """The number of a branch of a body, nested branch points and all."""
        key = (point.id, branch)
        found = self._values.get(key)
        if found is None:
            found = self._body(point, walk.branches(point.body)[branch].body, point.id, branch)
            self._values[key] = found
        return found

    def _body(self, point: BranchPoint, body: m.Body, id: str, branch: int) -> int:
        d = self.readings.diagrams
        if isinstance(body, m.Unknown):
            return d.end(OPAQUE)
        if isinstance(body, m.Formula):
            return self.readings.expression(body.expression, self.readings.graph.instances[point.instance].elements)
        inner = self.readings.graph.branch_points[f"{id}/{self.readings.graph.branch_points[id].branches[branch]}"]
        parts = [
            self._body(inner, each.body, inner.id, number) for number, each in enumerate(walk.branches(inner.body))
        ]
        result = parts[0]
        for number, part in enumerate(parts[1:], start=1):
            result = d.choose(self.readings.state(inner.id, (number,)), part, result)
        return result


def same_number(workshop: Workshop, point: BranchPoint, first: int, second: int, together: bool) -> Answer:
    """Whether two branches give one number for every project (``together``: every project for which both are
    open). Never a guess: what the solver does not settle is "cannot tell"."""
    readings = workshop.readings
    d = readings.diagrams
    if _seen_to_differ(workshop, point, first, second, together):
        return "no"
    try:
        difference = d.apply("difference", _difference, workshop.value(point, first), workshop.value(point, second))
        if together:
            elements = readings.graph.instances[point.instance].elements
            for number in (first, second):
                condition = point.conditions[number]
                if condition is not None:
                    open_here = readings.condition(condition, elements)
                    difference = d.choose(open_here, difference, d.end(symbols.ZERO))
        return _always_zero(workshop, difference)
    except OutOfLimits:
        return "cannot tell"


def is_zero(workshop: Workshop, point: BranchPoint, branch: int) -> Answer:
    """Whether a branch gives 0 for every project."""
    for calculation in workshop.looked_at:
        try:
            if abs(calculation.branch(point, branch)) > NOISE:
                return "no"
        except NoValue:
            continue
    try:
        ends = workshop.readings.diagrams.ends(workshop.value(point, branch))
    except OutOfLimits:
        return "cannot tell"
    if ends == {symbols.ZERO}:
        return "yes"
    return "cannot tell" if OPAQUE in ends and len(ends) == 1 else "no"


def _seen_to_differ(workshop: Workshop, point: BranchPoint, first: int, second: int, together: bool) -> bool:
    """Whether the branches differ for one of the few projects looked at (``together``: one where both are open)."""
    elements = workshop.readings.graph.instances[point.instance].elements
    conditions = [point.conditions[number] for number in (first, second)] if together else []
    for calculation in workshop.looked_at:
        try:
            if all(each is None or calculation.holds(each, elements) for each in conditions):
                a, b = calculation.branch(point, first), calculation.branch(point, second)
                if abs(a - b) > NOISE * max(abs(a), abs(b)):
                    return True
        except NoValue:
            continue
    return False


def _difference(a: Any, b: Any) -> Any:
    return OPAQUE if OPAQUE in (a, b) else symbols.subtract(a, b)


def _always_zero(workshop: Workshop, difference: int) -> Answer:
    readings = workshop.readings
    ends = readings.diagrams.ends(difference)
    if ends == {symbols.ZERO}:
        return "yes"
    answer: Answer = "yes"
    for number, (signs, end) in enumerate(_ways(readings, difference)):
        if number >= MOST_WAYS or time.monotonic() > workshop.deadline or end == OPAQUE:
            answer = "cannot tell"
            if end == OPAQUE:
                continue
            break
        found = _can_differ(workshop, signs, end)
        if found == "yes":
            return "no"
        if found == "cannot tell":
            answer = "cannot tell"
    return answer


def _ways(readings: Readings, a: int) -> Iterator[tuple[dict[int, int], Any]]:
    """Every way to an end that is not 0, as what it says about levels."""
    d = readings.diagrams
    stack: list[tuple[int, dict[int, int]]] = [(a, {})]
    while stack:
        node, held = stack.pop()
        if d.level[node] == END:
            if d.content[node] != symbols.ZERO:
                yield held, d.content[node]
            continue
        for value, kid in enumerate(d.kids[node]):
            stack.append((kid, {**held, d.level[node]: value}))


def _can_differ(workshop: Workshop, held: Mapping[int, int], end: symbols.Sum) -> Answer:
    """Whether the sum can be other than 0 where the signs are as held. A "yes" says nothing of whether the
    states and named values held can come about; that only makes an equality go unnoticed."""
    readings = workshop.readings
    signs = []
    for level, value in held.items():
        variable = readings.variables[level]
        if variable.kind == "unsure":
            return "cannot tell"
        if variable.sum is not None:
            signs.append((variable.sum, value))
    names = set(symbols.generators(end)).union(*(symbols.generators(each) for each, _ in signs))
    box = {name: readings.domains.get(name, ranges.UNBOUNDED) for name in sorted(names)}
    if not signs:
        if end.constant is not None:
            return "yes"
        point = {name: representative(domain) for name, domain in box.items()}
        if s.sign_at(end, point) in (s.NEGATIVE, s.POSITIVE):
            return "yes"
    # what the solver finds possible may not be, where it takes a function for any number
    guessed = s.beyond(end) or any(s.beyond(each) for each, _ in signs)
    made = s.Solver(box, workshop.deadline)
    made.add(*(made.sign(each, sign) for each, sign in signs))
    answer: Answer = "no"
    for sign in (s.NEGATIVE, s.POSITIVE):
        found = made.check(made.sign(end, sign))
        if found == "yes" and not guessed:
            return "yes"
        if found != "no":
            answer = "cannot tell"
    return answer
