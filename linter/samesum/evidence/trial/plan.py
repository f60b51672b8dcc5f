"""The plan of a calculation: the result as one graph of small operations, shared parts standing in it once.

Takes a decision graph, gives a ``Plan``. Quantities are written into each other, reductions spread out
over their elements; every branch point is a ``point`` (its conditions) and a ``select`` (its bodies).
Numbers stay exact here; whoever evaluates the plan turns them into floats.
"""

from __future__ import annotations

import sys
from collections import Counter
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from fractions import Fraction
from types import MappingProxyType
from typing import Literal

from samesum.graph import BranchPoint, DecisionGraph, Element, build, instance_id
from samesum.reading import model as m
from samesum.reading import walk

Kind = Literal[
    # numbers
    "number", "input", "linear", "product", "divide", "power", "min", "max", "call", "lookup", "select", "guard",
    # names
    "code", "named",
    # conditions
    "true", "compare", "is", "holds", "takes", "all", "some", "not", "point",
]  # fmt: skip
CONDITIONS = frozenset({"true", "compare", "is", "holds", "takes", "all", "some", "not", "point"})


class Unplannable(Exception):
    """A part of the rulebook could not be resolved, so no number can be worked out. Says which."""


@dataclass(frozen=True, slots=True)
class Node:
    """One operation. ``args`` are node numbers, always smaller than the node's own.

    ``name``: the fact, setting or judgement (with its element); the function, operator, table, branch point.
    ``number``: of ``number``, and what ``linear`` adds; ``weights``: of ``linear``, one an argument.
    ``chosen``: codes that ``is`` asks for, the option of ``takes``, the code of ``named``.

    ``point``: one condition a branch (``true`` where nothing must hold), then the point it follows, if it does.
    ``select``: the point, then one body a branch. ``guard``: a number, then the conditions it rests on.
    """

    kind: Kind
    args: tuple[int, ...] = ()
    name: str = ""
    number: Fraction = Fraction(0)
    weights: tuple[Fraction, ...] = ()
    chosen: tuple[int, ...] = ()


@dataclass(frozen=True, slots=True)
class Plan:
    """``root`` is the result, resting on the conditions of applicability. ``points``: node of each branch point
    that the result can lead to. ``named``: the values of each fact or setting that has names or yes/no.
    ``numeric``: the domain of each numeric fact or setting."""

    graph: DecisionGraph
    nodes: tuple[Node, ...]
    root: int
    result: int
    points: Mapping[str, int]
    named: Mapping[str, tuple[str, ...]]
    numeric: Mapping[str, m.Range]
    tables: Mapping[str, m.Table]
    human: frozenset[str]

    def point(self, number: int) -> BranchPoint:
        return self.graph.branch_points[self.nodes[number].name]


def resized(model: m.Model, sizes: Mapping[str, int]) -> DecisionGraph:
    """The decision graph of a project with so many elements of each index; the others are not reached."""
    indices = tuple(replace(each, most=sizes.get(each.name, each.most)) for each in model.indices)
    return build(replace(model, indices=indices))


def make_plan(graph: DecisionGraph) -> Plan:
    """The plan of a rulebook's result. Raises ``Unplannable`` when something in it is unknown."""
    before = sys.getrecursionlimit()
    sys.setrecursionlimit(max(before, 50_000))
    try:
        maker = Maker(graph)
        if graph.model.result is None:
            raise Unplannable("the rulebook has no result")
        result = maker.instance(graph.model.result.name)
        conditions = [maker.condition(each.condition, {}) for each in graph.model.applies]
        root = maker.make(Node("guard", (result, *conditions))) if conditions else result
        nodes, (root, result) = _flattened(maker.nodes, (root, result))
    finally:
        sys.setrecursionlimit(before)
    points = {node.name: number for number, node in enumerate(nodes) if node.kind == "point"}
    order = {id: place for place, id in enumerate(graph.branch_points)}
    return Plan(
        graph,
        nodes,
        root,
        result,
        MappingProxyType(dict(sorted(points.items(), key=lambda item: order[item[0]]))),
        MappingProxyType(maker.named),
        MappingProxyType(maker.numeric),
        MappingProxyType({table.name: table for table in graph.model.tables}),
        frozenset(each.name for each in graph.model.settings) | {each.name for each in graph.model.judgements},
    )


