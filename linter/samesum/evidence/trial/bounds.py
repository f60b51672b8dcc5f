"""Proved ranges of a plan's numbers over boxes of inputs, with their slopes.

Every number is an interval that holds it for all inputs of a box and all routes; beside it stand intervals of its
slopes in the inputs that are split, so that an input in which the number only rises or only falls can be
pinned to one end (Moore 1966, Interval Analysis; the slopes are worked out forwards).
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from functools import reduce
from typing import Any

import numpy as np

from samesum.evidence.trial import intervals as iv
from samesum.evidence.trial.arrays import Array
from samesum.evidence.trial.intervals import Interval
from samesum.evidence.trial.plan import Node, Plan
from samesum.reading import model as m

ZERO = Interval(np.zeros(1), np.zeros(1))
ONE = Interval(np.ones(1), np.ones(1))
ANY = Interval(np.full(1, -np.inf), np.full(1, np.inf))

Slopes = Mapping[str, Interval]


@dataclass(frozen=True, slots=True)
class Boxes:
    """Inputs of many boxes side by side. ``low`` and ``high`` by numeric name; ``codes``: which of its names a fact or
    setting may have (one line a name); ``flags``: whether a condition's fact or judgement may hold, may not;
    ``taken``: the branch of each branch point that is settled."""

    count: int
    low: Mapping[str, Array]
    high: Mapping[str, Array]
    codes: Mapping[str, Array]
    flags: Mapping[str, tuple[Array, Array]]
    taken: Mapping[str, Array] = field(default_factory=dict)

    def part(self, which: Array) -> Boxes:
        return Boxes(
            len(which),
            {name: each[which] for name, each in self.low.items()},
            {name: each[which] for name, each in self.high.items()},
            {name: each[:, which] for name, each in self.codes.items()},
            {name: (yes[which], no[which]) for name, (yes, no) in self.flags.items()},
            {id: each[which] for id, each in self.taken.items()},
        )


def domain_boxes(plan: Plan) -> Boxes:
    """One box that holds every project and everything that anybody decides."""
    low = {
        name: np.full(1, -math.inf) if each.low is None else iv.exactly(each.low).low
        for name, each in plan.numeric.items()
    }
    high = {
        name: np.full(1, math.inf) if each.high is None else iv.exactly(each.high).high
        for name, each in plan.numeric.items()
    }
    codes = {name: np.ones((len(values), 1), dtype=bool) for name, values in plan.named.items()}
    yes = np.ones(1, dtype=bool)
    flags = {node.name: (yes, yes) for node in plan.nodes if node.kind == "holds"}
    return Boxes(1, low, high, codes, flags)


@dataclass(frozen=True, slots=True)
class Ranged:
    """A number's interval and its slopes; a name that is missing has slope zero."""

    value: Interval
    slopes: Slopes


@dataclass(frozen=True, slots=True)
class Verdict:
    """Whether a condition may hold, and may fail, somewhere in a box."""

    may: Array
    may_not: Array


