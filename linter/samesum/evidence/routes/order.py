"""The order in which an evaluation of the result first meets what it asks."""

from __future__ import annotations

from samesum.graph import BranchPoint, DecisionGraph, Element, mentions
from samesum.reading import model as m


def reading_order(graph: DecisionGraph) -> list[str]:
    """Facts, settings, judgements and branch points (``point:ID``) in the order in which an evaluation
    of the result first meets them: what is asked together stands together."""
    order: dict[str, None] = {}
    seen: set[str] = set()
    points: dict[str, list[BranchPoint]] = {}
    for point in graph.branch_points.values():
        points.setdefault(point.instance, []).append(point)

    def visit_all(node: m.Expression | m.Condition, elements: Element) -> None:
        for kind, id in mentions(node, elements, graph.sizes):
            if kind in ("value", "takes"):
                visit(id)
            else:
                order.setdefault(id)

    def visit(id: str) -> None:
        if id in seen or id not in graph.instances:
            return
        seen.add(id)
        elements = graph.instances[id].elements
        for point in points.get(id, ()):
            for condition in point.conditions:
                if condition is not None:
                    visit_all(condition, elements)
            if point.leader:
                visit(point.leader)
            order.setdefault(f"point:{point.id}")
            for leaf in graph.leaves[id]:
                if leaf.under is not None and leaf.under[0] == point.id:
                    visit_all(leaf.expression, elements)
        for leaf in graph.leaves[id]:
            visit_all(leaf.expression, elements)

    for applies in graph.model.applies:
        visit_all(applies.condition, {})
    if graph.model.result is not None:
        visit(graph.model.result.name)
    return list(order)
