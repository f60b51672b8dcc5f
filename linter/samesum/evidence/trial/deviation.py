"""How far any route can lie from the reference route, as a share of it, proved for all projects at once.

Every number is thought of as its reference value times (1 + e); an interval that holds every e is carried
through the calculation. Products multiply, sums of one sign average, so a choice that matters by half a percent
is known to matter by half a percent at the end without knowing the project.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field
from fractions import Fraction

import numpy as np

from samesum.evidence.routes import symbols
from samesum.evidence.routes.symbols import Sum
from samesum.evidence.trial import intervals as iv
from samesum.evidence.trial.bounds import Boxes, Ranges, domain_boxes
from samesum.evidence.trial.deciding import preferred
from samesum.evidence.trial.dividing import lowest_over
from samesum.evidence.trial.formulas import atoms_box, mini_plan, ratio, without
from samesum.evidence.trial.intervals import Interval
from samesum.evidence.trial.plan import Node, Plan
from samesum.reading import model as m

NONE = Interval(np.zeros(1), np.zeros(1))
ANY = Interval(np.full(1, -np.inf), np.full(1, np.inf))
ONE = Interval(np.ones(1), np.ones(1))
LONGEST = 60


@dataclass(slots=True)
class Deviations:
    """The deviation of each node. ``overlapping``: ids of plain cases that can have two branches open at once."""

    plan: Plan
    overlapping: frozenset[str]
    deadline: float
    ranges: Ranges = field(init=False)
    moved: list[bool] = field(init=False)
    _known: dict[int, Interval | None] = field(default_factory=dict)
    _sums: dict[int, Sum] = field(default_factory=dict)
    _still: dict[int, bool] = field(default_factory=dict)

    def __post_init__(self) -> None:
        self.ranges = Ranges(self.plan, domain_boxes(self.plan))
        self.moved = []
        for number, node in enumerate(self.plan.nodes):
            own = node.name in self.plan.human and node.kind in ("input", "code", "holds")
            if node.kind == "point":
                own = self._is_free(number)
            self.moved.append(own or any(self.moved[each] for each in node.args))

    def _is_free(self, number: int) -> bool:
        point = self.plan.point(number)
        return (point.kind == "choice" and len(point.branches) > 1) or point.id in self.overlapping

    def result(self) -> Interval | None:
        """The deviation of the result; None when there is none at all, an infinite interval when unknown."""
        root = self.plan.nodes[self.plan.root]
        if root.kind == "guard" and any(self.moved[each] for each in root.args[1:]):
            return ANY
        with np.errstate(all="ignore"):
            return self.of(self.plan.root)

    def of(self, number: int) -> Interval | None:
        if number not in self._known:
            self._known[number] = None if self.still(number) else self._of(number, self.plan.nodes[number])
        return self._known[number]

    def still(self, number: int) -> bool:
        """Whether nothing that anybody decides moves the number at all: by equal formulas alone."""
        found = self._still.get(number)
        if found is None:
            found = not self.moved[number] or self._is_still(self.plan.nodes[number])
            self._still[number] = found
        return found

    def _is_still(self, node: Node) -> bool:
        if node.kind in ("input", "code", "holds", "lookup", "point"):
            return False
        if node.kind != "select":
            return all(self.still(each) for each in node.args)
        bodies = node.args[1:]
        if not all(self.still(each) for each in bodies):
            return False
        if not self.moved[node.args[0]]:
            return True
        sums = [self._sum(each) for each in bodies]
        return all(each == sums[0] for each in sums[1:])

    def _of(self, number: int, node: Node) -> Interval | None:
        match node.kind:
            case "guard":
                return self.of(node.args[0])
            case "input":
                domain = self.plan.numeric[node.name]
                return self._around_middle(domain)
            case "select":
                return self._select(node)
            case "linear":
                return self._linear(number, node)
            case "product":
                return _times([self.of(each) for each in node.args])
            case "divide":
                above, below = (self.of(each) for each in node.args)
                if below is None:
                    return above
                over = iv.divided(ONE, iv.added(ONE, below)) if below.low[0] > -1 else ANY
                return _times([above, iv.added(over, _negative(ONE))])
            case "power":
                return self._power(node)
            case "min" | "max":
                return self._extreme(node)
            case "call" if node.name == "abs":
                return self._positive(self.of(node.args[0]))
            case "call" if node.name == "sqrt":
                inner = self.of(node.args[0])
                if inner is None or inner.low[0] <= -1:
                    return inner if inner is None else ANY
                return iv.added(iv.called("sqrt", iv.added(ONE, inner)), _negative(ONE))
            case _:
                return self._by_range(number)

    def _positive(self, inner: Interval | None) -> Interval | None:
        """As it is while 1 + e stays above zero: then nothing changes its sign."""
        return inner if inner is None or inner.low[0] > -1 else ANY

    def _around_middle(self, domain: m.Range) -> Interval:
        if domain.low is None or domain.high is None or domain.low + domain.high == 0:
            return ANY
        half = abs((domain.high - domain.low) / (domain.low + domain.high))
        size = iv.exactly(half)
        return Interval(-size.high, size.high)

    def _by_range(self, number: int) -> Interval:
        """Nothing better is known: from the lowest over the highest to the highest over the lowest."""
        value = self.ranges.number(number).value
        if value.low[0] > 0 or value.high[0] < 0:
            return iv.added(iv.divided(value, value), _negative(ONE))
        return ANY

    def _linear(self, number: int, node: Node) -> Interval | None:
        terms = [
            iv.multiplied(self.ranges.number(each).value, iv.exactly(weight))
            for each, weight in zip(node.args, node.weights, strict=True)
        ]
        added = [*terms, iv.exactly(node.number)]
        total = self.ranges.number(number).value
        one_sign = all(term.low[0] >= 0 for term in added) or all(term.high[0] <= 0 for term in added)
        if not one_sign and total.low[0] <= 0 <= total.high[0]:
            return ANY
        parts = [self.of(each) for each in node.args]
        if one_sign:
            # a mean of the parts' deviations, weighted by their size
            moving = [NONE if part is None else part for part in parts]
            if node.number or any(part is None for part in parts):
                moving.append(NONE)
            return iv.around(moving)
        found = NONE
        for term, part in zip(terms, parts, strict=True):
            if part is not None:
                found = iv.added(found, iv.multiplied(iv.divided(term, total), part))
        return found

    def _power(self, node: Node) -> Interval | None:
        base = self.of(node.args[0])
        over = self.plan.nodes[node.args[1]]
        if self.moved[node.args[1]] or over.kind != "number":
            return ANY
        if base is None:
            return None
        if base.low[0] <= -1:
            return ANY
        raised = iv.powered(iv.added(ONE, base), iv.exactly(over.number))
        return iv.added(raised, _negative(ONE))

    def _extreme(self, node: Node) -> Interval | None:
        parts = [self.of(each) for each in node.args]
        if all(part is None for part in parts):
            return None
        values = [self.ranges.number(each).value for each in node.args]
        settled = [NONE if part is None else part for part in parts]
        found = iv.around(settled)
        if found.low[0] <= -1:
            return ANY
        if all(value.low[0] >= 0 for value in values) or all(value.high[0] <= 0 for value in values):
            return found
        still_zero = [
            part is None and value.low[0] == value.high[0] == 0 for part, value in zip(parts, values, strict=True)
        ]
        # max(0, x): zero stays where x is below it, and x keeps its sign
        return found if sum(still_zero) == len(parts) - 1 else ANY

    # -- branch points --------------------------------------------------------------------

    def _select(self, node: Node) -> Interval | None:
        point = node.args[0]
        bodies = list(node.args[1:])
        inner = [self.of(body) for body in bodies]
        if not self.moved[point]:
            known = [NONE if each is None else each for each in inner]
            return None if all(each is None for each in inner) else iv.around(known)
        order = preferred(self.plan, self.plan.nodes[point].name)
        steered = any(self.moved[each] for each in self.plan.nodes[point].args)
        pairs = [(order[0], other) for other in order[1:]]
        if steered or any(condition is not None for condition in self.plan.point(point).conditions):
            # the reference may be any branch
            pairs = [(one, other) for one in order for other in order if one != other]
        found = [NONE if each is None else each for each in inner]
        still = all(each is None for each in inner)
        for one, other in pairs:
            apart = self._apart(bodies[one], bodies[other])
            if apart is not None:
                still = False
                combined = _times([apart, inner[other]])
                found.append(ANY if combined is None else combined)
        return None if still else iv.around(found)

    def _apart(self, one: int, other: int) -> Interval | None:
        """The deviation of one body from another, everything inside both on its reference."""
        a, b = self._sum(one), self._sum(other)
        difference = symbols.subtract(b, a)
        if difference == symbols.ZERO:
            return None
        share = proportion(difference, a)
        if share is not None:
            return iv.exactly(share)
        above, below = ratio(difference, a)
        box = atoms_box(self.ranges, (above, below))
        plan, node = mini_plan(self.plan, above, below)
        names = tuple(
            name for name, (low, high) in box.items() if math.isfinite(low) and math.isfinite(high) and low < high
        )
        boxes = Boxes(
            1, {name: np.array([low]) for name, (low, _) in box.items()},
            {name: np.array([high]) for name, (_, high) in box.items()}, {}, {},
        )  # fmt: skip
        low, high = (
            float(lowest_over(plan, node, boxes, names, self.deadline, 1e-4, highest=side, most=2_000).proved[0])
            for side in (False, True)
        )
        return ANY if math.isnan(low) or math.isnan(high) else Interval(np.array([low]), np.array([high]))

    def _sum(self, number: int) -> Sum:
        """A node as an exact sum over what cannot be taken apart."""
        found = self._sums.get(number)
        if found is None:
            made = self._taken_apart(self.plan.nodes[number])
            found = made if made is not None and len(made.terms) <= LONGEST else symbols.name(f"node {number}")
            self._sums[number] = found
        return found

    def _pulled_out(self, name: str, parts: list[Sum]) -> Sum | None:
        """A minimum, maximum or size with the factors of all its parts that are never negative before it."""
        common: dict[symbols.Generator, int] | None = None
        for monomial, _ in (term for part in parts for term in part.terms):
            powers = dict(monomial)
            if common is None:
                common = {each: power for each, power in powers.items() if self._never_negative(each)}
            else:
                common = {each: min(power, powers[each]) for each, power in common.items() if each in powers}
        size = next((abs(part.terms[0][1]) for part in parts if part.terms), None)
        if size is None:
            return symbols.call(name, tuple(parts))
        inner = [symbols.scale(without(part, common or {}), 1 / size) for part in parts]
        made = symbols.call(name, tuple(inner))
        if made is None:
            return None
        factors = Sum(((tuple(sorted((common or {}).items(), key=lambda item: repr(item[0]))), size),))
        return symbols.multiply(made, factors)

    def _never_negative(self, generator: symbols.Generator) -> bool:
        if not isinstance(generator, str):
            return False
        return bool(self.ranges.number(int(generator.removeprefix("node "))).value.low[0] >= 0)

    def _taken_apart(self, node: Node) -> Sum | None:
        match node.kind:
            case "number":
                return symbols.number(node.number)
            case "linear":
                parts = [
                    symbols.scale(self._sum(each), weight) for each, weight in zip(node.args, node.weights, strict=True)
                ]
                return symbols.total([symbols.number(node.number), *parts])
            case "product":
                made = self._sum(node.args[0])
                for each in node.args[1:]:
                    made = symbols.multiply(made, self._sum(each))
                    if len(made.terms) > LONGEST:
                        return None
                return made
            case "divide":
                return symbols.divide(self._sum(node.args[0]), self._sum(node.args[1]))
            case "power":
                return symbols.power(self._sum(node.args[0]), self._sum(node.args[1]))
            case "min" | "max":
                return self._pulled_out(node.kind, [self._sum(each) for each in node.args])
            case "call" if node.name == "abs":
                return self._pulled_out("abs", [self._sum(node.args[0])])
            case "call":
                return symbols.call(node.name, (self._sum(node.args[0]),))
            case _:
                return None


def proportion(a: Sum, b: Sum) -> Fraction | None:
    """The number k with a = k × b, where there is one."""
    if len(a.terms) != len(b.terms) or not b.terms:
        return None
    share = a.terms[0][1] / b.terms[0][1]
    return share if a == symbols.scale(b, share) else None


def _negative(a: Interval) -> Interval:
    return Interval(-a.high, -a.low)


def _times(parts: Sequence[Interval | None]) -> Interval | None:
    """(1 + e)(1 + f)… − 1."""
    moving = [part for part in parts if part is not None]
    if not moving:
        return None
    if len(moving) == 1:
        return moving[0]
    made = iv.added(ONE, moving[0])
    for part in moving[1:]:
        made = iv.multiplied(made, iv.added(ONE, part))
    return iv.added(made, _negative(ONE))