@dataclass(slots=True)
class Maker:
    """Makes a plan node by node, each operation once."""

    graph: DecisionGraph
    nodes: list[Node] = field(default_factory=list)
    named: dict[str, tuple[str, ...]] = field(default_factory=dict)
    numeric: dict[str, m.Range] = field(default_factory=dict)
    _known: dict[Node, int] = field(default_factory=dict)
    _instances: dict[str, int] = field(default_factory=dict)
    _points: dict[str, int] = field(default_factory=dict)
    _constants: dict[str, int] = field(default_factory=dict)

    def __post_init__(self) -> None:
        both: tuple[m.Fact | m.Setting, ...] = (*self.graph.model.facts, *self.graph.model.settings)
        for each in both:
            index = each.index if isinstance(each, m.Fact) else ""
            for element in range(1, self.graph.sizes.get(index, 0) + 1) if index else (0,):
                id = f"{each.name}@{element}" if index else each.name
                if isinstance(each.domain, m.Range):
                    self.numeric[id] = each.domain
                elif isinstance(each.domain, m.OneOf):
                    self.named[id] = each.domain.values

    def make(self, node: Node) -> int:
        found = self._known.get(node)
        if found is None:
            found = len(self.nodes)
            self.nodes.append(node)
            self._known[node] = found
        return found

    def number(self, value: Fraction) -> int:
        return self.make(Node("number", number=value))

    def instance(self, id: str) -> int:
        found = self._instances.get(id)
        if found is None:
            instance = self.graph.instances[id]
            found = self.body(instance.quantity.body, (id,), instance.elements)
            self._instances[id] = found
        return found

    def body(self, body: m.Body, path: tuple[str, ...], elements: Element) -> int:
        if isinstance(body, m.Formula):
            return self.expression(body.expression, elements)
        if isinstance(body, m.Unknown):
            raise Unplannable(f"{path[0]}: its body could not be read")
        point = self.point("/".join(path))
        bodies = [self.body(branch.body, (*path, branch.name), elements) for branch in walk.branches(body)]
        return self.make(Node("select", (point, *bodies), "/".join(path)))

    def point(self, id: str) -> int:
        found = self._points.get(id)
        if found is None:
            point = self.graph.branch_points[id]
            elements = self.graph.instances[point.instance].elements
            args = [
                self.make(Node("true")) if condition is None else self.condition(condition, elements)
                for condition in point.conditions
            ]
            if point.leader:
                args.append(self.point(point.leader))
            found = self.make(Node("point", tuple(args), id))
            self._points[id] = found
        return found

    # -- conditions ---------------------------------------------------------------------

    def condition(self, node: m.Condition, elements: Element) -> int:
        match node:
            case m.Comparison(operator=operator, left=left, right=right):
                sides = (self.expression(left, elements), self.expression(right, elements))
                return self.make(Node("compare", sides, operator))
            case m.Is(subject=subject, values=values):
                id = instance_id(subject.name, subject.index, elements)
                known = self.named[id]
                codes = tuple(sorted(known.index(value) for value in values if value in known))
                return self.make(Node("is", (self.make(Node("code", name=id)),), chosen=codes))
            case m.Holds(name=name, index=index):
                return self.make(Node("holds", name=instance_id(name, index, elements)))
            case m.Takes(quantity=name, index=index, option=option):
                id = instance_id(name, index, elements)
                branches = self.graph.branch_points[id].branches
                return self.make(Node("takes", (self.point(id),), id, chosen=(branches.index(option),)))
            case m.All(parts=parts):
                return self.make(Node("all", tuple(self.condition(part, elements) for part in parts)))
            case m.Some(parts=parts):
                return self.make(Node("some", tuple(self.condition(part, elements) for part in parts)))
            case m.Not(part=part):
                return self.make(Node("not", (self.condition(part, elements),)))
            case m.Unknown():
                raise Unplannable("a condition could not be read")

    # -- numbers ------------------------------------------------------------------------

    def expression(self, node: m.Expression, elements: Element) -> int:
        match node:
            case m.Number(value=value):
                return self.number(value)
            case m.Reference(kind="constant", name=name):
                if name not in self._constants:
                    declared = next(each for each in self.graph.model.constants if each.name == name)
                    self._constants[name] = self.expression(declared.expression, {})
                return self._constants[name]
            case m.Reference(kind="quantity", name=name, index=index):
                return self.instance(instance_id(name, index, elements))
            case m.Reference(name=name, index=index):
                return self.make(Node("input", name=instance_id(name, index, elements)))
            case m.Position(index=index):
                return self.number(Fraction(elements[index]))
            case m.Lookup():
                return self.lookup(node, elements)
            case m.Scaled(operand=operand, factor=factor):
                return self.linear([(self.expression(operand, elements), factor)])
            case m.Negation(operand=operand):
                return self.linear([(self.expression(operand, elements), Fraction(-1))])
            case m.Arithmetic(operator=operator, left=left, right=right):
                return self.arithmetic(operator, self.expression(left, elements), self.expression(right, elements))
            case m.Function(name=name, arguments=arguments):
                parts = [self.expression(argument, elements) for argument in arguments]
                return self.extreme(name, parts) if name in ("min", "max") else self.call(name, parts[0])
            case m.Reduction(name=name, body=body, index=index):
                count = self.graph.sizes.get(index, 0)
                parts = [self.expression(body, {**elements, index: element}) for element in range(1, count + 1)]
                if name in ("min", "max"):
                    return self.extreme(name, parts)
                share = Fraction(1, count) if name == "mean" else Fraction(1)
                return self.linear([(part, share) for part in parts])
            case _:
                raise Unplannable("an expression could not be read")

    def linear(self, parts: Sequence[tuple[int, Fraction]], added: Fraction = Fraction(0)) -> int:
        weights: dict[int, Fraction] = {}
        for number, weight in parts:
            node = self.nodes[number]
            if node.kind == "number":
                added += node.number * weight
            else:
                weights[number] = weights.get(number, Fraction(0)) + weight
        if not weights:
            return self.number(added)
        if added == 0 and len(weights) == 1 and next(iter(weights.values())) == 1:
            return next(iter(weights))
        return self.make(Node("linear", tuple(weights), number=added, weights=tuple(weights.values())))

    def arithmetic(self, operator: str, left: int, right: int) -> int:
        a, b = self.nodes[left], self.nodes[right]
        if operator in "+-":
            return self.linear([(left, Fraction(1)), (right, Fraction(1 if operator == "+" else -1))])
        if operator == "*":
            for one, other in ((a, right), (b, left)):
                if one.kind == "number":
                    return self.linear([(other, one.number)])
            return self.make(Node("product", (left, right)))
        if operator == "/":
            if b.kind == "number" and b.number:
                return self.linear([(left, 1 / b.number)])
            return self.make(Node("divide", (left, right)))
        if a.kind == b.kind == "number" and b.number.denominator == 1 and abs(b.number) <= 64 and a.number:
            return self.number(a.number ** int(b.number))
        return left if b.kind == "number" and b.number == 1 else self.make(Node("power", (left, right)))

    def extreme(self, name: str, parts: Sequence[int]) -> int:
        once = tuple(dict.fromkeys(parts))
        return once[0] if len(once) == 1 else self.make(Node("min" if name == "min" else "max", once))

    def call(self, name: str, part: int) -> int:
        return self.make(Node("call", (part,), name))

    def lookup(self, node: m.Lookup, elements: Element) -> int:
        table = next(each for each in self.graph.model.tables if each.name == node.table)
        args = []
        for key, argument in zip(table.keys, node.arguments, strict=True):
            if key.bands:
                args.append(self.expression(argument, elements))
            elif isinstance(argument, m.Value):
                code = key.values.index(argument.name)
                args.append(self.make(Node("named", name=argument.name, chosen=(code,))))
            elif isinstance(argument, m.Reference):
                args.append(self.make(Node("code", name=instance_id(argument.name, argument.index, elements))))
            else:
                raise Unplannable(f"an argument of the table {node.table} could not be read")
        return self.make(Node("lookup", tuple(args), node.table))


