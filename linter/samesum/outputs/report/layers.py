"""A layered drawing of a directed graph: which column each box stands in, and where.

The steps are those of Sugiyama, Tagawa and Toda (1981, Methods for visual understanding of hierarchical
system structures, IEEE Transactions on Systems, Man and Cybernetics 11:109): break cycles, put every node
left of what it leads to, let long edges pass through the columns between, order each column by the middle
of its neighbours, then straighten. Everything is deterministic: ties keep the order given.
"""

from __future__ import annotations

import itertools
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

SWEEPS = 12
COLUMN_GAP = 56.0
ROW_GAP = 16.0
BEND_HEIGHT = 6.0


@dataclass(frozen=True, slots=True)
class Box:
    """A node with the room it takes."""

    id: str
    width: float
    height: float


@dataclass(frozen=True, slots=True)
class Placed:
    """A box with its left upper corner."""

    box: Box
    x: float
    y: float


@dataclass(frozen=True, slots=True)
class Line:
    """An edge as points to be joined by a curve; ``way`` is what the edge carries along."""

    source: str
    target: str
    way: str
    points: tuple[tuple[float, float], ...]


@dataclass(frozen=True, slots=True)
class Drawing:
    """``boxes`` in the order given; the whole begins at 0, 0."""

    boxes: tuple[Placed, ...]
    lines: tuple[Line, ...]
    width: float
    height: float


@dataclass(slots=True)
class _Column:
    ids: list[str] = field(default_factory=list)
    width: float = 0.0


def draw(boxes: Sequence[Box], edges: Sequence[tuple[str, str, str]]) -> Drawing:
    """Boxes in columns, every edge (source, target, way) from left to right as far as there are no cycles."""
    if not boxes:
        return Drawing((), (), 0.0, 0.0)
    known = {box.id: box for box in boxes}
    kept = [edge for edge in edges if edge[0] in known and edge[1] in known and edge[0] != edge[1]]
    forward = _without_cycles([box.id for box in boxes], kept)
    rank = _ranks([box.id for box in boxes], forward)
    chains, bends = _chains(forward, rank)
    heights = {**{box.id: box.height for box in boxes}, **dict.fromkeys(bends, BEND_HEIGHT)}
    last = max(rank.values())
    columns = [_Column() for _ in range(last + 1)]
    for box in boxes:
        columns[rank[box.id]].ids.append(box.id)
        columns[rank[box.id]].width = max(columns[rank[box.id]].width, box.width)
    for bend, number in bends.items():
        columns[number].ids.append(bend)
    before, after = _neighbours(chains)
    _order(columns, before, after)
    y = _heights(columns, heights, before, after)
    lefts: list[float] = []
    left = 0.0
    for column in columns:
        lefts.append(left)
        left += column.width + COLUMN_GAP
    top = min(y[id] for column in columns for id in column.ids)
    bottom = max(y[id] + heights[id] for column in columns for id in column.ids)
    placed = tuple(Placed(box, lefts[rank[box.id]], y[box.id] - top) for box in boxes)
    lines = tuple(
        _line(edge, chain, known, rank, bends, columns, lefts, y, heights, top)
        for edge, chain in zip(forward, chains, strict=True)
    )
    return Drawing(placed, lines, left - COLUMN_GAP, bottom - top)


@dataclass(frozen=True, slots=True)
class _Edge:
    """An edge as drawn; ``turned`` when it was turned round to break a cycle."""

    source: str
    target: str
    way: str
    turned: bool


def _without_cycles(ids: Sequence[str], edges: Sequence[tuple[str, str, str]]) -> list[_Edge]:
    follows: dict[str, list[str]] = {id: [] for id in ids}
    for source, target, _ in edges:
        follows[source].append(target)
    done: set[str] = set()
    open_now: set[str] = set()
    back: set[tuple[str, str]] = set()
    for start in ids:
        if start in done:
            continue
        stack = [(start, iter(follows[start]))]
        open_now.add(start)
        while stack:
            id, rest = stack[-1]
            target = next(rest, "")
            if not target:
                stack.pop()
                open_now.discard(id)
                done.add(id)
            elif target in open_now:
                back.add((id, target))
            elif target not in done:
                open_now.add(target)
                stack.append((target, iter(follows[target])))
    return [
        _Edge(target, source, way, True) if (source, target) in back else _Edge(source, target, way, False)
        for source, target, way in edges
    ]


