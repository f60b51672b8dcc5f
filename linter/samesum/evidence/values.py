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

from samesum.evidence.arrays import Array, Table, at, constant, spread_out, stacked, union, where_code
from samesum.evidence.plan import Node, Plan
from samesum.reading import model as m

TIE = 1e-12  # comparisons of decimal inputs in floats: what is nearer than this share of its terms is equal
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


Decide = Callable[[str, Sequence[Table], int], Array]
"""Branch point, where each branch is open, number of rows → the branch of each row (-1 for none)."""


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
        scales = [self._scale(each) for each in node.args]
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

    def _scale(self, number: int) -> Table:
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


def within(value: Array, band: m.Band) -> Any:
    """Where a number lies in a band (``low`` < x <= ``high``), ends told apart as in comparisons."""
    here: Any = ~np.isnan(value)
    if band.low is not None:
        low = float(band.low)
        here = here & (value - low > TIE * (np.abs(value) + abs(low)))
    if band.high is not None:
        high = float(band.high)
        here = here & (value - high <= TIE * (np.abs(value) + abs(high)))
    return here


def operated(node: Node, parts: Sequence[Array]) -> Array:
    """A sum, product, quotient, power, minimum, maximum or function, element by element."""
    match node.kind:
        case "linear":
            terms = [
                part if weight == 1 else part * float(weight) for part, weight in zip(parts, node.weights, strict=True)
            ]
            if node.number:
                terms.append(np.full(1, float(node.number)))
            return _folded(np.add, terms)
        case "product":
            return _folded(np.multiply, parts)
        case "divide":
            return finite(parts[0] / parts[1])
        case "power":
            return finite(np.power(parts[0], parts[1]))
        case "min" | "max":
            return _folded(np.minimum if node.kind == "min" else np.maximum, parts)
        case _:
            return FUNCTIONS[node.name](parts[0])


def _folded(operation: Any, parts: Sequence[Array]) -> Array:
    """One operation over all parts, the smaller arrays first; a result is written over where it is large enough."""
    ordered = sorted(parts, key=lambda part: part.size)
    found = ordered[0]
    own = False
    for part in ordered[1:]:
        if own and np.broadcast_shapes(found.shape, part.shape) == found.shape:
            operation(found, part, out=found)
        else:
            found = operation(found, part)
            own = True
    return found


def finite(value: Array) -> Array:
    return np.where(np.isfinite(value), value, np.nan)


def nearest_whole(value: Array) -> Array:
    """The nearest whole number, halves away from zero."""
    whole: Array = np.copysign(np.floor(np.abs(value) + 0.5), value)
    return whole


FUNCTIONS: Mapping[str, Callable[[Array], Array]] = {
    "abs": np.abs,
    "sqrt": np.sqrt,
    "exp": lambda value: finite(np.exp(value)),
    "ln": lambda value: finite(np.log(value)),
    "round": nearest_whole,
    "floor": np.floor,
    "ceil": np.ceil,
}


def first_open(open_: Sequence[Table], order: Sequence[int]) -> Table:
    """The first open branch in an order, -1 where none is."""
    axes = union(open_)
    arrays = [spread_out(each, axes) for each in open_]
    codes: Array = np.full(np.broadcast_shapes(*(array.shape for array in arrays)), -1, dtype=np.int64)
    for branch in reversed(order):
        codes = np.where(arrays[branch], branch, codes)
    return Table(axes, codes)


def preferred(plan: Plan, id: str) -> list[int]:
    """The branches in the order in which the reference takes them: the option marked so, then those whose error is
    stated, the lowest first, then the others as written. Of cases as written."""
    body = plan.graph.branch_points[id].body
    if not isinstance(body, m.Choice):
        return list(range(len(plan.graph.branch_points[id].branches)))
    marked = [place for place, option in enumerate(body.options) if option.reference]
    stated = [(option.error, place) for place, option in enumerate(body.options) if option.error is not None]
    order = [*marked, *(place for _, place in sorted(stated)), *range(len(body.options))]
    return list(dict.fromkeys(order))


def reference_decision(plan: Plan) -> Decide:
    """Takes the reference at every branch point: its first open branch in the order of ``preferred``."""

    def decide(id: str, open_: Sequence[Table], rows: int) -> Array:
        return np.broadcast_to(first_open(open_, preferred(plan, id)).data, (rows,))

    return decide


def decision(codes: Mapping[str, Array], plan: Plan) -> Decide:
    """Takes the given branches; where none is given, or it is not open, what ``otherwise`` says: the reference."""

    def decide(id: str, open_: Sequence[Table], rows: int) -> Array:
        fallback = np.broadcast_to(first_open(open_, preferred(plan, id)).data, (rows,))
        wanted = codes.get(id)
        if wanted is None:
            return fallback
        can = np.zeros(rows, dtype=bool)
        for branch, each in enumerate(open_):
            can |= (wanted == branch) & np.broadcast_to(each.data, (rows,))
        return np.where(can, wanted, fallback)

    return decide


def reached(evaluator: Evaluator) -> dict[str, Array]:
    """Which rows reach each branch point, when everything is decided: {branch point: yes or no by row}."""
    plan = evaluator.plan
    count = evaluator.rows.count
    active: dict[int, Array] = {plan.root: np.ones(count, dtype=bool)}
    found: dict[str, Array] = {}
    for number in range(plan.root, -1, -1):
        here = active.pop(number, None)
        if here is None or not here.any():
            continue
        node = plan.nodes[number]
        if node.kind == "select":
            state = evaluator.state(node.args[0])
            codes = _codes(state, count)
            targets = [(node.args[0], here)]
            targets += [(body, here & (codes == place)) for place, body in enumerate(node.args[1:])]
        else:
            if node.kind == "point":
                found[node.name] = here
            targets = [(each, here) for each in node.args]
        for target, where in targets:
            active[target] = where if target not in active else active[target] | where
    return found


def _codes(state: State, count: int) -> Array:
    assert state.codes is not None
    return np.broadcast_to(state.codes.data, (count,))


def route_codes(evaluator: Evaluator) -> dict[str, Array]:
    """The route of each row, when everything is decided: the branch taken at each branch point, -1 for not
    reached (or stuck)."""
    where = reached(evaluator)
    count = evaluator.rows.count
    found = {}
    for id, number in evaluator.plan.points.items():
        here = where.get(id)
        if here is None:
            continue
        found[id] = np.where(here, _codes(evaluator.state(number), count), -1).astype(np.int16)
    return found
