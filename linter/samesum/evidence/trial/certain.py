"""One project on one route, with certainty: every number lies between two exact fractions, mostly one and the same.

What floats only seem to show (a difference that is their own rounding, a zero that is none) is told from what is so.
Roots, powers, ``exp`` and ``ln`` that are no fractions go through floating point and are widened by four units in the
last place. What cannot be told raises ``Unclear``.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from itertools import product

from samesum.evidence.choosing.batches import middle
from samesum.evidence.routes.symbols import nearest
from samesum.evidence.routes.witness import Value
from samesum.evidence.trial.deciding import preferred
from samesum.evidence.trial.extremes import Extreme, find_extremes
from samesum.evidence.trial.figures import codes_of
from samesum.evidence.trial.plan import Node, Plan
from samesum.evidence.trial.projects import Project, clipped, rows_at
from samesum.evidence.trial.values import TooMany
from samesum.reading import model as m

MOST_BITS = 4_000  # of a fraction, before it is rounded outwards to floats
MOST_POWER = 256
LARGEST_ROOT = 10**6  # denominators that an exact root is looked for in


class Unclear(Exception):
    """There is no number on this route, or it cannot be told for certain whether the route is open."""


@dataclass(frozen=True, slots=True)
class Between:
    """``low`` <= value <= ``high``."""

    low: Fraction
    high: Fraction

    @property
    def exact(self) -> bool:
        return self.low == self.high


@dataclass(frozen=True, slots=True)
class Ends:
    """What is certain of one project: its reference, and two results that it can have."""

    reference: Between
    lowest: Between
    highest: Between

    @property
    def apart(self) -> Fraction:
        """How far the two results lie apart at least."""
        return max(self.highest.low - self.lowest.high, Fraction(0))

    @property
    def spread(self) -> Fraction | None:
        """The same as a share of the reference, at least; None where the reference is zero for certain."""
        size = max(abs(self.reference.low), abs(self.reference.high))
        return self.apart / size if size else None


def ends_of(plan: Plan, project: Project) -> Ends | None:
    """The reference of a project, and its lowest and highest result where floats find them; None where they cannot
    be told for certain."""
    from samesum.evidence.routes.counting import deep

    try:
        extremes = find_extremes(plan, rows_at(plan, [project]))
    except TooMany:
        return None
    try:
        with deep():
            reference = result_of(plan, {**project, **_as_reference(plan)})
            ends = [
                result_of(plan, {**project, **_as_found(plan, each)}, codes_of(each, 0))
                for each in (extremes.lowest, extremes.highest)
            ]
    except Unclear:
        return None
    return Ends(reference, ends[0], ends[1])


def _as_reference(plan: Plan) -> dict[str, Value]:
    found: dict[str, Value] = {each.name: True for each in plan.graph.model.judgements}
    for each in plan.graph.model.settings:
        domain = each.domain
        found[each.name] = (
            middle(domain) if isinstance(domain, m.Range) else domain.values[0] if isinstance(domain, m.OneOf) else True
        )
    return found


def _as_found(plan: Plan, extreme: Extreme) -> dict[str, Value]:
    inputs = extreme.inputs
    found: dict[str, Value] = {each.name: bool(inputs.flags[each.name][0]) for each in plan.graph.model.judgements}
    for each in plan.graph.model.settings:
        domain = each.domain
        if isinstance(domain, m.Range):
            found[each.name] = clipped(Fraction(repr(float(inputs.numbers[each.name][0]))), domain)
        elif isinstance(domain, m.OneOf):
            found[each.name] = domain.values[int(inputs.codes[each.name][0])]
        else:
            found[each.name] = bool(inputs.flags[each.name][0])
    return found


def result_of(plan: Plan, values: Mapping[str, Value], route: Mapping[str, int] | None = None) -> Between:
    """The result of a project. ``values`` of every fact, setting and judgement by id; ``route``: branch by branch
    point, the reference where none is given. Raises ``Unclear``."""
    return _Working(plan, values, route or {}).number(plan.root)


@dataclass(slots=True)
class _Working:
    plan: Plan
    values: Mapping[str, Value]
    route: Mapping[str, int]
    _numbers: dict[int, Between] = field(default_factory=dict)
    _states: dict[int, int] = field(default_factory=dict)

    # -- numbers ------------------------------------------------------------------------

    def number(self, number: int) -> Between:
        found = self._numbers.get(number)
        if found is None:
            found = _short(self._number(self.plan.nodes[number]))
            self._numbers[number] = found
        return found

    def _number(self, node: Node) -> Between:
        match node.kind:
            case "number":
                return Between(node.number, node.number)
            case "input":
                value = self.values[node.name]
                assert isinstance(value, Fraction)
                return Between(value, value)
            case "select":
                return self.number(node.args[1 + self.state(node.args[0])])
            case "guard":
                if not all(self.holds(each) for each in node.args[1:]):
                    raise Unclear
                return self.number(node.args[0])
            case "lookup":
                return self._looked_up(node)
        parts = [self.number(each) for each in node.args]
        match node.kind:
            case "linear":
                terms = [_scaled(part, weight) for part, weight in zip(parts, node.weights, strict=True)]
                low = sum((term.low for term in terms), node.number)
                return Between(low, sum((term.high for term in terms), node.number))
            case "product":
                found = parts[0]
                for part in parts[1:]:
                    found = _product(found, part)
                return found
            case "divide":
                return _product(parts[0], _over(parts[1]))
            case "power":
                return _power(parts[0], parts[1])
            case "min":
                return Between(min(part.low for part in parts), min(part.high for part in parts))
            case "max":
                return Between(max(part.low for part in parts), max(part.high for part in parts))
            case _:
                return _called(node.name, parts[0])

    def _looked_up(self, node: Node) -> Between:
        table = self.plan.tables[node.name]
        for row in table.rows:
            if all(self._answers(label, arg) for label, arg in zip(row.labels, node.args, strict=True)):
                return Between(row.value, row.value)
        raise Unclear

    def _answers(self, label: str | m.Band, arg: int) -> bool:
        if not isinstance(label, m.Band):
            return self._name(arg) == label
        value = self.number(arg)
        above = label.low is None or not _compared("<=", value, Between(label.low, label.low))
        return above and (label.high is None or _compared("<=", value, Between(label.high, label.high)))

    def _name(self, number: int) -> str:
        node = self.plan.nodes[number]
        return node.name if node.kind == "named" else str(self.values[node.name])

    # -- conditions ---------------------------------------------------------------------

    def holds(self, number: int) -> bool:
        node = self.plan.nodes[number]
        match node.kind:
            case "true":
                return True
            case "holds":
                return self.values[node.name] is True
            case "is":
                code = self.plan.nodes[node.args[0]]
                return self.plan.named[code.name].index(str(self.values[code.name])) in node.chosen
            case "takes":
                return self.state(node.args[0]) == node.chosen[0]
            case "compare":
                left, right = (self.number(each) for each in node.args)
                return _compared(node.name, left, right)
            case "not":
                return not self.holds(node.args[0])
        parts = [self.holds(each) for each in node.args]  # each of them, for all must have a value
        return all(parts) if node.kind == "all" else any(parts)

    def state(self, number: int) -> int:
        """The branch taken at a branch point."""
        found = self._states.get(number)
        if found is None:
            found = self._state(number)
            self._states[number] = found
        return found

    def _state(self, number: int) -> int:
        node, point = self.plan.nodes[number], self.plan.point(number)
        hold = [self.holds(each) for each in node.args[: len(point.branches)]]
        open_ = []
        for place, (here, written) in enumerate(zip(hold, point.conditions, strict=True)):
            ordered = point.kind == "cases in order" or (point.kind == "cases" and written is None)
            open_.append(here and not (ordered and any(hold[:place])))
        if point.leader:
            name = self.plan.point(node.args[-1]).branches[self.state(node.args[-1])]
            order = [point.branches.index(name)] if name in point.branches else []
        elif node.name in self.route:
            order = [self.route[node.name]]
        else:
            order = preferred(self.plan, node.name)
        found = next((branch for branch in order if open_[branch]), None)
        if found is None:
            raise Unclear
        return found


# --- operations --------------------------------------------------------------------------------


def _short(a: Between) -> Between:
    """Rounded outwards to floats where the fractions have grown long."""
    if max(each.numerator.bit_length() + each.denominator.bit_length() for each in (a.low, a.high)) <= MOST_BITS:
        return a
    return Between(Fraction(_float(a.low, down=True)), Fraction(_float(a.high, down=False)))


def _float(value: Fraction, down: bool) -> float:
    """The nearest float that is not above (not below) a value."""
    try:
        near = float(value)
    except OverflowError:
        raise Unclear from None
    if (near > value) if down else (near < value):
        near = math.nextafter(near, -math.inf if down else math.inf)
    if not math.isfinite(near):
        raise Unclear
    return near


def _widened(values: Sequence[float]) -> Between:
    low, high = min(values), max(values)
    for _ in range(4):
        low, high = math.nextafter(low, -math.inf), math.nextafter(high, math.inf)
    if not (math.isfinite(low) and math.isfinite(high)):
        raise Unclear
    return Between(Fraction(low), Fraction(high))


def _compared(operator: str, left: Between, right: Between) -> bool:
    if left.exact and right.exact:
        signs = {(left.low > right.low) - (left.low < right.low)}
    elif left.high < right.low:
        signs = {-1}
    elif left.low > right.high:
        signs = {1}
    else:
        signs = {-1, 0, 1}
        if left.high == right.low:
            signs = {-1, 0}
        elif left.low == right.high:
            signs = {0, 1}
    allowed = {"<": {-1}, "<=": {-1, 0}, "=": {0}, "<>": {-1, 1}, ">=": {0, 1}, ">": {1}}[operator]
    if signs <= allowed:
        return True
    if signs & allowed:
        raise Unclear
    return False


def _scaled(a: Between, weight: Fraction) -> Between:
    low, high = a.low * weight, a.high * weight
    return Between(low, high) if weight >= 0 else Between(high, low)


def _product(a: Between, b: Between) -> Between:
    ends = [x * y for x, y in product((a.low, a.high), (b.low, b.high))]
    return Between(min(ends), max(ends))


def _over(a: Between) -> Between:
    if a.low <= 0 <= a.high:
        raise Unclear
    return Between(1 / a.high, 1 / a.low)


def _power(base: Between, over: Between) -> Between:
    if over.exact and over.low.denominator == 1:
        return _whole_power(base, int(over.low))
    if base.exact and over.exact:
        root = _exact_root(base.low, over.low)
        if root is not None:
            return Between(root, root)
    if base.low < 0 or (base.low == 0 and over.low <= 0):
        raise Unclear
    bases = (_float(base.low, down=True), _float(base.high, down=False))
    overs = (_float(over.low, down=True), _float(over.high, down=False))
    try:
        found = _widened([x**y for x, y in product(bases, overs)])
    except OverflowError:
        raise Unclear from None
    return Between(max(found.low, Fraction(0)), found.high)


def _whole_power(base: Between, exponent: int) -> Between:
    if abs(exponent) > MOST_POWER:
        raise Unclear
    if exponent < 0:
        return _over(_whole_power(base, -exponent))
    ends = (base.low**exponent, base.high**exponent)
    across = exponent % 2 == 0 and exponent > 0 and base.low <= 0 <= base.high
    return Between(Fraction(0) if across else min(ends), max(ends))


def _exact_root(base: Fraction, over: Fraction) -> Fraction | None:
    """``base`` to the power ``over`` where that is a fraction; None where it is not, or not found."""
    if base <= 0:
        return Fraction(0) if base == 0 and over > 0 else None
    if over.denominator > MOST_POWER or abs(over.numerator) > MOST_POWER:
        return None
    try:
        near = Fraction(float(base) ** float(over)).limit_denominator(LARGEST_ROOT)
    except OverflowError:
        return None
    return near if near > 0 and near**over.denominator == base**over.numerator else None


def _called(name: str, a: Between) -> Between:
    match name:
        case "abs":
            ends = (abs(a.low), abs(a.high))
            return Between(Fraction(0) if a.low <= 0 <= a.high else min(ends), max(ends))
        case "floor":
            return Between(Fraction(math.floor(a.low)), Fraction(math.floor(a.high)))
        case "ceil":
            return Between(Fraction(math.ceil(a.low)), Fraction(math.ceil(a.high)))
        case "round":
            return Between(Fraction(nearest(a.low)), Fraction(nearest(a.high)))
        case "sqrt":
            return _power(a, Between(Fraction(1, 2), Fraction(1, 2)))
    if a.exact and a.low == (0 if name == "exp" else 1):
        return Between(Fraction(int(name == "exp")), Fraction(int(name == "exp")))
    function = math.exp if name == "exp" else math.log
    try:
        return _widened([function(_float(a.low, down=True)), function(_float(a.high, down=False))])
    except (OverflowError, ValueError):
        raise Unclear from None