@dataclass(slots=True)
class Ranges:
    """Works out nodes over boxes, each once. ``names``: inputs in which slopes are wanted."""

    plan: Plan
    boxes: Boxes
    names: frozenset[str] = frozenset()
    _numbers: dict[int, Ranged] = field(default_factory=dict)
    _verdicts: dict[int, Verdict] = field(default_factory=dict)
    _branches: dict[int, list[Array]] = field(default_factory=dict)

    def number(self, number: int) -> Ranged:
        found = self._numbers.get(number)
        if found is None:
            node = self.plan.nodes[number]
            with np.errstate(all="ignore"):
                found = self._number(node)
                if node.kind not in ("number", "input", "select", "lookup", "guard"):
                    found = _emptied(found, [self._numbers[each] for each in node.args if each in self._numbers])
            self._numbers[number] = found
        return found

    def _number(self, node: Node) -> Ranged:
        match node.kind:
            case "number":
                return Ranged(iv.exactly(node.number), {})
            case "input":
                value = Interval(self.boxes.low[node.name], self.boxes.high[node.name])
                return Ranged(value, {node.name: ONE} if node.name in self.names else {})
            case "linear":
                return self._linear(node)
            case "product":
                found = self.number(node.args[0])
                for each in node.args[1:]:
                    found = _product(found, self.number(each))
                return found
            case "divide":
                return _quotient(self.number(node.args[0]), self.number(node.args[1]))
            case "power":
                return self._power(node)
            case "min" | "max":
                return _extreme(node.kind, [self.number(each) for each in node.args])
            case "call":
                return _called(node.name, self.number(node.args[0]))
            case "lookup":
                return self._looked_up(node)
            case "select":
                return self._selected(node)
            case "guard":
                return self.number(node.args[0])
            case _:
                raise AssertionError(node.kind)

    def _linear(self, node: Node) -> Ranged:
        total = iv.exactly(node.number)
        slopes: dict[str, Interval] = {}
        for each, weight in zip(node.args, node.weights, strict=True):
            part, scale = self.number(each), iv.exactly(weight)
            total = iv.added(total, iv.multiplied(part.value, scale))
            for name, slope in part.slopes.items():
                slopes[name] = iv.added(slopes.get(name, ZERO), iv.multiplied(slope, scale))
        return Ranged(total, slopes)

    def _power(self, node: Node) -> Ranged:
        base, over = self.number(node.args[0]), self.plan.nodes[node.args[1]]
        if over.kind == "number" and over.number.denominator == 1 and over.number > 0:
            exponent = int(over.number)
            value = iv.whole_power(base.value, exponent)
            inner = ONE if exponent == 1 else iv.whole_power(base.value, exponent - 1)
            return Ranged(value, _scaled(base.slopes, iv.multiplied(iv.exactly(Fraction(exponent)), inner)))
        exponent_range = self.number(node.args[1])
        value = iv.powered(base.value, exponent_range.value)
        by_base = iv.multiplied(
            exponent_range.value, iv.powered(base.value, iv.added(exponent_range.value, Interval(-ONE.low, -ONE.high)))
        )
        by_exponent = iv.multiplied(value, iv.called("ln", base.value))
        return Ranged(value, _sum(_scaled(base.slopes, by_base), _scaled(exponent_range.slopes, by_exponent)))

    # -- tables and branch points -----------------------------------------------------------

    def _looked_up(self, node: Node) -> Ranged:
        table = self.plan.tables[node.name]
        low: Array = np.full(1, np.inf)
        high: Array = np.full(1, -np.inf)
        several: Array = np.zeros(1, dtype=np.int64)
        arguments: list[Ranged] = []
        for row in table.rows:
            may: Any = np.ones(1, dtype=bool)
            for label, key, arg in zip(row.labels, table.keys, node.args, strict=True):
                if isinstance(label, m.Band):
                    part = self.number(arg)
                    arguments.append(part)
                    if label.low is not None:
                        may = may & (part.value.high >= float(label.low))
                    if label.high is not None:
                        may = may & (part.value.low <= float(label.high))
                else:
                    may = may & self._may_be(key, arg, label)
            value = iv.exactly(row.value)
            low = np.where(may, np.minimum(low, value.low), low)
            high = np.where(may, np.maximum(high, value.high), high)
            several = several + may
        jumps = (low != high) & (several > 1)
        return Ranged(Interval(low, high), _jumping(arguments, jumps))

    def _may_be(self, key: m.Key, arg: int, label: str) -> Array:
        inner = self.plan.nodes[arg]
        if inner.kind == "named":
            return np.full(1, label == inner.name)
        names = self.plan.named[inner.name]
        return self.boxes.codes[inner.name][names.index(label)] if label in names else np.zeros(1, dtype=bool)

    def _selected(self, node: Node) -> Ranged:
        open_ = self.branches(node.args[0])
        bodies = [self.number(body) for body in node.args[1:]]
        low: Array = np.full(1, np.inf)
        high: Array = np.full(1, -np.inf)
        slopes: dict[str, Interval] = {}
        names = sorted({name for body in bodies for name in body.slopes})
        for here, body in zip(open_, bodies, strict=True):
            low = np.where(here, np.minimum(low, body.value.low), low)
            high = np.where(here, np.maximum(high, body.value.high), high)
        for name in names:
            steep = [(here, body.slopes.get(name, ZERO)) for here, body in zip(open_, bodies, strict=True)]
            down: Array = np.full(1, np.inf)
            up: Array = np.full(1, -np.inf)
            for here, slope in steep:
                down = np.where(here, np.minimum(down, slope.low), down)
                up = np.where(here, np.maximum(up, slope.high), up)
            slopes[name] = Interval(np.where(np.isposinf(down), 0.0, down), np.where(np.isneginf(up), 0.0, up))
        doubtful = self._doubtful(node.args[0])
        if doubtful.any():
            for name in self.names:
                slope = slopes.get(name, ZERO)
                slopes[name] = Interval(np.where(doubtful, -np.inf, slope.low), np.where(doubtful, np.inf, slope.high))
        return Ranged(Interval(low, high), slopes)

    def _doubtful(self, number: int) -> Array:
        """Boxes in which the branch point's own conditions may change: the number may jump there."""
        found: Array = np.zeros(1, dtype=bool)
        for each in self.plan.nodes[number].args:
            if self.plan.nodes[each].kind == "point":
                found = found | self._doubtful(each)
            else:
                verdict = self.verdict(each)
                found = found | (verdict.may & verdict.may_not)
        return found

    def branches(self, number: int) -> list[Array]:
        """Which branches may be taken somewhere in a box."""
        found = self._branches.get(number)
        if found is None:
            found = self._open(number)
            self._branches[number] = found
        return found

    def _open(self, number: int) -> list[Array]:
        node, point = self.plan.nodes[number], self.plan.point(number)
        verdicts = [self.verdict(each) for each in node.args[: len(point.branches)]]
        open_: list[Array] = []
        no_earlier: Array = np.ones(1, dtype=bool)
        for verdict, written in zip(verdicts, point.conditions, strict=True):
            may = verdict.may
            if point.kind == "cases in order" or (point.kind == "cases" and written is None):
                may = may & no_earlier
            if point.kind in ("cases", "cases in order"):
                no_earlier = no_earlier & verdict.may_not
            open_.append(may)
        if point.leader:
            leader = self.branches(node.args[-1])
            names = self.plan.point(node.args[-1]).branches
            open_ = [may & leader[names.index(name)] for may, name in zip(open_, point.branches, strict=True)]
        elif node.name in self.boxes.taken:
            wanted = self.boxes.taken[node.name]
            open_ = [may & (place == wanted) for place, may in enumerate(open_)]
        return open_

    # -- conditions -----------------------------------------------------------------------

    def verdict(self, number: int) -> Verdict:
        found = self._verdicts.get(number)
        if found is None:
            found = self._verdict(self.plan.nodes[number])
            self._verdicts[number] = found
        return found

    def _verdict(self, node: Node) -> Verdict:
        yes, no = np.ones(1, dtype=bool), np.zeros(1, dtype=bool)
        match node.kind:
            case "true":
                return Verdict(yes, no)
            case "holds":
                return Verdict(*self.boxes.flags[node.name])
            case "is":
                codes = self.boxes.codes[self.plan.nodes[node.args[0]].name]
                chosen = np.isin(np.arange(len(codes)), node.chosen)
                may, may_not = codes[chosen].any(axis=0), codes[~chosen].any(axis=0)
                return Verdict(np.asarray(may), np.asarray(may_not))
            case "takes":
                open_ = self.branches(node.args[0])
                others = [may for place, may in enumerate(open_) if place != node.chosen[0]]
                return Verdict(open_[node.chosen[0]], reduce(np.logical_or, others) if others else no)
            case "compare":
                return self._compared(node)
            case "not":
                part = self.verdict(node.args[0])
                return Verdict(part.may_not, part.may)
            case "all":
                parts = [self.verdict(each) for each in node.args]
                return Verdict(
                    reduce(np.logical_and, [part.may for part in parts]),
                    reduce(np.logical_or, [part.may_not for part in parts]),
                )
            case "some":
                parts = [self.verdict(each) for each in node.args]
                return Verdict(
                    reduce(np.logical_or, [part.may for part in parts]),
                    reduce(np.logical_and, [part.may_not for part in parts]),
                )
            case _:
                raise AssertionError(node.kind)

    def _compared(self, node: Node) -> Verdict:
        left, right = self.number(node.args[0]).value, self.number(node.args[1]).value
        less, more = left.low < right.high, left.high > right.low
        touch = (left.low <= right.high) & (left.high >= right.low)
        same = (left.low == left.high) & (right.low == right.high) & (left.low == right.low)
        match node.name:
            case "<":
                return Verdict(less, left.high >= right.low)
            case "<=":
                return Verdict(left.low <= right.high, more)
            case ">":
                return Verdict(more, left.low <= right.high)
            case ">=":
                return Verdict(left.high >= right.low, less)
            case "=":
                return Verdict(touch, ~same)
            case _:
                return Verdict(~same, touch)


