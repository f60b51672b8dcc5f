"""A rulebook as small operations that are worked out for many projects at once.

Takes a model, gives a ``Program``: the nodes of its ``plan`` without any folding over branch points, what each choice's
options say of themselves, and the costs. ``simulate`` works it out.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from samesum.evidence.routes.counting import deep
from samesum.evidence.trial import plan
from samesum.graph import BranchPoint, DecisionGraph, Element, build
from samesum.reading import model as m
from samesum.settled.maker import by_preference
from samesum.settled.settle import reopened

LOWEST, HIGHEST = -2, -3
"""What a branch point takes whose lowest or highest option counts, in place of a branch's number."""
_EXTREMES = {m.LOWEST: LOWEST, m.HIGHEST: HIGHEST}
STATED = "as stated"
"""The one branch of a quantity that states an error without offering a choice."""


@dataclass(frozen=True, slots=True)
class Choosing:
    """A choice, or what follows one. ``stated``: whether each option is an estimate; ``order``: from the most to the
    least fit to stand for the truth; ``leader``: the branch each option stands for there; ``nested``: for each option
    the branch points inside it."""

    point: BranchPoint
    stated: tuple[bool, ...]
    order: tuple[int, ...]
    leader: tuple[int, ...]
    nested: tuple[tuple[str, ...], ...]


@dataclass(frozen=True, slots=True)
class Program:
    """``nodes`` in an order in which each stands after what it uses; ``live`` those that anything asked for needs.
    ``taken``: by id of a branch point that the rulebook has settled, the branch that everybody takes, ``LOWEST`` or
    ``HIGHEST``; ``prescribed``: by name, the value of a setting or judgement that it has. Only the truth knows
    nothing of either. ``known_linear``: what ``linear`` found out about it before."""

    graph: DecisionGraph
    nodes: tuple[plan.Node, ...]
    live: tuple[int, ...]
    result: int
    applies: tuple[int, ...]
    costs: Mapping[tuple[str, int], int]
    points: Mapping[str, int]
    selects: Mapping[str, int]
    choosing: Mapping[str, Choosing]
    lookups: Mapping[int, Lookup]
    weights: Mapping[int, tuple[float, ...]]
    inputs: Mapping[str, tuple[int, ...]]
    withheld: Mapping[str, float]
    taken: Mapping[str, int] = field(default_factory=dict)
    prescribed: Mapping[str, float | int | bool] = field(default_factory=dict)
    _after: dict[frozenset[str], tuple[int, ...]] = field(default_factory=dict)
    known_linear: dict[frozenset[str], bool] = field(default_factory=dict)

    def after(self, keys: Iterable[str]) -> tuple[int, ...]:
        """The nodes that change with these branch points (by id) or inputs (by name), in order."""
        wanted = frozenset(keys)
        found = self._after.get(wanted)
        if found is None:
            changed = bytearray(len(self.nodes))
            for key in wanted:
                for number in (self.points.get(key), self.selects.get(key), *self.inputs.get(key, ())):
                    if number is not None:
                        changed[number] = 1
            for number in self.live:
                node = self.nodes[number]
                if not changed[number] and any(changed[arg] for arg in node.args):
                    changed[number] = 1
                if changed[number] and node.kind == "select" and self.taken.get(node.name, 0) < 0:
                    changed[self.points[node.name]] = 1  # which option is the lowest may have changed
            found = tuple(number for number in self.live if changed[number])
            self._after[wanted] = found
        return found


@dataclass(frozen=True, slots=True)
class Lookup:
    """Rows of a table as numbers: for each row its value and one test an argument (a code, or a band's ends)."""

    values: tuple[float, ...]
    tests: tuple[tuple[int | tuple[float, float], ...], ...]


# --- making ------------------------------------------------------------------------------------


def make_program(model: m.Model, sizes: Mapping[str, int] | None = None) -> Program:
    """The program of a rulebook for projects with so many elements of each index (``at most`` when not given).

    Raises ``plan.Unplannable`` when a part of the rulebook could not be resolved.
    """
    with deep():
        return _program(model, sizes)


