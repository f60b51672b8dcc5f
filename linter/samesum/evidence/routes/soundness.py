"""Where expressions and conditions have a value at all, as diagrams: no quantity they ask is stuck, every table has
a row, nothing is divided by zero."""

from __future__ import annotations

from dataclasses import dataclass, field
from itertools import pairwise
from typing import Any

from samesum.evidence.routes.readings import Readings
from samesum.graph import Element, instance_id
from samesum.reading import model as m
from samesum.reading import walk


@dataclass(slots=True)
class Soundness:
    """What has a value where; remembers what it has found."""

    readings: Readings
    _quantities: dict[str, int] = field(default_factory=dict)
    _operations: dict[Any, int] = field(default_factory=dict)

    def of(self, node: m.Expression | m.Condition, elements: Element, own: bool = False) -> int:
        """Where everything asked has a value. ``own`` leaves the quantities' own insides out."""
        readings = self.readings
        d = readings.diagrams
        match node:
            case m.Takes() if own:
                return d.end(True)
            case m.Takes(quantity=name, index=index):
                return self.not_stuck(instance_id(name, index, elements))
            case m.Reference(kind="quantity", name=name, index=index):
                return d.end(True) if own else self.quantity(instance_id(name, index, elements))
            case m.Reduction(body=body, index=index):
                return d.every(
                    self.of(body, {**elements, index: element}, own)
                    for element in range(1, readings.graph.sizes.get(index, 0) + 1)
                )
            case _:
                result = d.every(self.of(part, elements, own) for part in walk.parts(node))
                return d.both(result, self._operation(node, elements))

    def quantity(self, id: str) -> int:
        """Where an instance has a value when it is evaluated."""
        found = self._quantities.get(id)
        if found is None:
            instance = self.readings.graph.instances[id]
            body = instance.quantity.body
            found = self.readings.through(id, body, (), lambda e: self.of(e, instance.elements), False)
            self._quantities[id] = found
        return found

    def not_stuck(self, point: str) -> int:
        """Where a branch point is not stuck."""
        stuck = len(self.readings.graph.branch_points[point].branches) + 1
        return self.readings.diagrams.negate(self.readings.state(point, (stuck,)))

    def lacking(self, node: m.Expression | m.Condition, elements: Element) -> dict[str, int]:
        """Where an operation written in ``node`` has no value although all that it works on has one: by the table that
        has no row, "" for calculations. What nothing lacks is left out."""
        found: dict[str, int] = {}
        self._lacking(node, elements, found)
        return found

    def _lacking(self, node: m.Expression | m.Condition, elements: Element, found: dict[str, int]) -> None:
        if isinstance(node, m.Reduction):
            for element in range(1, self.readings.graph.sizes.get(node.index, 0) + 1):
                self._lacking(node.body, {**elements, node.index: element}, found)
            return
        for part in walk.parts(node):
            self._lacking(part, elements, found)
        d = self.readings.diagrams
        here = d.negate(self._operation(node, elements))
        for part in _works_on(node) if not d.is_end(here, False) else ():
            here = d.both(here, self.of(part, elements))
        if not d.is_end(here, False):
            name = node.table if isinstance(node, m.Lookup) else ""
            found[name] = d.either(found.get(name, d.end(False)), here)

    # -- operations ---------------------------------------------------------------------

    def _operation(self, node: m.Expression | m.Condition, elements: Element) -> int:
        """Where the operation itself has a value, given that what it works on has one."""
        if not isinstance(node, m.Lookup | m.Arithmetic | m.Function):
            return self.readings.diagrams.end(True)
        key = (id(node), tuple(sorted(elements.items())))
        found = self._operations.get(key)
        if found is None:
            found = self._has_row(node, elements) if isinstance(node, m.Lookup) else self._defined(node, elements)
            self._operations[key] = found
        return found

    def _has_row(self, node: m.Lookup, elements: Element) -> int:
        d = self.readings.diagrams
        if self._covered(node, elements):
            return d.end(True)
        return d.some(match for match, _ in self.readings.rows(node, elements))

    def _defined(self, node: m.Arithmetic | m.Function, elements: Element) -> int:
        match node:
            case m.Arithmetic(operator="/", right=operand):
                return self.readings.against_zero(operand, "<>", elements)
            case m.Arithmetic(operator="^"):
                return self._has_power(node, elements)
            case m.Function(name="ln", arguments=(operand,)):
                return self.readings.against_zero(operand, ">", elements)
            case m.Function(name="sqrt", arguments=(operand,)):
                return self.readings.against_zero(operand, ">=", elements)
            case _:
                return self.readings.diagrams.end(True)

    def _has_power(self, node: m.Arithmetic, elements: Element) -> int:
        """A power has a value where the base is above 0, where it is 0 and the exponent is not below 0, and where
        it is below 0 and the exponent is whole."""
        readings = self.readings
        d = readings.diagrams
        base, exponent = node.left, node.right
        hull = readings.hulls.of(exponent, elements)
        if hull.low is not None and hull.low == hull.high:
            whole = hull.low.denominator == 1
            if whole and hull.low >= 0:
                return d.end(True)
            return readings.against_zero(base, "<>" if whole else ">=" if hull.low >= 0 else ">", elements)
        above = readings.against_zero(base, ">", elements)
        if d.is_end(above, True):
            return above
        zero = d.both(readings.against_zero(base, "=", elements), readings.against_zero(exponent, ">=", elements))
        below = d.both(readings.against_zero(base, "<", elements), readings.whole(exponent, elements))
        return d.some((above, zero, below))

    def _covered(self, node: m.Lookup, elements: Element) -> bool:
        """Whether a table of one key of bands plainly has a row for every number the argument can be."""
        table: m.Table = self.readings.declared[node.table]
        if len(table.keys) != 1 or not table.keys[0].bands:
            return False
        hull = self.readings.hulls.of(node.arguments[0], elements)
        bands = [label for row in table.rows for label in row.labels if isinstance(label, m.Band)]
        bands.sort(key=lambda band: (band.low is not None, band.low or 0))
        first, last = bands[0], bands[-1]
        if first.low is not None and (hull.low is None or hull.low <= first.low):
            return False
        if last.high is not None and (hull.high is None or hull.high > last.high):
            return False
        return all(a.high is not None and a.high == b.low for a, b in pairwise(bands))


def _works_on(node: m.Expression | m.Condition) -> tuple[m.Expression, ...]:
    """The parts that decide whether an operation has a value: it does not lack one where they lack theirs."""
    match node:
        case m.Lookup(arguments=inner) | m.Function(arguments=inner):
            return inner
        case m.Arithmetic(operator="/", right=divisor):
            return (divisor,)
        case m.Arithmetic(left=left, right=right):
            return (left, right)
        case _:
            return ()