def _emptied(made: Ranged, parts: Sequence[Ranged]) -> Ranged:
    """Nothing where a part is nothing (no branch open, no row of a table): low above high."""
    nothing: Any = False
    for part in parts:
        nothing = nothing | (part.value.low > part.value.high)
    if not np.any(nothing):
        return made
    value = Interval(np.where(nothing, np.inf, made.value.low), np.where(nothing, -np.inf, made.value.high))
    return Ranged(value, made.slopes)


# --- slopes ----------------------------------------------------------------------------------


def _scaled(slopes: Slopes, factor: Interval) -> dict[str, Interval]:
    return {name: iv.multiplied(slope, factor) for name, slope in slopes.items()}


def _sum(one: Slopes, other: Slopes) -> dict[str, Interval]:
    made = dict(one)
    for name, slope in other.items():
        made[name] = iv.added(made[name], slope) if name in made else slope
    return made


def _product(a: Ranged, b: Ranged) -> Ranged:
    return Ranged(iv.multiplied(a.value, b.value), _sum(_scaled(a.slopes, b.value), _scaled(b.slopes, a.value)))


def _quotient(a: Ranged, b: Ranged) -> Ranged:
    value = iv.divided(a.value, b.value)
    over = iv.divided(ONE, b.value)
    turned = iv.multiplied(value, Interval(-over.high, -over.low))
    return Ranged(value, _sum(_scaled(a.slopes, over), _scaled(b.slopes, turned)))


