"""The decision graph: branch points, branches, quantities and what leads to what.

Takes a ``Model``, gives a ``DecisionGraph``. What the rulebook has settled is no branch point of it.
A quantity per index becomes one instance for each element; each instance has branch points of its
own. Everything stands in one order: the quantities as written, elements by number, outer bodies
before inner ones.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import TYPE_CHECKING, Literal

from samesum.reading import model as m
from samesum.reading import walk
from samesum.settled.maker import WHERE_OPEN
from samesum.settled.settle import settled
from samesum.spans import Span

if TYPE_CHECKING:
    import networkx

Kind = Literal["choice", "follows", "cases", "cases in order"]
Element = Mapping[str, int]


@dataclass(frozen=True, slots=True)
class Instance:
    """One quantity, or one element of a quantity per index. ``id`` is ``stock`` or ``stock@3``."""

    id: str
    quantity: m.Quantity
    element: int

    @property
    def elements(self) -> Element:
        """The current element of each index inside this instance's body."""
        return {self.quantity.index: self.element} if self.quantity.index else {}


@dataclass(frozen=True, slots=True)
class BranchPoint:
    """A ``cases`` or ``choice`` of one instance.

    ``parent`` is the branch point and branch it is nested under, None for the body's own.
    ``leader`` is the id of the branch point that a ``choice follows`` is tied to, else "".
    ``general_id`` is the id without an element's number: the same for all elements.
    """

    id: str
    general_id: str
    instance: str
    quantity: str
    element: int
    kind: Kind
    by: m.Decider | None
    timing: Literal["validation", "period", ""]
    branches: tuple[str, ...]
    conditions: tuple[m.Condition | None, ...]
    body: m.Cases | m.Choice | m.Follows
    parent: tuple[str, str] | None
    leader: str
    clause: str
    wording: str
    span: Span


    @property
    def is_written(self) -> bool:
        """Whether somebody wrote it; not so of what only answers which of the options was the lowest."""
        return WHERE_OPEN not in self.quantity


@dataclass(frozen=True, slots=True)
class Leaf:
    """A formula: the end of a way through an instance's body. ``under`` is the innermost branch
    point and branch it stands in, None when the body is the formula alone."""

    instance: str
    under: tuple[str, str] | None
    expression: m.Expression

    @property
    def id(self) -> str:
        """Where a gap of this formula is reported: its branch point, else its instance."""
        return self.under[0] if self.under else self.instance


@dataclass(frozen=True, slots=True)
class DecisionGraph:
    """Instances, branch points and leaves of a rulebook, in one order. ``model`` is the rulebook as it is applied
    (``settled``), ``written`` as it was read."""

    model: m.Model
    written: m.Model
    instances: Mapping[str, Instance]
    branch_points: Mapping[str, BranchPoint]
    leaves: Mapping[str, tuple[Leaf, ...]]
    sizes: Mapping[str, int]
    """Each index's number of elements (its ``at most``)."""


def instance_id(name: str, index: str, elements: Element) -> str:
    """The name with its element's number, ``stock@3``; the bare name when not per index."""
    return f"{name}@{elements[index]}" if index else name


def build(model: m.Model) -> DecisionGraph:
    """The decision graph of a model. Bodies that failed to resolve have no branch points."""
    written, model = model, settled(model)
    sizes = {index.name: index.most for index in model.indices}
    instances: dict[str, Instance] = {}
    points: dict[str, BranchPoint] = {}
    leaves: dict[str, tuple[Leaf, ...]] = {}
    for quantity in model.quantities:
        elements = range(1, sizes.get(quantity.index, 0) + 1) if quantity.index else (0,)
        for element in elements:
            id = f"{quantity.name}@{element}" if quantity.index else quantity.name
            instance = Instance(id, quantity, element)
            instances[id] = instance
            found: list[Leaf] = []
            for item in _body(instance, quantity.body, (), None):
                if isinstance(item, BranchPoint):
                    points[item.id] = item
                else:
                    found.append(item)
            leaves[id] = tuple(found)
    return DecisionGraph(
        model,
        written,
        MappingProxyType(instances),
        MappingProxyType(points),
        MappingProxyType(leaves),
        MappingProxyType(sizes),
    )


def _body(
    instance: Instance, body: m.Body, path: tuple[str, ...], under: tuple[str, str] | None
) -> Iterator[BranchPoint | Leaf]:
    if isinstance(body, m.Formula):
        yield Leaf(instance.id, under, body.expression)
        return
    if isinstance(body, m.Unknown):
        yield Leaf(instance.id, under, body)
        return
    quantity = instance.quantity
    id = "/".join((instance.id, *path))
    branches = walk.branches(body)
    kind: Kind
    match body:
        case m.Cases():
            kind = "cases in order" if body.in_order else "cases"
        case m.Choice():
            kind = "choice"
        case m.Follows():
            kind = "follows"
    yield BranchPoint(
        id=id,
        general_id="/".join((quantity.name, *path)),
        instance=instance.id,
        quantity=quantity.name,
        element=instance.element,
        kind=kind,
        by=body.by if isinstance(body, m.Choice) else None,
        timing=body.timing if isinstance(body, m.Choice) else "",
        branches=tuple(branch.name for branch in branches),
        conditions=tuple(walk.condition_of(branch) for branch in branches),
        body=body,
        parent=under,
        leader=instance_id(body.quantity, body.index, instance.elements) if isinstance(body, m.Follows) else "",
        clause=quantity.about.clause,
        wording=quantity.about.note,
        span=body.span,
    )
    for branch in branches:
        yield from _body(instance, branch.body, (*path, branch.name), (id, branch.name))


