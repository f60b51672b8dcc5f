"""Bounds of expressions over all projects and all routes (not sharp): what needs no routes to be told apart."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Any

from samesum.evidence.routes import symbols
from samesum.evidence.routes.ends import OPAQUE, arithmetic, negative
from samesum.evidence.routes.ranges import Bounds, bounds
from samesum.graph import DecisionGraph, Element, instance_id
from samesum.reading import model as m


@dataclass(slots=True)
class Hulls:
    """Bounds of expressions and quantities, remembered. ``domains`` of facts and settings by id; ``declared``
    constants and tables by name."""

    graph: DecisionGraph
    domains: Mapping[str, Bounds]
    declared: Mapping[str, Any]
    _known: dict[Any, Bounds] = field(default_factory=dict)

    def of(self, node: m.Expression, elements: Element) -> Bounds:
        """Bounds of an expression over all projects and all routes (not sharp)."""
        key = (id(node), tuple(sorted(elements.items())))
        found = self._known.get(key)
        if found is None:
            found = self._of(node, elements)
            self._known[key] = found
        return found

    def _of(self, node: m.Expression, elements: Element) -> Bounds:
        match node:
            case m.Number(value=value):
                return Bounds(value, value)
            case m.Reference(kind="constant", name=name):
                return self.of(self.declared[name].expression, {})
            case m.Reference(kind="quantity", name=name, index=index):
                instance = self.graph.instances[instance_id(name, index, elements)]
                leaves = self.graph.leaves[instance.id]
                return around([self.of(leaf.expression, instance.elements) for leaf in leaves])
            case m.Reference(name=name, index=index):
                return self.domains.get(instance_id(name, index, elements), Bounds(None, None))
            case m.Position(index=index):
                return Bounds(Fraction(elements[index]), Fraction(elements[index]))
            case m.Lookup(table=name):
                values = [row.value for row in self.declared[name].rows]
                return Bounds(min(values), max(values)) if values else Bounds(None, None)
            case m.Scaled(operand=operand, factor=factor):
                return combined(lambda a: symbols.scale(a, factor), self.of(operand, elements))
            case m.Negation(operand=operand):
                return combined(negative, self.of(operand, elements))
            case m.Arithmetic(operator=operator, left=left, right=right):
                return combined(
                    lambda a, b: arithmetic(operator, a, b), self.of(left, elements), self.of(right, elements)
                )
            case m.Function(name=name, arguments=arguments):
                return combined(
                    lambda *each: symbols.call(name, each), *(self.of(argument, elements) for argument in arguments)
                )
            case m.Reduction(name=name, body=body, index=index):
                count = self.graph.sizes.get(index, 0)
                parts = [self.of(body, {**elements, index: element}) for element in range(1, count + 1)]
                if name in ("min", "max"):
                    return combined(lambda *each: symbols.call(name, each), *parts)
                total = combined(lambda *each: symbols.total(each), *parts)
                return total if name == "sum" else combined(lambda a: symbols.scale(a, Fraction(1, count)), total)
            case _:
                return Bounds(None, None)


def combined(build: Callable[..., Any], *parts: Bounds) -> Bounds:
    """Bounds of an operation on independent parts."""
    names = [f"p{number}" for number in range(len(parts))]
    made = build(*(symbols.name(name) for name in names))
    if made is None or made == OPAQUE:
        return Bounds(None, None)
    return bounds(made, dict(zip(names, parts, strict=True)))


def around(parts: list[Bounds]) -> Bounds:
    lows = [part.low for part in parts]
    highs = [part.high for part in parts]
    return Bounds(
        None if None in lows or not lows else min(low for low in lows if low is not None),
        None if None in highs or not highs else max(high for high in highs if high is not None),
    )