def _extreme(kind: str, parts: Sequence[Ranged]) -> Ranged:
    values = [part.value for part in parts]
    value = iv.smallest(values) if kind == "min" else iv.largest(values)
    slopes: dict[str, Interval] = {}
    for name in sorted({name for part in parts for name in part.slopes}):
        down: Array = np.full(1, np.inf)
        up: Array = np.full(1, -np.inf)
        for part in parts:
            # a part that is never the extreme does not move it
            counts = part.value.low <= value.high if kind == "min" else part.value.high >= value.low
            slope = part.slopes.get(name, ZERO)
            down = np.where(counts, np.minimum(down, slope.low), down)
            up = np.where(counts, np.maximum(up, slope.high), up)
        slopes[name] = Interval(down, up)
    return Ranged(value, slopes)


def _called(name: str, part: Ranged) -> Ranged:
    value = iv.called(name, part.value)
    low, high = part.value.low, part.value.high
    if name in ("round", "floor", "ceil"):
        return Ranged(value, _jumping([part], value.low != value.high))
    if name == "abs":
        factor = Interval(np.where(low >= 0, 1.0, -1.0), np.where(high <= 0, -1.0, 1.0))
    elif name == "exp":
        factor = value
    elif name == "ln":
        safe = Interval(np.maximum(low, 0.0), np.maximum(high, 0.0))
        factor = iv.divided(ONE, safe)
    else:
        factor = iv.divided(Interval(np.full(1, 0.5), np.full(1, 0.5)), value)
    return Ranged(value, _scaled(part.slopes, factor))


def _jumping(parts: Sequence[Ranged], where: Array) -> dict[str, Interval]:
    names = sorted({name for part in parts for name in part.slopes})
    return {name: Interval(np.where(where, -np.inf, 0.0), np.where(where, np.inf, 0.0)) for name in names}