def asked(point: BranchPoint, graph: DecisionGraph) -> Iterator[tuple[m.Condition, Element]]:
    """The conditions written in a branch point, with the elements they stand in."""
    elements = graph.instances[point.instance].elements
    for condition in point.conditions:
        if condition is not None:
            yield condition, elements


Mention = tuple[Literal["fact", "setting", "judgement", "value", "takes"], str]


def mentions(node: m.Expression | m.Condition, elements: Element, sizes: Mapping[str, int]) -> Iterator[Mention]:
    """What an expression or condition mentions, in reading order: facts, settings and judgements by
    name and element, instances it evaluates (``value``), instances whose choice it asks (``takes``).
    Reductions are spread out over their elements."""
    match node:
        case m.Reference(kind="quantity", name=name, index=index):
            yield "value", instance_id(name, index, elements)
        case m.Reference(kind="fact" | "setting" as kind, name=name, index=index):
            yield kind, instance_id(name, index, elements)
        case m.Holds(kind=kind, name=name, index=index):
            yield kind, instance_id(name, index, elements)
        case m.Takes(quantity=name, index=index):
            yield "takes", instance_id(name, index, elements)
        case m.Reduction(body=body, index=index):
            for element in range(1, sizes.get(index, 0) + 1):
                yield from mentions(body, {**elements, index: element}, sizes)
        case _:
            for part in walk.parts(node):
                yield from mentions(part, elements, sizes)


def links(graph: DecisionGraph) -> networkx.DiGraph[str]:
    """What leads to what, by declared name (elements together): an edge A → B where B uses A.

    Nodes carry ``kind``; edges carry ``how``: ``value`` (A's number flows into B's), ``condition`` (A is
    asked by a condition of B), ``takes`` or ``follows`` (B asks which option A took), sorted.
    """
    import networkx as nx

    network: nx.DiGraph[str] = nx.DiGraph()
    for name, kind in declared_kinds(graph.model).items():
        network.add_node(name, kind=kind)
    for (source, target), ways in edges(graph.model).items():
        network.add_edge(source, target, how=ways)
    return network


def declared_kinds(model: m.Model) -> dict[str, str]:
    """Every declared name that can lead to another, with its kind."""
    return {
        each.name: kind
        for kind, declared in (
            ("fact", model.facts),
            ("setting", model.settings),
            ("judgement", model.judgements),
            ("constant", model.constants),
            ("table", model.tables),
            ("quantity", model.quantities),
        )
        for each in declared
    }


def edges(model: m.Model) -> dict[tuple[str, str], tuple[str, ...]]:
    """The edges of ``links`` with how they lead, sorted. Whoever only walks backwards needs no graph library."""
    names = declared_kinds(model)
    found: dict[tuple[str, str], set[str]] = {}
    for constant in model.constants:
        for name in names_in(constant.expression):
            found.setdefault((name, constant.name), set()).add("value")
    for quantity in model.quantities:
        for body in walk.bodies(quantity.body):
            if isinstance(body, m.Follows):
                found.setdefault((body.quantity, quantity.name), set()).add("follows")
            if isinstance(body, m.Formula):
                for name in names_in(body.expression):
                    found.setdefault((name, quantity.name), set()).add("value")
            for branch in walk.branches(body):
                condition = walk.condition_of(branch)
                for node in walk.inside(condition) if condition is not None else ():
                    how = "takes" if isinstance(node, m.Takes) else "condition"
                    for name in own_names(node):
                        found.setdefault((name, quantity.name), set()).add(how)
    return {edge: tuple(sorted(ways)) for edge, ways in sorted(found.items()) if edge[0] in names and edge[1] in names}


def own_names(node: m.Expression | m.Condition) -> tuple[str, ...]:
    """The declared names that this node itself mentions, not those inside it."""
    match node:
        case m.Reference(name=name) | m.Holds(name=name):
            return (name,)
        case m.Lookup(table=name):
            return (name,)
        case m.Takes(quantity=name):
            return (name,)
        case _:
            return ()


def names_in(node: m.Expression | m.Condition) -> tuple[str, ...]:
    """Every declared name mentioned inside, in reading order, without repeats."""
    return tuple(dict.fromkeys(name for each in walk.inside(node) for name in own_names(each)))
