"""The number on every route: one array axis a branch point, projects side by side, no loop over routes.

An ``Evaluator`` takes a plan and rows of inputs. Where somebody may take more than one branch, and where a
judgement or a named setting is open, an axis stands; a quantity's table has only the axes it depends on.
Given a ``decide`` it takes one branch at each branch point instead, row by row, and has no axes at all.

A row or route without a result is NaN: no branch open, a table without a row, a division by zero, the root of
a negative number, a number too large to hold.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from samesum.evidence.trial.arrays import Array, Table, at, constant, spread_out, stacked, union, where_code
from samesum.evidence.trial.deciding import Decide, first_open, preferred
from samesum.evidence.trial.operations import TIE, operated, within
from samesum.evidence.trial.plan import Node, Plan
from samesum.reading import model as m

MOST_CELLS = 1 << 24


class TooMany(Exception):
    """A table would need more combinations than can be held; callers fall back to bounds."""


@dataclass(frozen=True, slots=True)
class Rows:
    """Inputs of projects side by side. ``numbers`` by id in the declared unit, ``codes`` places in the domain's
    list of names, ``flags`` yes or no. ``free``: where a setting or judgement is not given."""

    count: int
    numbers: Mapping[str, Array]
    codes: Mapping[str, Array]
    flags: Mapping[str, Array]
    free: Mapping[str, Array]

    def part(self, which: slice | Array) -> Rows:
        def taken(arrays: Mapping[str, Array]) -> dict[str, Array]:
            return {name: array[which] for name, array in arrays.items()}

        count = len(range(self.count)[which]) if isinstance(which, slice) else len(np.arange(self.count)[which])
        return Rows(count, taken(self.numbers), taken(self.codes), taken(self.flags), taken(self.free))


@dataclass(frozen=True, slots=True)
class Truth:
    """A condition: where it holds, and where all it asks has a value (None: everywhere)."""

    holds: Table
    valid: Table | None = None


@dataclass(frozen=True, slots=True)
class State:
    """Which branches of a branch point are open. With an ``axis``: ``order`` is the branch at each of its
    places, ``open`` where that branch is open. Without: ``codes`` is the branch taken, -1 for none."""

    axis: int | None
    order: tuple[int, ...]
    open: tuple[Table, ...]
    codes: Table | None


@dataclass(frozen=True, slots=True)
class Axis:
    """What an axis stands for. ``kind``: ``point`` (places are its branches), ``judgement`` (yes, no), ``named``
    (the domain's names), ``numeric`` (candidate values of a setting), ``part`` (a shared part at its lowest, at its
    highest). ``allowed``: places that a row may take, None for all."""

    kind: str
    name: str
    node: int
    size: int
    allowed: Array | None = None


@dataclass(slots=True)
class Evaluator:
    """Works out nodes of a plan, each once. ``decide`` and ``values`` (of settings) leave nothing open."""

    plan: Plan
    rows: Rows
    decide: Decide | None = None
    held: frozenset[str] = frozenset()
    candidates: Mapping[str, Array] = field(default_factory=dict)
    axes: list[Axis] = field(default_factory=list)
    _axis_of: dict[str, int] = field(default_factory=dict)
    _numbers: dict[int, Table] = field(default_factory=dict)
    _truths: dict[int, Truth] = field(default_factory=dict)
    _states: dict[int, State] = field(default_factory=dict)

    # -- axes ---------------------------------------------------------------------------

    def axis(self, kind: str, name: str, node: int, size: int, allowed: Array | None = None) -> int:
        key = f"{kind}:{name}"
        found = self._axis_of.get(key)
        if found is None:
            found = len(self.axes)
            self.axes.append(Axis(kind, name, node, size, allowed))
            self._axis_of[key] = found
        return found

    def _open(self, name: str, values: Array, size: int) -> Array | None:
        """The places a row may take: only its own where the value is given; None where all are open."""
        free = self.rows.free.get(name)
        if free is None or free.all():
            return None
        return np.asarray(free[None, :] | (np.arange(size)[:, None] == values[None, :]))

    def is_free(self, name: str) -> bool:
        free = self.rows.free.get(name)
        return self.decide is None and name not in self.held and free is not None and bool(free.any())

    def holding(self, held: frozenset[str]) -> Evaluator:
        """The same with more held at the reference; what does not depend on it is not worked out again."""
        made = Evaluator(self.plan, self.rows, self.decide, self.held | held, self.candidates, list(self.axes))
        made._axis_of = dict(self._axis_of)
        touched: list[bool] = []
        for node in self.plan.nodes:
            own = node.name in held and node.kind in ("point", "holds", "input", "code")
            touched.append(own or any(touched[each] for each in node.args))
        made._numbers = {number: table for number, table in self._numbers.items() if not touched[number]}
        made._truths = {number: truth for number, truth in self._truths.items() if not touched[number]}
        made._states = {number: state for number, state in self._states.items() if not touched[number]}
        return made

    # -- conditions ---------------------------------------------------------------------

    def truth(self, number: int) -> Truth:
        found = self._truths.get(number)
        if found is None:
            found = self._truth(number, self.plan.nodes[number])
            self._truths[number] = found
        return found

    def _truth(self, number: int, node: Node) -> Truth:
        match node.kind:
            case "true":
                return Truth(constant(True))
            case "holds":
                flags = self.rows.flags[node.name]
                if self.is_free(node.name):
                    allowed = self._open(node.name, np.where(flags, 0, 1), 2)
                    axis = self.axis("judgement", node.name, number, 2, allowed)
                    return Truth(Table((axis,), np.array([[True], [False]])))
                return Truth(Table((), flags))
            case "is":
                codes = self.number(node.args[0])
                return Truth(Table(codes.axes, np.isin(codes.data, node.chosen)))
            case "compare":
                return self._compared(node)
            case "takes":
                return self._takes(node)
            case "not":
                part = self.truth(node.args[0])
                return Truth(Table(part.holds.axes, ~part.holds.data), part.valid)
            case "all" | "some":
                parts = [self.truth(each) for each in node.args]
                fold: Any = np.logical_and if node.kind == "all" else np.logical_or
                holds = parts[0].holds
                for part in parts[1:]:
                    holds = self._sized(fold, holds, part.holds)
                return Truth(holds, _all_valid(self, [part.valid for part in parts]))
            case _:
                raise AssertionError(node.kind)

    def _compared(self, node: Node) -> Truth:
        left, right = self.number(node.args[0]), self.number(node.args[1])
        scales = [self.scale(each) for each in node.args]
        axes = union([left, right, *scales])
        self._check(axes)
        a, b, s, t = (spread_out(each, axes) for each in (left, right, *scales))
        difference = a - b
        near = np.abs(difference) <= TIE * (s + t)
        match node.name:
            case "=":
                holds = near
            case "<>":
                holds = ~near
            case "<":
                holds = (difference < 0) & ~near
            case "<=":
                holds = (difference < 0) | near
            case ">":
                holds = (difference > 0) & ~near
            case _:
                holds = (difference > 0) | near
        missing = np.isnan(difference)
        return Truth(Table(axes, holds), Table(axes, ~missing) if missing.any() else None)

    def scale(self, number: int) -> Table:
        """The size of the terms of a sum: what its rounding errors are in proportion to."""
        node = self.plan.nodes[number]
        if node.kind != "linear" or len(node.args) < 2:
            value = self.number(number)
            return Table(value.axes, np.abs(value.data))
        total = constant(abs(float(node.number)))
        for part, weight in zip(node.args, node.weights, strict=True):
            size = abs(float(weight))
            total = self._sized(lambda x, y, size=size: x + size * np.abs(y), total, self.number(part))
        return total

    def _takes(self, node: Node) -> Truth:
        state = self.state(node.args[0])
        wanted = node.chosen[0]
        if state.codes is not None:
            codes = state.codes
            missing = codes.data < 0
            valid = Table(codes.axes, ~missing) if missing.any() else None
            return Truth(Table(codes.axes, codes.data == wanted), valid)
        assert state.axis is not None
        holds = Table((state.axis,), np.array([[each == wanted] for each in state.order]))
        if all(each.data.all() for each in state.open):
            return Truth(holds)
        return Truth(holds, stacked(state.axis, state.open, False))

    def state(self, number: int) -> State:
        found = self._states.get(number)
        if found is None:
            found = self._state(number, self.plan.nodes[number])
            self._states[number] = found
        return found

    def _state(self, number: int, node: Node) -> State:
        point = self.plan.point(number)
        conditions = [self.truth(each) for each in node.args[: len(point.branches)]]
        valid = _all_valid(self, [each.valid for each in conditions])
        open_: list[Table] = []
        earlier: Table | None = None
        for condition, written in zip(conditions, point.conditions, strict=True):
            holds = condition.holds
            if point.kind == "cases in order" or (point.kind == "cases" and written is None):
                here = holds
                if earlier is not None:
                    holds = self._sized(lambda x, y: x & ~y, here, earlier)
                earlier = here if earlier is None else self._sized(np.logical_or, earlier, here)
            elif point.kind == "cases":
                earlier = holds if earlier is None else self._sized(np.logical_or, earlier, holds)
            open_.append(holds if valid is None else self._sized(np.logical_and, holds, valid))
        if point.leader:
            return self._following(node, open_, point.branches)
        return self._settled(number, open_)

    def _following(self, node: Node, open_: list[Table], branches: tuple[str, ...]) -> State:
        leader = self.state(node.args[-1])
        names = self.plan.point(node.args[-1]).branches
        order = [branches.index(name) if name in branches else -1 for name in names]
        if leader.codes is not None:
            own = np.array([*order, -1])[leader.codes.data]
            codes = Table(leader.codes.axes, own)
            for place, each in enumerate(open_):
                codes = self._sized(lambda c, o, place=place: np.where((c == place) & ~o, -1, c), codes, each)
            return State(None, (), (), codes)
        assert leader.axis is not None
        places, states = [], []
        for place, (branch, holds) in enumerate(zip(leader.order, leader.open, strict=True)):
            mine = order[branch]
            places.append(mine)
            here = constant(False) if mine < 0 else at(open_[mine], leader.axis, place)
            states.append(self._sized(np.logical_and, holds, here))
        return State(leader.axis, tuple(places), tuple(states), None)

    def _settled(self, number: int, open_: list[Table]) -> State:
        """One branch where no row leaves a choice (or somebody decided), else an axis."""
        id = self.plan.nodes[number].name
        if self.decide is not None:
            return State(None, (), (), Table((), self.decide(id, open_, self.rows.count)))
        if id in self.held:
            return State(None, (), (), first_open(open_, preferred(self.plan, id)))
        if sum(bool(each.data.any()) for each in open_) > 1:
            axes = union(open_)
            self._check(axes)
            several = sum(spread_out(each, axes).astype(np.int8) for each in open_)
            if np.max(several) > 1:
                axis = self.axis("point", id, number, len(open_))
                return State(axis, tuple(range(len(open_))), tuple(open_), None)
        return State(None, (), (), first_open(open_, range(len(open_))))

    # -- numbers ------------------------------------------------------------------------

    def number(self, number: int) -> Table:
        found = self._numbers.get(number)
        if found is None:
            with np.errstate(all="ignore"):
                found = self._number(number, self.plan.nodes[number])
            self._numbers[number] = found
        return found

    def _number(self, number: int, node: Node) -> Table:
        match node.kind:
            case "number":
                return constant(float(node.number))
            case "named":
                return Table((), np.array([node.chosen[0]]))
            case "input":
                return self._input(number, node)
            case "code":
                codes = self.rows.codes[node.name]
                if self.is_free(node.name):
                    size = len(self.plan.named[node.name])
                    axis = self.axis("named", node.name, number, size, self._open(node.name, codes, size))
                    return Table((axis,), np.arange(size)[:, None])
                return Table((), codes)
            case "select":
                return self._selected(node)
            case "guard":
                value = self.number(node.args[0])
                for each in node.args[1:]:
                    truth = self.truth(each)
                    valid = (
                        truth.holds if truth.valid is None else self._sized(np.logical_and, truth.holds, truth.valid)
                    )
                    value = self._sized(lambda v, w: np.where(w, v, np.nan), value, valid)
                return value
            case "lookup":
                return self._looked_up(node)
            case _:
                return self._sized(lambda *parts: operated(node, parts), *(self.number(each) for each in node.args))

    def _input(self, number: int, node: Node) -> Table:
        if self.is_free(node.name):
            values = self.candidates[node.name]
            axis = self.axis("numeric", node.name, number, len(values))
            return Table((axis,), values)
        return Table((), self.rows.numbers[node.name])

    def _selected(self, node: Node) -> Table:
        state = self.state(node.args[0])
        bodies = node.args[1:]
        if state.codes is not None:
            codes = state.codes
            taken = [int(each) for each in np.unique(codes.data)]
            if len(taken) == 1:
                return self.number(bodies[taken[0]]) if taken[0] >= 0 else constant(np.nan)
            value = constant(np.nan)
            for each in taken:
                if each >= 0:
                    here = self.number(bodies[each])
                    value = self._sized(where_code(each), codes, here, value)
            return value
        assert state.axis is not None
        parts = []
        for place, (branch, open_) in enumerate(zip(state.order, state.open, strict=True)):
            if branch < 0 or not open_.data.any():
                parts.append(constant(np.nan))
                continue
            value = at(self.number(bodies[branch]), state.axis, place)
            if not open_.data.all():
                value = self._sized(lambda o, v: np.where(o, v, np.nan), open_, value)
            parts.append(value)
        self._check((*union(parts), state.axis))
        return stacked(state.axis, parts, np.nan)

    def _looked_up(self, node: Node) -> Table:
        table = self.plan.tables[node.name]
        parts = [self.number(each) for each in node.args]
        axes = union(parts)
        self._check(axes)
        arrays = [spread_out(part, axes) for part in parts]
        if not any(key.bands for key in table.keys):
            return Table(axes, self._named_row(node, table, arrays))
        value: Array = np.full(np.broadcast_shapes(*(array.shape for array in arrays)), np.nan)
        for row in reversed(table.rows):
            here: Any = True
            for label, key, array, arg in zip(row.labels, table.keys, arrays, node.args, strict=True):
                here = here & (
                    within(array, label) if isinstance(label, m.Band) else array == self._code(key, arg, label)
                )
            value = np.where(here, float(row.value), value)
        return Table(axes, value)

    def _named_row(self, node: Node, table: m.Table, arrays: Sequence[Array]) -> Array:
        sizes = [len(self._names(key, arg)) for key, arg in zip(table.keys, node.args, strict=True)]
        values: Array = np.full(sizes, np.nan)
        for row in table.rows:
            place = tuple(
                self._code(key, arg, str(label))
                for key, arg, label in zip(table.keys, node.args, row.labels, strict=True)
            )
            if all(each >= 0 for each in place):
                values[place] = float(row.value)
        found: Array = values[tuple(arrays)]
        return found

    def _names(self, key: m.Key, arg: int) -> tuple[str, ...]:
        node = self.plan.nodes[arg]
        return self.plan.named[node.name] if node.kind == "code" else key.values

    def _code(self, key: m.Key, arg: int, label: str) -> int:
        names = self._names(key, arg)
        return names.index(label) if label in names else -1

    # -- sizes --------------------------------------------------------------------------

    def _sized(self, operation: Callable[..., Array], *tables: Table) -> Table:
        axes = union(tables)
        if axes:
            self._check(axes)
        return Table(axes, operation(*(spread_out(table, axes) for table in tables)))

    def _check(self, axes: Sequence[int]) -> None:
        cells = 1
        for axis in set(axes):
            cells *= self.axes[axis].size
        if cells * max(1, min(self.rows.count, 64)) > MOST_CELLS or len(axes) > 60:
            raise TooMany


def _all_valid(evaluator: Evaluator, parts: Sequence[Table | None]) -> Table | None:
    found: Table | None = None
    for part in parts:
        if part is not None:
            found = part if found is None else evaluator._sized(np.logical_and, found, part)
    return found