def _ranks(ids: Sequence[str], edges: Sequence[_Edge]) -> dict[str, int]:
    """Columns from the right: every node as near to what it leads to as it can stand."""
    after: dict[str, list[str]] = {id: [] for id in ids}
    waiting = dict.fromkeys(ids, 0)
    before: dict[str, list[str]] = {id: [] for id in ids}
    for edge in edges:
        after[edge.source].append(edge.target)
        before[edge.target].append(edge.source)
        waiting[edge.source] += 1
    distance = dict.fromkeys(ids, 0)
    ready = [id for id in ids if not waiting[id]]
    while ready:
        id = ready.pop()
        for source in before[id]:
            distance[source] = max(distance[source], distance[id] + 1)
            waiting[source] -= 1
            if not waiting[source]:
                ready.append(source)
    most = max(distance.values())
    return {id: most - each for id, each in distance.items()}


def _chains(edges: Sequence[_Edge], rank: Mapping[str, int]) -> tuple[list[list[str]], dict[str, int]]:
    """Each edge as its nodes with a bend in every column between, and the bends' columns."""
    chains: list[list[str]] = []
    bends: dict[str, int] = {}
    for number, edge in enumerate(edges):
        chain = [edge.source]
        for column in range(rank[edge.source] + 1, rank[edge.target]):
            bend = f"\0{number}:{column}"
            bends[bend] = column
            chain.append(bend)
        chain.append(edge.target)
        chains.append(chain)
    return chains, bends


def _neighbours(chains: Sequence[Sequence[str]]) -> tuple[dict[str, list[str]], dict[str, list[str]]]:
    before: dict[str, list[str]] = {}
    after: dict[str, list[str]] = {}
    for chain in chains:
        for one, other in itertools.pairwise(chain):
            after.setdefault(one, []).append(other)
            before.setdefault(other, []).append(one)
    return before, after


def _order(columns: Sequence[_Column], before: Mapping[str, list[str]], after: Mapping[str, list[str]]) -> None:
    """The order in each column with the fewest crossings that sweeping to and fro comes to."""
    best = [list(column.ids) for column in columns]
    fewest = _crossings(columns, after)
    for sweep in range(SWEEPS):
        rightwards = sweep % 2 == 0
        sequence = range(1, len(columns)) if rightwards else range(len(columns) - 2, -1, -1)
        for number in sequence:
            beside = columns[number - 1] if rightwards else columns[number + 1]
            place = {id: position for position, id in enumerate(beside.ids)}
            links = before if rightwards else after
            own = {id: position for position, id in enumerate(columns[number].ids)}

            def middle(
                id: str,
                place: dict[str, int] = place,
                own: dict[str, int] = own,
                links: Mapping[str, list[str]] = links,
            ) -> float:
                found = sorted(place[other] for other in links.get(id, ()) if other in place)
                return sum(found) / len(found) if found else float(own[id])

            columns[number].ids.sort(key=lambda id: (middle(id), own[id]))
        crossed = _crossings(columns, after)
        if crossed < fewest:
            fewest = crossed
            best = [list(column.ids) for column in columns]
    for column, ids in zip(columns, best, strict=True):
        column.ids = ids


def _crossings(columns: Sequence[_Column], after: Mapping[str, list[str]]) -> int:
    total = 0
    for left, right in itertools.pairwise(columns):
        place = {id: position for position, id in enumerate(right.ids)}
        ends = [
            place[other]
            for id in left.ids
            for other in sorted(after.get(id, ()), key=lambda o: place.get(o, 0))
            if other in place
        ]
        total += sum(1 for number, end in enumerate(ends) for later in ends[number + 1 :] if later < end)
    return total


