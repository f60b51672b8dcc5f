"""How many routes are open to each project, as exact whole numbers and without listing them.

Each branch point has a state for every row: one of its branches, or not reached. What belongs together stands in
one small table of yes and no; human inputs are projected out, then states are summed, one at a time (bucket
elimination, Dechter 1999). Routes are maps, so two ways of deciding that lead to the same map count once.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field

import numpy as np

from samesum.evidence.trial.arrays import Array, Table, spread_out, stacked, union
from samesum.evidence.trial.plan import CONDITIONS
from samesum.evidence.trial.structure import Structure, steady
from samesum.evidence.trial.values import MOST_CELLS, Evaluator, TooMany

INPUT = 1 << 40  # added to an axis's number when it stands for a judgement or setting

Reached = Mapping[int, frozenset[int]] | None
"""When an operation takes part: {what has a state: states that lead to it}; None for always. A state belongs to
a branch point, or to a ``select`` where its branch point can be reached without its bodies."""


def count_routes(evaluator: Evaluator, structure: Structure) -> Array:
    """The number of complete routes of each row, as whole numbers (of any length where need be). Raises
    ``TooMany`` where conditions hang together too closely."""
    counter = _Counter(evaluator, structure)
    return counter.count()


@dataclass(slots=True)
class _Counter:
    evaluator: Evaluator
    structure: Structure
    sizes: dict[int, int] = field(default_factory=dict)

    def count(self) -> Array:
        with np.errstate(all="ignore"):
            factors = self._factors()
        rows = self.evaluator.rows.count
        inputs = sorted({axis for factor in factors for axis in factor.axes if axis >= INPUT})
        for axis in inputs:
            factors = self._eliminated(factors, axis, np.logical_and, np.logical_or.reduce)
        most = math.prod(size for axis, size in self.sizes.items() if axis < INPUT)
        kind = np.int64 if most < 1 << 62 else object
        counts = [Table(factor.axes, factor.data.astype(kind)) for factor in factors]
        while any(factor.axes for factor in counts):
            counts = self._eliminated(counts, self._cheapest(counts), np.multiply, np.add.reduce)
        total: Array = np.ones(rows, dtype=kind)
        for factor in counts:
            total = total * factor.data
        return np.broadcast_to(total, (rows,))

    def _cheapest(self, factors: list[Table]) -> int:
        best: tuple[int, int] | None = None
        for axis in sorted({axis for factor in factors for axis in factor.axes}):
            joint = {each for factor in factors if axis in factor.axes for each in factor.axes}
            cost = math.prod(self.sizes[each] for each in joint)
            if best is None or (cost, axis) < best:
                best = (cost, axis)
        assert best is not None
        return best[1]

    def _eliminated(
        self, factors: list[Table], axis: int, together: Callable[..., Array], fold: Callable[..., Array]
    ) -> list[Table]:
        mine = [factor for factor in factors if axis in factor.axes]
        axes = union(mine)
        if (
            math.prod(self.sizes[each] for each in axes) * min(self.evaluator.rows.count, 64) > MOST_CELLS
            or len(axes) > 60
        ):
            raise TooMany
        joint: Array = spread_out(mine[0], axes)
        for factor in mine[1:]:
            joint = together(joint, spread_out(factor, axes))
        place = axes.index(axis)
        left = axes[:place] + axes[place + 1 :]
        return [*(factor for factor in factors if axis not in factor.axes), Table(left, fold(joint, axis=place))]

    # -- what belongs together ------------------------------------------------------------

    def _factors(self) -> list[Table]:
        evaluator, plan, structure = self.evaluator, self.evaluator.plan, self.structure
        shared = _asked_besides(structure)
        when = _when_reached(structure, shared)
        for number in structure.children:
            if plan.nodes[number].kind == "point":
                self.sizes[number] = len(plan.point(number).branches) + 1
        for number in shared:
            self.sizes[number] = self.sizes[plan.nodes[number].args[0]]
        for place, axis in enumerate(evaluator.axes):
            if axis.kind not in ("point", "part"):
                self.sizes[INPUT + place] = axis.size
        factors: list[Table] = []
        for number, reach in when.items():
            node = plan.nodes[number]
            if node.kind == "point":
                factors.append(self._state_factor(number, reach))
            elif number in shared:
                factors.append(self._body_factor(number, reach))
            elif node.kind == "guard":
                for each in node.args[1:]:
                    truth = evaluator.truth(each)
                    factors.append(self._mapped(truth.holds))
                    if truth.valid is not None:
                        factors.append(self._mapped(truth.valid))
            elif node.kind not in CONDITIONS and self._may_lack(number):
                value = evaluator.number(number)
                has = Table(value.axes, np.isfinite(value.data))
                if not has.data.all():
                    factors.append(self._joined(np.logical_or, _negated(self._reach_table(reach)), self._mapped(has)))
        for place, axis in enumerate(evaluator.axes):
            if axis.allowed is not None and INPUT + place in self.sizes:
                factors.append(Table((INPUT + place,), axis.allowed))
        return factors

    def _may_lack(self, number: int) -> bool:
        node = self.evaluator.plan.nodes[number]
        if node.kind == "lookup":
            return True
        spans = [self.structure.spans.get(each, (-math.inf, math.inf)) for each in node.args]
        if node.kind == "call" and node.name == "abs":
            return False
        if node.kind == "power" and spans[1][0] == spans[1][1] and spans[1][0] >= 0 and spans[1][0] == int(spans[1][0]):
            return False
        return not steady(node, spans)

    def _joined(self, operation: Callable[..., Array], *tables: Table) -> Table:
        axes = union(tables)
        if math.prod(self.sizes[each] for each in axes) > MOST_CELLS or len(axes) > 60:
            raise TooMany
        return Table(axes, operation(*(spread_out(table, axes) for table in tables)))

    def _reach_table(self, reach: Reached) -> Table:
        if reach is None:
            return Table((), np.array([True]))
        found = Table((), np.array([False]))
        for point, branches in sorted(reach.items()):
            here = np.isin(np.arange(self.sizes[point]), sorted(branches))
            found = self._joined(np.logical_or, found, Table((point,), here[:, None]))
        return found

    def _state_factor(self, number: int, reach: Reached) -> Table:
        """Which states of a branch point go with the rest: a branch where it is reached and the branch is open,
        ``not reached`` elsewhere."""
        state = self.evaluator.state(number)
        branches = self.sizes[number] - 1
        open_: list[Table] = []
        if state.codes is not None:
            codes = self._mapped(state.codes)
            open_ = [Table(codes.axes, codes.data == branch) for branch in range(branches)]
        else:
            assert state.axis is not None
            leader = self.evaluator.axes[state.axis].node
            if leader == number:
                open_ = [self._mapped(each) for each in state.open]
            else:
                nothing = Table((), np.array([False]))
                for branch in range(branches):
                    here = [
                        self._mapped(each) if mine == branch else nothing
                        for mine, each in zip(state.order, state.open, strict=True)
                    ]
                    open_.append(stacked(leader, [*here, nothing], False))
        where = self._reach_table(reach)
        parts = [self._joined(np.logical_and, where, each) for each in open_]
        made = stacked(number, [*parts, _negated(where)], False)
        return made

    def _body_factor(self, number: int, reach: Reached) -> Table:
        """A select has the state of its branch point where it is evaluated, else none."""
        point = self.evaluator.plan.nodes[number].args[0]
        size = self.sizes[point]
        where = self._reach_table(reach)
        parts = []
        for branch in range(size - 1):
            same = (np.arange(size) == branch)[:, None]
            parts.append(self._joined(np.logical_and, where, Table((point,), same)))
        return stacked(number, [*parts, _negated(where)], False)

    def _mapped(self, table: Table) -> Table:
        """A table of the evaluator over states: what an unreached branch point would have chosen does not matter."""
        data = table.data
        names = []
        for place, axis in enumerate(table.axes):
            about = self.evaluator.axes[axis]
            if about.kind == "point":
                first = data.take([0], axis=place)
                data = np.concatenate([data, first], axis=place)
                names.append(about.node)
            else:
                names.append(INPUT + axis)
        order = sorted(range(len(names)), key=names.__getitem__)
        return Table(tuple(names[place] for place in order), data.transpose(*order, len(names)))


def _negated(table: Table) -> Table:
    return Table(table.axes, ~table.data)


def _asked_besides(structure: Structure) -> set[int]:
    """Selects whose branch point is asked by something else as well."""
    plan = structure.plan
    users: dict[int, int] = {}
    for inner in structure.children.values():
        for each in dict.fromkeys(inner):
            if plan.nodes[each].kind == "point":
                users[each] = users.get(each, 0) + 1
    return {
        number
        for number in structure.children
        if plan.nodes[number].kind == "select" and users.get(plan.nodes[number].args[0], 0) > 1
    }


def _when_reached(structure: Structure, shared: set[int]) -> dict[int, Reached]:
    """When each live operation takes part in an evaluation."""
    plan = structure.plan
    always: set[int] = {plan.root}
    through: dict[int, dict[int, set[int]]] = {}

    def add(target: int, source: int) -> None:
        if source in always:
            always.add(target)
        else:
            mine = through.setdefault(target, {})
            for point, branches in through.get(source, {}).items():
                mine.setdefault(point, set()).update(branches)

    for number in sorted(structure.children, reverse=True):
        node = plan.nodes[number]
        live = structure.children[number]
        if node.kind == "select":
            add(node.args[0], number)
            for branch, body in enumerate(node.args[1:]):
                if body in live[1:]:
                    state = number if number in shared else node.args[0]
                    through.setdefault(body, {}).setdefault(state, set()).add(branch)
        else:
            for each in live:
                add(each, number)
    found: dict[int, Reached] = {}
    for number in structure.children:
        if number in always:
            found[number] = None
        else:
            inner = through.get(number, {})
            found[number] = {point: frozenset(branches) for point, branches in sorted(inner.items())}
    return found
