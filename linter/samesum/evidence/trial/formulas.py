"""Exact sums turned back into plans, so that their ranges can be proved by dividing boxes."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import replace
from fractions import Fraction
from types import MappingProxyType

from samesum.evidence.routes import symbols
from samesum.evidence.routes.symbols import Call, Generator, Sum
from samesum.evidence.trial.bounds import Ranges
from samesum.evidence.trial.plan import Node, Plan
from samesum.reading import model as m


def ratio(above: Sum, below: Sum) -> tuple[Sum, Sum]:
    """Both without the factors that every one of their terms has, so that these cancel."""
    common: dict[Generator, int] | None = None
    for monomial, _ in (*above.terms, *below.terms):
        powers = dict(monomial)
        if common is None:
            common = powers
        else:
            common = {each: min(power, powers[each]) for each, power in common.items() if each in powers}
    if not common:
        return above, below
    return without(above, common), without(below, common)


def without(a: Sum, common: Mapping[Generator, int]) -> Sum:
    """The sum with these factors taken out of every term."""
    terms = []
    for monomial, value in a.terms:
        left = tuple((each, power - common.get(each, 0)) for each, power in monomial if power > common.get(each, 0))
        terms.append((left, value))
    return Sum(tuple(terms))


def atoms_box(ranges: Ranges, sums: Iterable[Sum]) -> dict[str, tuple[float, float]]:
    """The range of every name in the sums; ``node 12`` is a node of the plan."""
    names = sorted({name for each in sums for name in symbols.generators(each)})
    found = {}
    for name in names:
        number = int(name.removeprefix("node "))
        value = ranges.number(number).value
        found[name] = (float(value.low[0]), float(value.high[0]))
    return found


OPERATORS = {(-1,): "<", (-1, 0): "<=", (0,): "=", (-1, 1): "<>", (0, 1): ">=", (1,): ">"}


def mini_plan(plan: Plan, above: Sum, below: Sum | None = None) -> tuple[Plan, int]:
    """A plan of ``above / below`` over the names as inputs, and its node."""
    made, node, _ = mini_plan_under(plan, above, below, ())
    return made, node


def mini_plan_under(
    plan: Plan, above: Sum, below: Sum | None, signs: Iterable[tuple[Sum, frozenset[int]]]
) -> tuple[Plan, int, tuple[int, ...]]:
    """The same with nodes that say that each of the ``signs``' sums has one of its signs (-1, 0, 1)."""
    builder = _Builder()
    node = builder.sum(above)
    if below is not None and below != symbols.number(1):
        if below.constant is not None and below.constant:
            node = builder.make(Node("linear", (node,), weights=(1 / below.constant,)))
        else:
            node = builder.make(Node("divide", (node, builder.sum(below))))
    conditions = []
    for value, wanted in signs:
        sides = (builder.sum(value), builder.number(Fraction(0)))
        conditions.append(builder.make(Node("compare", sides, OPERATORS[tuple(sorted(wanted))])))
    names = {each.name for each in builder.nodes if each.kind == "input"}
    numeric = MappingProxyType({name: m.Range(None, None) for name in sorted(names)})
    made = replace(plan, nodes=tuple(builder.nodes), root=node, result=node, points={}, numeric=numeric)
    return made, node, tuple(conditions)


class _Builder:
    def __init__(self) -> None:
        self.nodes: list[Node] = []
        self._known: dict[Node, int] = {}

    def make(self, node: Node) -> int:
        if node not in self._known:
            self._known[node] = len(self.nodes)
            self.nodes.append(node)
        return self._known[node]

    def number(self, value: Fraction) -> int:
        return self.make(Node("number", number=value))

    def sum(self, a: Sum) -> int:
        added = Fraction(0)
        parts: dict[int, Fraction] = {}
        for monomial, value in a.terms:
            if not monomial:
                added += value
                continue
            factors = [self._power(generator, power) for generator, power in monomial]
            part = factors[0] if len(factors) == 1 else self.make(Node("product", tuple(factors)))
            parts[part] = parts.get(part, Fraction(0)) + value
        if not parts:
            return self.number(added)
        if not added and len(parts) == 1 and next(iter(parts.values())) == 1:
            return next(iter(parts))
        return self.make(Node("linear", tuple(parts), number=added, weights=tuple(parts.values())))

    def _power(self, generator: Generator, power: int) -> int:
        base = self.make(Node("input", name=generator)) if isinstance(generator, str) else self._call(generator)
        return base if power == 1 else self.make(Node("power", (base, self.number(Fraction(power)))))

    def _call(self, made: Call) -> int:
        args = tuple(self.sum(each) for each in made.arguments)
        match made.function:
            case "inverse":
                return self.make(Node("divide", (self.number(Fraction(1)), args[0])))
            case "min":
                return self.make(Node("min", args))
            case "max":
                return self.make(Node("max", args))
            case "power":
                return self.make(Node("power", args))
            case _:
                return self.make(Node("call", args, made.function))
