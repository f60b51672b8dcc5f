"""Who can move a branch point, directly and through what.

Facts leave nobody a choice. A choice belongs to whoever the rulebook names, an overlap to the
developer; a condition is *steered* by whoever can move anything it asks: a judgement, a setting, the
choice it asks by ``takes``, or a quantity whose value depends on any of these.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from typing import Literal

from samesum.graph import BranchPoint, DecisionGraph, edges, names_in
from samesum.reading import model as m
from samesum.reading import walk

Through = Literal["choice", "overlap", "judgement", "setting"]


@dataclass(frozen=True, slots=True)
class Mover:
    """Somebody who can move a condition: ``by`` through ``source`` (a judgement or setting by name, or
    the general id of a choice or overlap); ``chain`` is the names from the condition to the source."""

    by: m.Decider
    through: Through
    source: str
    chain: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Control:
    """Of one branch point (all elements together, ``general_id``): ``decided_by`` is whoever picks among
    its branches directly (choice or overlap; None when its conditions decide, or it follows another),
    ``movers`` who can steer its conditions, shortest chain first."""

    branch_point: str
    decided_by: m.Decider | None
    movers: tuple[Mover, ...]


def movers_of(condition: m.Condition, graph: DecisionGraph, overlapping: Iterable[str] = ()) -> tuple[Mover, ...]:
    """Who can move one condition that stands outside any branch point, such as ``applies when``."""
    general = {point.general_id: point for point in reversed(list(graph.branch_points.values()))}
    overlaps = {graph.branch_points[id].general_id for id in overlapping if id in graph.branch_points}
    found: dict[tuple[str, str], Mover] = {}
    for mover in _movers(condition, _leading_to(graph), _sources(graph, general, overlaps), general):
        found.setdefault((mover.through, mover.source), mover)
    return tuple(sorted(found.values(), key=lambda mover: (len(mover.chain), mover.chain, mover.source)))


@dataclass(frozen=True, slots=True)
class _Source:
    by: m.Decider
    through: Through
    source: str


def find_control(graph: DecisionGraph, overlapping: Iterable[str] = ()) -> Mapping[str, Control]:
    """The control of every branch point, by general id. ``overlapping``: ids of branch points whose plain
    cases overlap (they are the developer's to pick)."""
    general = {point.general_id: point for point in reversed(list(graph.branch_points.values()))}
    overlaps = {graph.branch_points[id].general_id for id in overlapping if id in graph.branch_points}
    before = _leading_to(graph)
    sources = _sources(graph, general, overlaps)
    result: dict[str, Control] = {}
    for id, point in sorted(general.items(), key=lambda item: (item[1].span, item[0])):
        decided: m.Decider | None = point.by if len(point.branches) > 1 else None
        if id in overlaps:
            decided = "developer"
        movers: dict[tuple[str, str], Mover] = {}
        for condition in point.conditions:
            if condition is not None:
                for mover in _movers(condition, before, sources, general):
                    movers.setdefault((mover.through, mover.source), mover)
        ordered = sorted(movers.values(), key=lambda mover: (len(mover.chain), mover.chain, mover.source))
        result[id] = Control(id, decided, tuple(ordered))
    return result


def _leading_to(graph: DecisionGraph) -> dict[str, list[str]]:
    """What leads to each name directly, in order."""
    found: dict[str, list[str]] = {}
    for source, target in edges(graph.model):
        found.setdefault(target, []).append(source)
    return found


def _sources(graph: DecisionGraph, general: Mapping[str, BranchPoint], overlaps: set[str]) -> dict[str, list[_Source]]:
    """What somebody can move, by the declared name it belongs to."""
    found: dict[str, list[_Source]] = {}
    for setting in graph.model.settings:
        found.setdefault(setting.name, []).append(_Source(setting.by, "setting", setting.name))
    for judgement in graph.model.judgements:
        found.setdefault(judgement.name, []).append(_Source(judgement.by, "judgement", judgement.name))
    for id, point in sorted(general.items()):
        if point.by is not None and len(point.branches) > 1:
            found.setdefault(point.quantity, []).append(_Source(point.by, "choice", id))
        if id in overlaps:
            found.setdefault(point.quantity, []).append(_Source("developer", "overlap", id))
    return found


def _movers(
    condition: m.Condition,
    before: Mapping[str, list[str]],
    sources: Mapping[str, list[_Source]],
    general: Mapping[str, BranchPoint],
) -> Iterable[Mover]:
    asked_choices = {node.quantity for node in walk.inside(condition) if isinstance(node, m.Takes)}
    valued = [
        name
        for node in walk.inside(condition)
        if not isinstance(node, m.Takes)
        for name in (names_in(node) if not walk.parts(node) else ())
    ]
    for name in sorted(asked_choices):
        point = general.get(name)
        while point is not None and point.leader:
            point = general.get(point.leader.split("@")[0])
        if point is not None and point.by is not None:
            direct: tuple[str, ...] = (name,) if point.quantity == name else (name, point.quantity)
            yield Mover(point.by, "choice", point.general_id, direct)
    starts = list(dict.fromkeys([*valued, *_tables(condition)]))
    seen = set(starts)
    queue: deque[tuple[str, tuple[str, ...]]] = deque((name, (name,)) for name in starts)
    while queue:
        name, chain = queue.popleft()
        for each in sources.get(name, ()):
            yield Mover(each.by, each.through, each.source, chain)
        for each_before in before.get(name, ()):
            if each_before not in seen:
                seen.add(each_before)
                queue.append((each_before, (*chain, each_before)))


def _tables(condition: m.Condition) -> list[str]:
    return [node.table for node in walk.inside(condition) if isinstance(node, m.Lookup)]