def _flattened(nodes: Sequence[Node], ends: tuple[int, int]) -> tuple[tuple[Node, ...], tuple[int, int]]:
    """The same graph, only what the ends lead to, with sums in sums, products in products and the like as one
    operation where the inner one is used nowhere else."""
    uses: Counter[int] = Counter({number: 2 for number in ends[1:]})
    wanted: set[int] = set()
    stack = list(ends)
    while stack:
        number = stack.pop()
        if number not in wanted:
            wanted.add(number)
            uses.update(nodes[number].args)
            stack += nodes[number].args
    made: list[Node] = []
    known: dict[Node, int] = {}
    place: dict[int, int] = {}

    def make(node: Node) -> int:
        if node not in known:
            known[node] = len(made)
            made.append(node)
        return known[node]

    for number in sorted(wanted):
        node = nodes[number]
        inner = {new: uses[old] for old in node.args for new in (place[old],)}
        args = tuple(place[old] for old in node.args)
        if node.kind == "linear":
            place[number] = make(_merged_linear(node, args, inner, made))
        elif node.kind == "product":
            factors: Counter[int] = Counter()
            for each in _spread("product", args, inner, made):
                factors[each] += 1
            parts = tuple(
                each if count == 1 else make(Node("power", (each, make(Node("number", number=Fraction(count))))))
                for each, count in factors.items()
            )
            place[number] = parts[0] if len(parts) == 1 else make(replace(node, args=parts))
        elif node.kind in ("min", "max"):
            place[number] = make(replace(node, args=tuple(dict.fromkeys(_spread(node.kind, args, inner, made)))))
        else:
            place[number] = make(replace(node, args=args))
    return tuple(made), (place[ends[0]], place[ends[1]])


def _spread(kind: str, args: Sequence[int], uses: Mapping[int, int], made: Sequence[Node]) -> Iterator[int]:
    for each in args:
        if made[each].kind == kind and uses[each] == 1:
            yield from made[each].args
        else:
            yield each


def _merged_linear(node: Node, args: Sequence[int], uses: Mapping[int, int], made: Sequence[Node]) -> Node:
    weights: dict[int, Fraction] = {}
    added = node.number
    for each, weight in zip(args, node.weights, strict=True):
        if made[each].kind == "linear" and uses[each] == 1:
            added += made[each].number * weight
            for inner, share in zip(made[each].args, made[each].weights, strict=True):
                weights[inner] = weights.get(inner, Fraction(0)) + share * weight
        else:
            weights[each] = weights.get(each, Fraction(0)) + weight
    return replace(node, args=tuple(weights), weights=tuple(weights.values()), number=added)
