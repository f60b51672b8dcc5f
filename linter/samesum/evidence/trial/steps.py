"""The steps of the work on extremes, planned on sets of axes before any number is touched.

Parts that share nothing are folded to their own lowest and highest as soon as nothing else needs to know how they
were reached (bucket elimination, Dechter 1999, on values instead of counts); what is shared stands as an axis
until its last use.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from fractions import Fraction

from samesum.evidence.trial.arrays import Array
from samesum.evidence.trial.plan import Node
from samesum.evidence.trial.structure import Structure
from samesum.evidence.trial.values import Evaluator

NARY = ("linear", "product", "min", "max")


NOTHING = Node("true")


@dataclass(frozen=True, slots=True)
class Step:
    """One step of the work: ``kind`` is ``given``, ``wide`` (a setting from end to end), ``apply``, ``select``,
    ``guard``, ``fold`` or ``part`` (a shared part at its ends)."""

    kind: str
    out: int
    inputs: tuple[int, ...] = ()
    node: Node = NOTHING
    number: int = -1
    axes: tuple[int, ...] = ()
    places: tuple[int, ...] = ()


@dataclass(slots=True)
class Work:
    """The steps for one evaluator, with what each slot depends on."""

    evaluator: Evaluator
    structure: Structure
    unsure: Array
    bent: frozenset[str] = frozenset()
    steps: list[Step] = field(default_factory=list)
    slot_axes: list[frozenset[int]] = field(default_factory=list)
    wide: list[bool] = field(default_factory=list)
    _slots: dict[int, int] = field(default_factory=dict)
    _owned: dict[int, set[int]] = field(default_factory=dict)
    _parts: dict[int, int] = field(default_factory=dict)
    largest: int = 1

    # -- planning the steps ---------------------------------------------------------------

    def plan_steps(self) -> int:
        """Plans everything; gives the root's slot."""
        structure, evaluator = self.structure, self.evaluator
        for number in structure.children:
            node = structure.plan.nodes[number]
            if number in structure.full and node.kind not in ("point",) and node.kind != "true":
                self._settle_full(number, node)
            elif node.kind == "lookup" or (node.kind == "input" and not self._is_wide(number, node)):
                evaluator.number(number)
        for number in structure.cuts:
            self._parts[number] = evaluator.axis("part", str(number), number, 2)
        for place, axis in enumerate(evaluator.axes):
            if axis.node in structure.dominator and (axis.kind != "part" or axis.node in structure.cuts):
                self._owned.setdefault(structure.owner(axis.node), set()).add(place)
        return self._slot(structure.plan.root)

    def _settle_full(self, number: int, node: Node) -> None:
        if node.kind in ("holds", "compare", "is", "takes", "all", "some", "not"):
            self.evaluator.truth(number)
        elif node.kind not in ("guard",):
            self.evaluator.number(number)

    def _new(self, step: Step, axes: frozenset[int], wide: bool) -> int:
        self.steps.append(step)
        self.slot_axes.append(axes)
        self.wide.append(wide)
        cells = 1
        for axis in axes:
            cells *= self.evaluator.axes[axis].size
        self.largest = max(self.largest, cells)
        return step.out

    def _slot(self, number: int) -> int:
        found = self._slots.get(number)
        if found is None:
            found = self._folded(number, self._planned(number, self.structure.plan.nodes[number]))
            if number in self._parts:
                axis = self._parts[number]
                step = Step("part", len(self.steps), (found,), axes=(axis,))
                found = self._new(step, self.slot_axes[found] | {axis}, False)
            self._slots[number] = found
        return found

    def _folded(self, number: int, slot: int) -> int:
        owned = self._owned.get(number, set()) & self.slot_axes[slot]
        return self._fold(slot, tuple(sorted(owned))) if owned else slot

    def _fold(self, slot: int, axes: tuple[int, ...]) -> int:
        step = Step("fold", len(self.steps), (slot,), axes=axes)
        return self._new(step, self.slot_axes[slot] - set(axes), True)

    def _planned(self, number: int, node: Node) -> int:
        if number in self.structure.full or node.kind in ("number", "lookup", "code", "named"):
            return self._given(number)
        if node.kind == "input":
            if self._is_wide(number, node):
                return self._new(Step("wide", len(self.steps), node=node, number=number), frozenset(), True)
            return self._given(number)
        if node.kind == "select":
            return self._select(number, node)
        if node.kind == "guard":
            inner = self._slot(node.args[0])
            conditions = self._given_axes(node.args[1:])
            step = Step("guard", len(self.steps), (inner,), node, number)
            return self._new(step, self.slot_axes[inner] | conditions, self.wide[inner])
        slots = [self._slot(each) for each in node.args]
        if node.kind in NARY:
            return self._many(number, node, slots)
        return self._apply(node, slots)

    def _is_wide(self, number: int, node: Node) -> bool:
        free = self.evaluator.is_free(node.name) and node.name not in self.bent
        return free and number not in self.structure.full and self.structure.met_once(number)

    def _given(self, number: int) -> int:
        table = self.evaluator.number(number)
        step = Step("given", len(self.steps), number=number)
        return self._new(step, frozenset(table.axes), False)

    def _given_axes(self, conditions: Sequence[int]) -> frozenset[int]:
        found: set[int] = set()
        for each in conditions:
            truth = self.evaluator.truth(each)
            found |= set(truth.holds.axes)
            if truth.valid is not None:
                found |= set(truth.valid.axes)
        return frozenset(found)

    def _select(self, number: int, node: Node) -> int:
        state = self.evaluator.state(node.args[0])
        live = set(self.structure.children[number][1:])
        axes: set[int] = set()
        inputs, places = [], []
        if state.codes is not None:
            codes = {int(each) for each in set(state.codes.data.ravel().tolist())} - {-1}
            axes |= set(state.codes.axes)
            order = [(place, place) for place in sorted(codes)]
        else:
            assert state.axis is not None
            axes.add(state.axis)
            for each in state.open:
                axes |= set(each.axes)
            order = [(place, branch) for place, branch in enumerate(state.order) if branch >= 0]
        wide = False
        for place, branch in order:
            body = node.args[1 + branch]
            if body in live and (state.codes is not None or state.open[place].data.any()):
                slot = self._slot(body)
                inputs.append(slot)
                places.append(place)
                axes |= self.slot_axes[slot]
                wide = wide or self.wide[slot]
        step = Step("select", len(self.steps), tuple(inputs), node, number, places=tuple(places))
        return self._new(step, frozenset(axes), wide)

    def _apply(self, node: Node, slots: Sequence[int]) -> int:
        axes = frozenset().union(*(self.slot_axes[slot] for slot in slots))
        step = Step("apply", len(self.steps), tuple(slots), node)
        return self._new(step, axes, any(self.wide[slot] for slot in slots))

    def _many(self, number: int, node: Node, slots: list[int]) -> int:
        """A sum, product, minimum or maximum: what shares an axis that ends here is put together first."""
        owned = self._owned.get(number, set())
        weights = node.weights if node.kind == "linear" else [Fraction(1)] * len(slots)
        parts = list(zip(slots, weights, strict=True))
        while True:
            cheapest: tuple[float, int, list[int]] | None = None
            for axis in sorted({axis for slot, _ in parts for axis in self.slot_axes[slot]} & owned):
                members = [place for place, (slot, _) in enumerate(parts) if axis in self.slot_axes[slot]]
                joint = frozenset().union(*(self.slot_axes[parts[place][0]] for place in members))
                cost = math.prod(self.evaluator.axes[each].size for each in joint)
                if cheapest is None or (cost, axis) < cheapest[:2]:
                    cheapest = (cost, axis, members)
            if cheapest is None:
                return self._join(node, parts, whole=True)
            members = cheapest[2]
            others = [part for place, part in enumerate(parts) if place not in members]
            joined = self._join(node, [parts[place] for place in members], whole=False)
            outside = {each for slot, _ in others for each in self.slot_axes[slot]}
            closing = tuple(sorted((self.slot_axes[joined] & owned) - outside))
            parts = [*others, (self._fold(joined, closing), Fraction(1))]

    def _join(self, node: Node, parts: Sequence[tuple[int, Fraction]], whole: bool) -> int:
        slots = [slot for slot, _ in parts]
        if node.kind == "linear":
            number = node.number if whole else Fraction(0)
            weights = tuple(weight for _, weight in parts)
            if len(slots) == 1 and weights[0] == 1 and not number:
                return slots[0]
            return self._apply(Node("linear", tuple(slots), number=number, weights=weights), slots)
        if len(slots) == 1:
            return slots[0]
        if node.kind != "product":
            return self._apply(replace(node, args=tuple(slots)), slots)
        thin = [slot for slot in slots if not self.wide[slot]]
        pair = Node("product", (0, 1))
        found = self._apply(replace(node, args=tuple(thin)), thin) if len(thin) > 1 else (thin[0] if thin else -1)
        for slot in (slot for slot in slots if self.wide[slot]):
            found = slot if found < 0 else self._apply(pair, (found, slot))
        return found
