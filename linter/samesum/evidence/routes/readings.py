"""What expressions and conditions amount to, as diagrams over branch points, named values and signs.

Takes the decision graph, gives for each expression a diagram with exact sums at its ends (one for each way that
choices and named values lead to), and for each condition a diagram of True and False over states of branch points,
values of facts, and the signs of sums. Where there is a value at all is for ``soundness``.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from fractions import Fraction
from functools import partial
from typing import Any

from samesum.evidence.routes import ranges, symbols
from samesum.evidence.routes.diagrams import Diagrams, OutOfLimits
from samesum.evidence.routes.ends import OPAQUE, arithmetic, each_end, negative, spread
from samesum.evidence.routes.hulls import Hulls
from samesum.evidence.routes.order import reading_order
from samesum.evidence.routes.ranges import Bounds
from samesum.evidence.routes.symbols import Sum
from samesum.graph import DecisionGraph, Element, instance_id
from samesum.reading import model as m
from samesum.reading import walk

SPACE = 1 << 24  # levels between two variables, for signs that must stand near their facts
MOST_NODES = 30_000  # a quantity whose ways need more is opaque

SIGNS = {"<": (0,), "<=": (0, 1), "=": (1,), "<>": (0, 2), ">=": (1, 2), ">": (2,)}
FLIPPED = {"<": ">", "<=": ">=", "=": "=", "<>": "<>", ">=": "<=", ">": "<"}


@dataclass(frozen=True, slots=True)
class Variable:
    """What a level of the diagrams stands for.

    ``kind``: ``point`` (state of a branch point), ``named`` (a fact or setting with named or yes/no values),
    ``judgement``, ``numeric`` (the cell of a fact or setting), ``sum`` (the cell of ``sum``), ``sign`` (of ``sum``;
    it becomes a cell), ``unsure`` (a condition that could be neither shown nor refuted).
    """

    kind: str
    name: str
    setting: bool = False
    sum: Sum | None = None


@dataclass(slots=True)
class Readings:
    """The workshop that reads expressions and conditions; remembers what it has read."""

    graph: DecisionGraph
    diagrams: Diagrams
    variables: dict[int, Variable] = field(default_factory=dict)
    levels: dict[str, int] = field(default_factory=dict)
    signs: dict[Sum, int] = field(default_factory=dict)
    sums: dict[Sum, int] = field(default_factory=dict)
    borders: dict[Sum, set[str]] = field(default_factory=dict)
    domains: dict[str, Bounds] = field(default_factory=dict)
    values: dict[str, tuple[str, ...]] = field(default_factory=dict)
    settings: set[str] = field(default_factory=set)
    unsure: dict[int, m.Condition | m.Expression] = field(default_factory=dict)
    declared: dict[str, Any] = field(default_factory=dict)
    _expressions: dict[Any, int] = field(default_factory=dict)
    hulls: Hulls = field(init=False)
    _results: dict[str, int] = field(default_factory=dict)
    _next: int = SPACE
    _beside: dict[int, int] = field(default_factory=dict)

    def __post_init__(self) -> None:
        self.hulls = Hulls(self.graph, self.domains, self.declared)
        model = self.graph.model
        both: tuple[m.Fact | m.Setting, ...] = (*model.facts, *model.settings)
        for declared in both:
            index = declared.index if isinstance(declared, m.Fact) else ""
            for element in range(1, self.graph.sizes.get(index, 0) + 1) if index else (0,):
                id = f"{declared.name}@{element}" if index else declared.name
                if isinstance(declared, m.Setting):
                    self.settings.add(id)
                if isinstance(declared.domain, m.Range):
                    self.domains[id] = Bounds(declared.domain.low, declared.domain.high)
                else:
                    self.values[id] = declared.domain.values if isinstance(declared.domain, m.OneOf) else ("no", "yes")
        shared: tuple[m.Constant | m.Table, ...] = (*model.constants, *model.tables)
        for each in shared:
            self.declared[each.name] = each
        for id in reading_order(self.graph):
            self.level(id)

    # -- variables ----------------------------------------------------------------------

    def level(self, id: str) -> int:
        """The level of a fact, setting, judgement (by id) or branch point (``point:`` before its id)."""
        found = self.levels.get(id)
        if found is not None:
            return found
        found = self._next
        self._next += SPACE
        self.levels[id] = found
        if id.startswith("point:"):
            name = id.removeprefix("point:")
            self.variables[found] = Variable("point", name)
            self.diagrams.size[found] = len(self.graph.branch_points[name].branches) + 2
        elif id in self.domains:
            self.variables[found] = Variable("numeric", id, id in self.settings)
        elif id in self.values:
            self.variables[found] = Variable("named", id, id in self.settings)
            self.diagrams.size[found] = len(self.values[id])
        else:
            self.variables[found] = Variable("judgement", id)
            self.diagrams.size[found] = 2
        return found

    def state(self, point: str, values: tuple[int, ...]) -> int:
        """True where the branch point is in one of these states."""
        return self.diagrams.literal(self.level(f"point:{point}"), values)

    def reached(self, point: str) -> int:
        """True where the branch point is reached (a branch taken, or stuck)."""
        count = len(self.graph.branch_points[point].branches)
        return self.state(point, (*range(count), count + 1))

    def _new_sign(self, sum: Sum) -> int:
        """The level of a sum's sign, beside the level of what it compares with a number."""
        base = self.value_level(symbols.without_constant(sum))
        self._beside[base] = self._beside.get(base, 0) + 1
        level = base + self._beside[base]
        settings = any(name in self.settings for name in symbols.generators(sum))
        self.variables[level] = Variable("sign", "", settings, sum)
        self.diagrams.size[level] = 3
        self.signs[sum] = level
        return level

    def value_level(self, sum: Sum) -> int:
        """The level of the number that a sum is (in its cells): a fact's own where it is just that fact."""
        names = symbols.generators(sum)
        if len(names) == 1 and symbols.is_linear(sum):
            return self.level(next(iter(names)))
        found = self.sums.get(sum)
        if found is None:  # below whatever selects among sums, or the diagram of the selection would explode
            found = self._next
            self._next += SPACE
            self.sums[sum] = found
            self.variables[found] = Variable("sum", "", any(name in self.settings for name in names), sum)
        return found

    # -- conditions ---------------------------------------------------------------------

    def compared(self, difference: int, operator: str, where: m.Condition | m.Expression, hull: Bounds) -> int:
        """True where ``difference OPERATOR 0``; ``hull`` are bounds of the difference for the case
        that it could not be written out."""
        d = self.diagrams

        def decide_sign(sum: Sum, operator: str) -> int:
            return self.compared(d.end(sum), operator, where, hull)

        def decide(end: Any) -> int:
            if end == OPAQUE:
                decided = self._by_bounds(hull, operator)
                return self._unsure(where) if decided is None else decided
            constant = end.constant
            if constant is not None:
                sign = 0 if constant < 0 else 1 if constant == 0 else 2
                return d.end(sign in SIGNS[operator])
            decided = self._by_bounds(ranges.bounds(end, self.domains), operator)
            if decided is not None:
                return decided
            parts = spread(end, operator)
            if parts is not None:
                joined = d.every if parts[0] else d.some
                return joined(decide_sign(each, parts[2]) for each in parts[1])
            leading = end.terms[-1][1]
            normal = symbols.scale(end, 1 / leading)
            way = operator if leading > 0 else FLIPPED[operator]
            level = self.signs.get(normal)
            if level is None:
                level = self._new_sign(normal)
            self.borders.setdefault(normal, set()).add(
                "above" if way in ("<", ">=") else "below" if way in ("<=", ">") else "apart"
            )
            return d.literal(level, SIGNS[way])

        return d.graft(f"compared {operator} {id(where)} {hull}", decide, difference)

    def _by_bounds(self, found: Bounds, operator: str) -> int | None:
        possible = []
        if found.low is None or found.low < 0:
            possible.append(0)
        zero_low = found.low is None or found.low < 0 or (found.low == 0 and not found.low_open)
        zero_high = found.high is None or found.high > 0 or (found.high == 0 and not found.high_open)
        if zero_low and zero_high:
            possible.append(1)
        if found.high is None or found.high > 0:
            possible.append(2)
        holds = [sign in SIGNS[operator] for sign in possible]
        return self.diagrams.end(True) if all(holds) else self.diagrams.end(False) if not any(holds) else None

    def _unsure(self, where: m.Condition | m.Expression) -> int:
        level = self._next
        self._next += SPACE
        self.variables[level] = Variable("unsure", f"unsure {level}")
        self.diagrams.size[level] = 2
        self.unsure[level] = where
        return self.diagrams.literal(level, (1,))

    def condition(self, node: m.Condition, elements: Element) -> int:
        """Where the condition holds, given that everything it asks has a value."""
        d = self.diagrams
        match node:
            case m.Comparison(operator=operator, left=left, right=right):
                difference = self._minus(self.expression(left, elements), self.expression(right, elements))
                hull = Bounds(None, None)
                if OPAQUE in d.ends(difference):
                    a, b = self.hulls.of(left, elements), self.hulls.of(right, elements)
                    hull = Bounds(
                        None if a.low is None or b.high is None else a.low - b.high,
                        None if a.high is None or b.low is None else a.high - b.low,
                    )
                return self.compared(difference, operator, node, hull)
            case m.Is(subject=subject, values=values):
                id = instance_id(subject.name, subject.index, elements)
                known = self.values[id]
                return d.literal(self.level(id), [known.index(value) for value in values if value in known])
            case m.Holds(name=name, index=index):
                return d.literal(self.level(instance_id(name, index, elements)), (1,))
            case m.Takes(quantity=name, index=index, option=option):
                target = instance_id(name, index, elements)
                return self.state(target, (self.graph.branch_points[target].branches.index(option),))
            case m.All(parts=parts):
                return d.every(self.condition(part, elements) for part in parts)
            case m.Some(parts=parts):
                return d.some(self.condition(part, elements) for part in parts)
            case m.Not(part=part):
                return d.negate(self.condition(part, elements))
            case m.Unknown():
                return self._unsure(node)

    def whole(self, operand: m.Expression, elements: Element) -> int:
        """Where an expression amounts to a whole number."""
        value = self.expression(operand, elements)
        broken = self._minus(value, self._called("round", [value]))
        return self.compared(broken, "=", operand, Bounds(Fraction(-1, 2), Fraction(1, 2)))

    def against_zero(self, operand: m.Expression, operator: str, elements: Element) -> int:
        """Where ``operand OPERATOR 0``."""
        hull = self.hulls.of(operand, elements)
        decided = self._by_bounds(hull, operator)
        if decided is not None:
            return decided
        return self.compared(self.expression(operand, elements), operator, operand, hull)

    # -- values -------------------------------------------------------------------------

    def quantity(self, id: str) -> int:
        """The value of an instance (meaningless where it is stuck or not evaluated)."""
        found = self._results.get(id)
        if found is None:
            instance = self.graph.instances[id]
            found = self._bounded(
                lambda: self.through(
                    id, instance.quantity.body, (), lambda e: self.expression(e, instance.elements), None
                )
            )
            self._results[id] = found
        return found

    def through(
        self, id: str, body: m.Body, path: tuple[str, ...], leaf: Callable[[m.Expression], int], otherwise: bool | None
    ) -> int:
        """What ``leaf`` makes of each formula, where its branch is taken; ``otherwise`` elsewhere (None: anything)."""
        if isinstance(body, m.Unknown):
            return self.diagrams.end(OPAQUE) if otherwise is None else self.diagrams.end(True)
        if isinstance(body, m.Formula):
            return leaf(body.expression)
        below = [self.through(id, branch.body, (*path, branch.name), leaf, otherwise) for branch in walk.branches(body)]
        result = below[0] if otherwise is None else self.diagrams.end(otherwise)
        level = self.level("point:" + "/".join((id, *path)))
        for number, part in enumerate(below):
            if part != result:
                result = self.diagrams.choose(self.diagrams.literal(level, (number,)), part, result)
        return result

    def _bounded(self, work: Callable[[], int]) -> int:
        """``work``, or opaque when it alone needs more than its share of nodes."""
        limits = self.diagrams.limits
        before = limits.nodes
        limits.nodes = share = min(before, len(self.diagrams.level) + MOST_NODES)
        try:
            return work()
        except OutOfLimits as error:
            if str(error) == "time" or share == before:
                raise
        finally:
            limits.nodes = before
        return self.diagrams.end(OPAQUE)

    def expression(self, node: m.Expression, elements: Element) -> int:
        """The number an expression amounts to, on each way."""
        key = (id(node), tuple(sorted(elements.items())))
        found = self._expressions.get(key)
        if found is None:
            found = self._bounded(lambda: self._expression(node, elements))
            self._expressions[key] = found
        return found

    def _expression(self, node: m.Expression, elements: Element) -> int:
        d = self.diagrams
        match node:
            case m.Number(value=value):
                return d.end(symbols.number(value))
            case m.Reference(kind="constant", name=name):
                return self.expression(self.declared[name].expression, {})
            case m.Reference(kind="quantity", name=name, index=index):
                return self.quantity(instance_id(name, index, elements))
            case m.Reference(name=name, index=index):
                id = instance_id(name, index, elements)
                return d.end(symbols.name(id) if id in self.domains else OPAQUE)
            case m.Position(index=index):
                return d.end(symbols.number(elements[index]))
            case m.Lookup():
                result = d.end(OPAQUE)
                for matches, number in reversed(list(self.rows(node, elements))):
                    result = number if result == d.end(OPAQUE) else d.choose(matches, number, result)
                return result
            case m.Arithmetic(operator=operator, left=left, right=right):
                a, b = self.expression(left, elements), self.expression(right, elements)
                return d.apply(f"number {operator}", lambda x, y: arithmetic(operator, x, y), a, b)
            case m.Negation(operand=operand):
                return d.map("negative", lambda x: each_end(negative, x), self.expression(operand, elements))
            case m.Scaled(operand=operand, factor=factor):
                inner = self.expression(operand, elements)
                return d.map(f"scaled {factor}", lambda x: each_end(lambda y: symbols.scale(y, factor), x), inner)
            case m.Function(name=name, arguments=arguments):
                parts = [self.expression(argument, elements) for argument in arguments]
                return self._called(name, parts)
            case m.Reduction(name=name, body=body, index=index):
                count = self.graph.sizes.get(index, 0)
                parts = [self.expression(body, {**elements, index: element}) for element in range(1, count + 1)]
                if name in ("min", "max"):
                    return self._called(name, parts)
                while len(parts) > 1:  # in pairs: what is added so stands one below the other and stays small
                    paired = [
                        d.apply("number +", lambda x, y: arithmetic("+", x, y), a, b)
                        for a, b in zip(parts[::2], parts[1::2], strict=False)
                    ]
                    parts = [*paired, *parts[2 * len(paired) :]]
                result = parts[0] if parts else d.end(symbols.ZERO)
                if name == "mean":
                    share = Fraction(1, count)
                    result = d.map(f"scaled {share}", lambda x: each_end(lambda y: symbols.scale(y, share), x), result)
                return result
            case _:
                return d.end(OPAQUE)

    def _called(self, name: str, parts: list[int]) -> int:
        d = self.diagrams
        if len(parts) == 1:
            return d.map(f"call {name}", lambda x: each_end(lambda y: symbols.call(name, (y,)), x), parts[0])
        result = d.map("alone", lambda x: x if x == OPAQUE else (x,), parts[0])
        for part in parts[1:]:
            result = d.apply("beside", lambda x, y: OPAQUE if OPAQUE in (x, y) else (*x, y), result, part)
        return d.map(f"call {name}", lambda x: x if x == OPAQUE else symbols.call(name, x) or OPAQUE, result)

    def _minus(self, a: int, b: int) -> int:
        return self._bounded(lambda: self.diagrams.apply("number -", lambda x, y: arithmetic("-", x, y), a, b))

    def rows(self, node: m.Lookup, elements: Element) -> Iterator[tuple[int, int]]:
        """Each row of a table: where its labels match the arguments, and its value."""
        d = self.diagrams
        table: m.Table = self.declared[node.table]
        for row in table.rows:
            match = d.end(True)
            for label, key, argument in zip(row.labels, table.keys, node.arguments, strict=True):
                if isinstance(label, m.Band):
                    match = d.both(match, self._in_band(label, argument, elements))
                elif isinstance(argument, m.Value):
                    match = d.both(match, d.end(argument.name == label))
                elif isinstance(argument, m.Reference):
                    id = instance_id(argument.name, argument.index, elements)
                    known = self.values.get(id, key.values)
                    match = d.both(match, d.literal(self.level(id), [known.index(label)] if label in known else []))
                else:
                    match = d.both(match, self._unsure(node))
            yield match, d.end(symbols.number(row.value))

    def _in_band(self, band: m.Band, argument: m.Expression, elements: Element) -> int:
        d = self.diagrams
        value = self.expression(argument, elements)
        hull = self.hulls.of(argument, elements) if OPAQUE in d.ends(value) else Bounds(None, None)
        result = d.end(True)
        for bound, operator in ((band.low, ">"), (band.high, "<=")):
            if bound is not None:
                less = symbols.number(-bound)
                shifted = d.map(f"less {bound}", partial(each_end, partial(symbols.add, less)), value)
                moved = Bounds(
                    None if hull.low is None else hull.low - bound, None if hull.high is None else hull.high - bound
                )
                result = d.both(result, self.compared(shifted, operator, argument, moved))
        return result