def _heights(
    columns: Sequence[_Column],
    heights: Mapping[str, float],
    before: Mapping[str, list[str]],
    after: Mapping[str, list[str]],
) -> dict[str, float]:
    """Where each node begins: in its column's order, as near to the middle of its neighbours as fits."""
    y: dict[str, float] = {}
    for column in columns:
        at = 0.0
        for id in column.ids:
            y[id] = at
            at += heights[id] + ROW_GAP
    tallest = max(sum(heights[id] + ROW_GAP for id in column.ids) for column in columns)
    for column in columns:
        spare = (tallest - sum(heights[id] + ROW_GAP for id in column.ids)) / 2
        for id in column.ids:
            y[id] += spare
    for sweep in range(SWEEPS):
        sequence = columns[1:] if sweep % 2 == 0 else list(reversed(columns[:-1]))
        for column in sequence:
            wanted = {}
            for id in column.ids:
                near = [*before.get(id, ())] if sweep % 2 == 0 else [*after.get(id, ())]
                near = near or [*before.get(id, ()), *after.get(id, ())]
                centre = (
                    sum(y[other] + heights[other] / 2 for other in near) / len(near)
                    if near
                    else y[id] + heights[id] / 2
                )
                wanted[id] = centre - heights[id] / 2
            y.update(_fitted(column.ids, wanted, heights))
    return y


def _fitted(ids: Sequence[str], wanted: Mapping[str, float], heights: Mapping[str, float]) -> dict[str, float]:
    """The places nearest to those wanted (in squares) that keep the order and the gaps: pools of adjacent
    violators, moved together."""
    pools: list[tuple[float, int, list[str]]] = []  # sum of wanted starts of the pool, members, ids
    for id in ids:
        total, count, members = wanted[id], 1, [id]
        while pools:
            earlier_total, earlier_count, earlier = pools[-1]
            size = sum(heights[each] + ROW_GAP for each in earlier)
            if total / count >= earlier_total / earlier_count + size:
                break
            pools.pop()
            total = earlier_total + total - count * size
            count += earlier_count
            members = earlier + members
        pools.append((total, count, members))
    found: dict[str, float] = {}
    for total, count, members in pools:
        at = total / count
        for id in members:
            found[id] = at
            at += heights[id] + ROW_GAP
    return found


def _line(
    edge: _Edge,
    chain: Sequence[str],
    known: Mapping[str, Box],
    rank: Mapping[str, int],
    bends: Mapping[str, int],
    columns: Sequence[_Column],
    lefts: Sequence[float],
    y: Mapping[str, float],
    heights: Mapping[str, float],
    top: float,
) -> Line:
    points: list[tuple[float, float]] = []
    for id in chain:
        middle = y[id] - top + heights[id] / 2
        if id in bends:
            column = bends[id]
            points.append((lefts[column], middle))
            points.append((lefts[column] + columns[column].width, middle))
        elif id == chain[0]:
            points.append((lefts[rank[id]] + known[id].width, middle))
        else:
            points.append((lefts[rank[id]], middle))
    if edge.turned:
        return Line(edge.target, edge.source, edge.way, tuple(reversed(points)))
    return Line(edge.source, edge.target, edge.way, tuple(points))


def path(points: Sequence[tuple[float, float]]) -> str:
    """The points as the ``d`` of an SVG path: level where it leaves and arrives, curved between."""
    first = points[0]
    parts = [f"M{first[0]:.1f} {first[1]:.1f}"]
    for (x1, y1), (x2, y2) in itertools.pairwise(points):
        half = (x2 - x1) / 2
        if abs(y1 - y2) < 0.05:
            parts.append(f"H{x2:.1f}")
        else:
            parts.append(f"C{x1 + half:.1f} {y1:.1f} {x2 - half:.1f} {y2:.1f} {x2:.1f} {y2:.1f}")
    return "".join(parts)