def _program(model: m.Model, sizes: Mapping[str, int] | None) -> Program:
    stated = replace(model, quantities=tuple(_with_statement(each) for each in model.quantities))
    stated, prescribed = reopened(stated)
    graph = plan.resized(stated, sizes or {}) if sizes else build(stated)
    withheld = {each.name: float(_plain(each.expression)) for each in model.constants if each.withheld}
    taken = {
        id: _EXTREMES[what] if what in _EXTREMES else point.branches.index(what)
        for id, point in graph.branch_points.items()
        if (what := prescribed.choices.get(point.general_id))
    }
    maker = _Maker(graph, withheld)
    if model.result is None:
        raise plan.Unplannable("the rulebook has no result")
    result = maker.instance(model.result.name)
    applies = tuple(maker.condition(each.condition, {}) for each in model.applies)
    choosing: dict[str, Choosing] = {}
    costs: dict[tuple[str, int], int] = {}
    selects = {node.name: number for number, node in enumerate(maker.nodes) if node.kind == "select"}
    for id in selects:
        point = graph.branch_points[id]
        if isinstance(point.body, m.Cases):
            continue
        choosing[id] = _choosing(point, graph)
        if isinstance(point.body, m.Choice):
            for number, option in enumerate(point.body.options):
                if option.cost is not None:
                    costs[id, number] = maker.expression(option.cost, graph.instances[point.instance].elements)
    nodes = tuple(maker.nodes)
    inputs: dict[str, list[int]] = {}
    for number, node in enumerate(nodes):
        if node.kind in ("input", "code", "holds"):
            inputs.setdefault(node.name, []).append(number)
    return Program(
        graph=graph,
        nodes=nodes,
        live=needed_for(nodes, (result, *applies, *costs.values())),
        result=result,
        applies=applies,
        costs=costs,
        points={node.name: number for number, node in enumerate(nodes) if node.kind == "point"},
        selects={node.name: number for number, node in enumerate(nodes) if node.kind == "select"},
        choosing=choosing,
        lookups={number: _lookup(node, graph.model) for number, node in enumerate(nodes) if node.kind == "lookup"},
        weights={
            number: tuple(float(weight) for weight in node.weights)
            for number, node in enumerate(nodes)
            if node.kind == "linear"
        },
        inputs={name: tuple(found) for name, found in inputs.items()},
        withheld=withheld,
        taken={id: branch for id, branch in taken.items() if id in selects},
        prescribed={
            name: value if isinstance(value, bool) else maker.named[name].index(value) if isinstance(value, str)
            else float(value) for name, value in prescribed.inputs.items()
        },
    )  # fmt: skip


class _Maker(plan.Maker):
    """The plan's maker, except that a constant which is not in the reference stays an input, and that what asks which
    option a choice took comes after its options: the lowest of them may be taken."""

    def __init__(self, graph: DecisionGraph, withheld: Mapping[str, float]) -> None:
        super().__init__(graph)
        self._withheld = withheld

    def point(self, id: str) -> int:
        first = id not in self._points
        found = super().point(id)
        if first and id in self.graph.instances:
            self.instance(id)
        return found

    def expression(self, node: m.Expression, elements: Element) -> int:
        if isinstance(node, m.Reference) and node.kind == "constant" and node.name in self._withheld:
            return self.make(plan.Node("input", name=node.name))
        return super().expression(node, elements)


def _with_statement(quantity: m.Quantity) -> m.Quantity:
    """A quantity that states how it errs, as a choice with one option: nobody chooses, the error is there."""
    if quantity.error is None and quantity.bias is None:
        return quantity
    span = quantity.about.span
    option = m.Option(STATED, quantity.body, span, error=quantity.error, bias=quantity.bias, reference=True)
    return replace(quantity, body=m.Choice("programme", (option,), span))


def _choosing(point: BranchPoint, graph: DecisionGraph) -> Choosing:
    options = point.body.options if isinstance(point.body, (m.Choice, m.Follows)) else ()
    leader: tuple[int, ...] = ()
    if point.leader:
        names = graph.branch_points[point.leader].branches
        leader = tuple(point.branches.index(name) if name in point.branches else -1 for name in names)
    insides = tuple(f"{point.id}/{option.name}" for option in options)
    nested = tuple(
        tuple(id for id in graph.branch_points if id == inside or id.startswith(inside + "/")) for inside in insides
    )
    stated = tuple(option.error is not None or option.bias is not None for option in options)
    return Choosing(point, stated, by_preference(options), leader, nested)


def _plain(expression: m.Expression) -> Any:
    """A constant's own number, where it is written as one."""
    match expression:
        case m.Number(value=value):
            return value
        case m.Negation(operand=operand):
            return -_plain(operand)
        case m.Scaled(operand=operand, factor=factor):
            return _plain(operand) * factor
        case _:
            raise plan.Unplannable("a constant that is not in the reference is written as a plain number")


def needed_for(nodes: Sequence[plan.Node], ends: Iterable[int]) -> tuple[int, ...]:
    """The nodes that these rest on, themselves included, in order."""
    wanted: set[int] = set()
    stack = list(ends)
    while stack:
        number = stack.pop()
        if number not in wanted:
            wanted.add(number)
            stack += nodes[number].args
    return tuple(sorted(wanted))


def _lookup(node: plan.Node, model: m.Model) -> Lookup:
    table = next(each for each in model.tables if each.name == node.name)
    tests = []
    for row in table.rows:
        test: list[int | tuple[float, float]] = []
        for key, label in zip(table.keys, row.labels, strict=True):
            if isinstance(label, m.Band):
                low = float(label.low) if label.low is not None else -np.inf
                test.append((low, float(label.high) if label.high is not None else np.inf))
            else:
                test.append(key.values.index(label) if label in key.values else -1)
        tests.append(tuple(test))
    return Lookup(tuple(float(row.value) for row in table.rows), tuple(tests))
