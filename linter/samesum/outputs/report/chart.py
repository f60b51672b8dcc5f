"""The decision graph as charts: boxes for quantities with their branch points, lines for what leads to what.

A small rulebook is one chart. A large one is an overview with a box for each clause, and a chart for each of
them, so that no chart holds more than can be read.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Literal

from samesum.graph import links
from samesum.outputs.page import width_of
from samesum.outputs.report.layers import Box, Line, Placed, draw
from samesum.reviewing.rows import Register, Row
from samesum.written import whole

WHOLE_UP_TO = 40
"""Branch points that one chart may hold; beyond, it is drawn by clauses."""

WIDEST_TEXT = 30
_SIGN = 7.3  # pixels that a sign of the chart's 13-pixel letters takes, on the generous side
_PAD = 12.0
HEAD = 26.0
LOUD = 40.0
QUIET = 22.0

EdgeWay = Literal["value", "condition", "tie"]


@dataclass(frozen=True, slots=True)
class Entry:
    """A line of a box: one branch point, setting or judgement. ``number`` is its row in the register."""

    number: int
    row: Row
    path: str
    says: str
    branches: str
    top: float
    height: float


@dataclass(frozen=True, slots=True)
class Node:
    """A box. ``kind`` is ``quantity``, ``plain`` (without branch points), ``input``, ``clause`` or ``beyond`` (what
    lies outside this chart). ``opens`` is the chart that a click on it opens, "" for none."""

    id: str
    kind: str
    title: str
    clause: str
    entries: tuple[Entry, ...]
    lines: tuple[str, ...]
    opens: str
    x: float
    y: float
    width: float
    height: float
    is_result: bool


@dataclass(frozen=True, slots=True)
class Chart:
    """One drawing. ``id`` is safe in HTML; ``title`` is for people."""

    id: str
    title: str
    nodes: tuple[Node, ...]
    lines: tuple[Line, ...]
    width: float
    height: float
    loud: int
    total: int


@dataclass(slots=True)
class _Draft:
    """A box before it is placed."""

    id: str
    kind: str
    title: str
    clause: str
    entries: tuple[Entry, ...]
    lines: tuple[str, ...] = ()
    opens: str = ""


def charts_of(register: Register) -> tuple[Chart, ...]:
    """The charts of a rulebook, the one to begin with first."""
    drafts = _boxes(register)
    edges = _edges(register, drafts)
    points = sum(bool(row.place.points) for row in register.rows)
    result = register.evidence.model.result
    result_name = result.name if result is not None else ""
    if points <= WHOLE_UP_TO:
        return (_chart("chart-all", "The whole rulebook", list(drafts.values()), edges, result_name),)
    groups = _groups(drafts)
    ids = {group: f"chart-{number}" for number, group in enumerate(groups, start=1)}
    of = {id: group for group, members in groups.items() for id in members}
    overview = [_summary(group, [drafts[id] for id in members], ids[group]) for group, members in groups.items()]
    between = _unique((of[source], of[target], way) for source, target, way in edges if of[source] != of[target])
    charts = [_chart("chart-all", "All clauses", overview, _not_implied(between), "")]
    for group, members in groups.items():
        inside = [drafts[id] for id in members]
        shown, stubs = _with_beyond(group, edges, of, ids)
        charts.append(_chart(ids[group], _title(group), [*inside, *stubs], shown, result_name))
    return tuple(charts)


def _unique(edges: Iterable[tuple[str, str, str]]) -> list[tuple[str, str, str]]:
    """One line between two boxes, the loudest way of those there are."""
    found: dict[tuple[str, str], str] = {}
    order = ("value", "condition", "tie")
    for source, target, way in edges:
        held = found.get((source, target))
        if held is None or order.index(way) > order.index(held):
            found[(source, target)] = way
    return [(source, target, way) for (source, target), way in sorted(found.items())]


def _not_implied(edges: Sequence[tuple[str, str, str]]) -> list[tuple[str, str, str]]:
    """Without the lines that say no more than a way through other boxes does (all of them where there are cycles)."""
    import networkx as nx

    network: nx.DiGraph[str] = nx.DiGraph()
    network.add_edges_from((source, target) for source, target, _ in edges)
    if not nx.is_directed_acyclic_graph(network):
        return list(edges)
    kept = set(nx.transitive_reduction(network).edges)
    return [edge for edge in edges if (edge[0], edge[1]) in kept]


def _boxes(register: Register) -> dict[str, _Draft]:
    by_quantity: dict[str, list[tuple[int, Row]]] = {}
    drafts: dict[str, _Draft] = {}
    for number, row in enumerate(register.rows):
        if row.quantity:
            by_quantity.setdefault(row.quantity, []).append((number, row))
        else:
            drafts[row.id] = _Draft(row.id, "input", row.id, row.place.clause, _entries([(number, row)]))
    for quantity in register.evidence.model.quantities:
        rows = by_quantity.get(quantity.name, [])
        kind = "quantity" if rows else "plain"
        drafts[quantity.name] = _Draft(quantity.name, kind, quantity.name, quantity.about.clause, _entries(rows))
    return drafts


def _entries(rows: Sequence[tuple[int, Row]]) -> tuple[Entry, ...]:
    found = []
    top = HEAD
    for number, row in rows:
        height = LOUD if row.leaves_something else QUIET
        path = row.id.partition("/")[2] if row.place.points else ""
        names = " · ".join(option.name for option in row.options)
        found.append(Entry(number, row, path, says(row), cut(names, WIDEST_TEXT + 6), top, height))
        top += height
    return tuple(found)


def says(row: Row) -> str:
    """What a branch point is, in three words."""
    who = row.decides.replace(", ", " or ") or "nobody"
    match row.kind:
        case "choice":
            return f"{who} chooses"
        case "overlap":
            return "two branches open"
        case "steered":
            return f"{who} can steer"
        case "judgement":
            return f"{who} reads"
        case "setting":
            return f"{who} sets"
    if row.leader:
        return f"as {row.leader}"
    return "by facts, with a gap" if row.gaps else "by facts"


def cut(text: str, most: int) -> str:
    """The text, or its beginning and an ellipsis."""
    if width_of(text) <= most:
        return text
    kept = ""
    for sign in text:
        if width_of(kept + sign) > most - 1:
            break
        kept += sign
    return kept.rstrip() + "…"


def _edges(register: Register, drafts: Mapping[str, _Draft]) -> list[tuple[str, str, str]]:
    network = links(register.evidence.graph)
    found = []
    for source, target, data in sorted(network.edges(data=True)):
        if source in drafts and target in drafts:
            how = data["how"]
            way: EdgeWay = (
                "tie" if "follows" in how or "takes" in how else "condition" if "condition" in how else "value"
            )
            found.append((source, target, way))
    return _unique(found)


# --- by clauses ----------------------------------------------------------------------------


def _groups(drafts: Mapping[str, _Draft]) -> dict[str, list[str]]:
    """Boxes by the first part of their clause, in the order of reading; a group too large by the second part, too."""
    groups = _by(drafts.values(), lambda draft: _part(draft.clause, 1))
    found: dict[str, list[str]] = {}
    for group, members in groups.items():
        if sum(len(draft.entries) for draft in members) > WHOLE_UP_TO:
            finer = _by(members, lambda draft: _part(draft.clause, 2))
            found.update({name: [draft.id for draft in some] for name, some in finer.items()})
        else:
            found[group] = [draft.id for draft in members]
    return found


def _by(drafts: Iterable[_Draft], key: Callable[[_Draft], str]) -> dict[str, list[_Draft]]:
    found: dict[str, list[_Draft]] = {}
    for draft in drafts:
        found.setdefault(key(draft), []).append(draft)
    return found


def _part(clause: str, parts: int) -> str:
    return ".".join(clause.split(".")[:parts])


def _title(group: str) -> str:
    return f"Clause {group}" if group else "Without a clause"


def _summary(group: str, members: Sequence[_Draft], chart: str) -> _Draft:
    rows = [entry.row for draft in members for entry in draft.entries]
    loud = [row for row in rows if row.leaves_something]
    whose = [
        f"{sum(who in row.decides for row in loud)} {who}"
        for who in ("developer", "verifier", "programme")
        if any(who in row.decides for row in loud)
    ]
    lines = (
        f"{whole(len(rows))} branch points" if len(rows) != 1 else "1 branch point",
        f"{whole(len(loud))} left to somebody" if loud else "all by facts",
        *((cut(", ".join(whose), WIDEST_TEXT + 8),) if whose else ()),
    )
    return _Draft(group, "clause", _title(group), "", (), lines if rows else ("no branch point",), chart)


def _with_beyond(
    group: str, edges: Sequence[tuple[str, str, str]], of: Mapping[str, str], ids: Mapping[str, str]
) -> tuple[list[tuple[str, str, str]], list[_Draft]]:
    """The edges that touch a group, with one box for each other group on either side."""
    shown: list[tuple[str, str, str]] = []
    stubs: dict[str, _Draft] = {}
    for source, target, way in edges:
        ends = []
        for id, side in ((source, "from"), (target, "to")):
            if of[id] == group:
                ends.append(id)
                continue
            stub = f"{side}\0{of[id]}"
            title = _title(of[id])
            says = f"{side} {title[0].lower()}{title[1:]}"
            stubs.setdefault(stub, _Draft(stub, "beyond", says, "", (), (), ids[of[id]]))
            ends.append(stub)
        if of[source] == group or of[target] == group:
            shown.append((ends[0], ends[1], way))
    touched = {id for edge in shown for id in edge[:2]}
    return _unique(shown), [stub for id, stub in stubs.items() if id in touched]


# --- placing -------------------------------------------------------------------------------


def _chart(id: str, title: str, drafts: Sequence[_Draft], edges: Sequence[tuple[str, str, str]], result: str) -> Chart:
    drawing = draw([_box(draft) for draft in drafts], edges)
    nodes = tuple(_node(draft, placed, result) for draft, placed in zip(drafts, drawing.boxes, strict=True))
    rows = [entry.row for draft in drafts for entry in draft.entries]
    return Chart(
        id,
        title,
        nodes,
        drawing.lines,
        drawing.width,
        drawing.height,
        sum(row.leaves_something for row in rows),
        len(rows),
    )


def _box(draft: _Draft) -> Box:
    texts = [width_of(cut(draft.title, WIDEST_TEXT)) * 1.1 + 2.5 + width_of(draft.clause) * 0.9]
    for entry in draft.entries:
        path = f"{entry.path} " if entry.path else ""
        texts.append(width_of(cut(path + entry.says, WIDEST_TEXT)) * 1.06 + 4.5)
        if entry.row.leaves_something:
            texts.append(width_of(entry.branches) * 0.88 + 4)
    texts += [width_of(line) * 0.92 for line in draft.lines]
    width = max(96.0, min(max(texts), WIDEST_TEXT + 8) * _SIGN + 2 * _PAD)
    height = HEAD + sum(entry.height for entry in draft.entries) + 17.0 * len(draft.lines)
    return Box(draft.id, width, height + (6.0 if draft.entries or draft.lines else 2.0))


def _node(draft: _Draft, placed: Placed, result: str) -> Node:
    return Node(
        draft.id,
        draft.kind,
        cut(draft.title, WIDEST_TEXT),
        draft.clause,
        draft.entries,
        draft.lines,
        draft.opens,
        placed.x,
        placed.y,
        placed.box.width,
        placed.box.height,
        draft.id == result,
    )
