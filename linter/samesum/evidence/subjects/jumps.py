"""Jumps: where a number changes at once because a project crosses a threshold.

Every comparison in ``cases``, and every border between two bands of a table, is looked up at its threshold:
one fact is moved there, everything else stays near the middle of its domain, choices take their reference
option. The number is taken as the limit from either side, exactly. All elements of a fact per index move
together, as in a project with one of them.
"""

from __future__ import annotations

import time
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from fractions import Fraction
from itertools import pairwise

from samesum.evidence.routes.witness import Value
from samesum.evidence.subjects.pointwise import Calculation, NoValue, middle_project
from samesum.graph import DecisionGraph, Element, mentions
from samesum.reading import model as m
from samesum.reading import walk
from samesum.spans import Span

NEAR = Fraction(1, 10**12)  # of the domain's width, far below any digit shown
FAR = Fraction(10**6)  # how far to look where a fact has no bound


@dataclass(frozen=True, slots=True)
class Jump:
    """``place`` is the branch point (general id) or the quantity whose number jumps, ``table`` the table that
    makes it jump ("" for conditions). ``asked`` names what is compared and ``at`` is its value there, in
    ``unit``; ``fact`` is the fact that was moved and ``fact_at`` its value. ``before`` and ``after`` are the limits of
    the quantity for a rising fact, ``size`` is (after − before) / |before| (|after| when before is 0). The same for the
    result, None when it has no number there."""

    place: str
    table: str
    asked: str
    at: Fraction
    unit: m.Unit
    fact: str
    fact_at: Fraction
    before: Fraction
    after: Fraction
    size: Fraction
    result_before: Fraction | None
    result_after: Fraction | None
    result_size: Fraction | None
    span: Span


@dataclass(frozen=True, slots=True)
class Jumps:
    """``untold``: places whose thresholds were not looked at in the time given, or could not be."""

    found: tuple[Jump, ...]
    untold: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class _Threshold:
    """Two sides that are compared somewhere. ``forced`` leads there."""

    place: str
    table: str
    instance: str
    left: m.Expression
    right: m.Expression | Fraction
    forced: Mapping[str, int]
    elements: Element
    span: Span


def find_jumps(graph: DecisionGraph, seconds: float = 5.0) -> Jumps:
    """All jumps at thresholds that some numeric fact can reach, largest effect kept for each place and value."""
    deadline = time.monotonic() + seconds
    middle = middle_project(graph)
    ranges = _ranges(graph)
    needs = _Needs(graph)
    found: dict[tuple[str, str, str, Fraction], Jump] = {}
    untold: dict[str, None] = {}
    for threshold in _thresholds(graph):
        if time.monotonic() > deadline:
            untold[threshold.place] = None
            continue
        told = False
        candidates = [name for name in needs.facts_of(threshold) if name in ranges]
        for fact in candidates:
            if time.monotonic() > deadline:
                break
            root = _root(graph, threshold, fact, ranges[fact], middle)
            if root is None:
                continue
            told = True
            jump = _jump(graph, threshold, fact, root, ranges[fact], middle)
            if jump is not None:
                key = (jump.place, jump.table, jump.asked, jump.at)
                other = found.get(key)
                if other is None or _effect(jump) > _effect(other):
                    found[key] = jump
            break
        if not told and candidates and not _never_crossed(graph, threshold, middle):
            untold[threshold.place] = None
    return Jumps(tuple(found.values()), tuple(untold))


def _effect(jump: Jump) -> Fraction:
    return abs(jump.size if jump.result_size is None else jump.result_size)


def _ranges(graph: DecisionGraph) -> dict[str, tuple[Fraction, Fraction]]:
    """Where each numeric fact or setting may be moved, by declared name."""
    ranges: dict[str, tuple[Fraction, Fraction]] = {}
    both: tuple[m.Fact | m.Setting, ...] = (*graph.model.facts, *graph.model.settings)
    for declared in both:
        if isinstance(declared.domain, m.Range):
            low, high = declared.domain.low, declared.domain.high
            low = low if low is not None else (high if high is not None else Fraction(0)) - FAR
            ranges[declared.name] = (low, high if high is not None else low + 2 * FAR)
    return ranges


def _first_element(graph: DecisionGraph, instance: str) -> bool:
    return graph.instances[instance].element in (0, 1)


def _path(graph: DecisionGraph, under: tuple[str, str] | None) -> dict[str, int]:
    """The branches that lead to a place inside a body."""
    forced: dict[str, int] = {}
    while under is not None:
        point = graph.branch_points[under[0]]
        forced[point.id] = point.branches.index(under[1])
        under = point.parent
    return forced


def _thresholds(graph: DecisionGraph) -> Iterator[_Threshold]:
    for point in graph.branch_points.values():
        if not _first_element(graph, point.instance):
            continue
        elements = graph.instances[point.instance].elements
        forced = _path(graph, point.parent)
        for branch, condition in zip(walk.branches(point.body), point.conditions, strict=True):
            if condition is None:
                continue
            if point.kind in ("cases", "cases in order"):
                for node in walk.inside(condition):
                    if isinstance(node, m.Comparison):
                        yield _Threshold(
                            point.general_id, "", point.instance, node.left, node.right, forced, elements, branch.span
                        )
            yield from _borders(graph, condition, point.instance, point.general_id, forced, elements)
    for id, leaves in graph.leaves.items():
        if not _first_element(graph, id):
            continue
        for leaf in leaves:
            forced = _path(graph, leaf.under)
            elements = graph.instances[id].elements
            place = graph.instances[id].quantity.name
            yield from _borders(graph, leaf.expression, id, place, forced, elements)


def _borders(
    graph: DecisionGraph,
    node: m.Expression | m.Condition,
    instance: str,
    place: str,
    forced: Mapping[str, int],
    elements: Element,
) -> Iterator[_Threshold]:
    """Borders between the bands of every table that is called."""
    tables = {table.name: table for table in graph.model.tables}
    for part in walk.inside(node):
        if isinstance(part, m.Reduction):
            elements = {**elements, part.index: 1}
        if isinstance(part, m.Lookup) and part.table in tables:
            table = tables[part.table]
            for position, (key, argument) in enumerate(zip(table.keys, part.arguments, strict=True)):
                edges: dict[Fraction, Span] = {}
                for row in table.rows if key.bands else ():
                    label = row.labels[position]
                    if isinstance(label, m.Band) and label.high is not None:
                        edges.setdefault(label.high, row.span)
                for edge, span in sorted(edges.items()):
                    yield _Threshold(place, table.name, instance, argument, edge, forced, elements, span)


class _Needs:
    """Which facts and settings a number depends on, by declared name in reading order."""

    def __init__(self, graph: DecisionGraph) -> None:
        self._graph = graph
        self._known: dict[str, tuple[str, ...]] = {}

    def facts_of(self, threshold: _Threshold) -> tuple[str, ...]:
        sides = [threshold.left] + ([] if isinstance(threshold.right, Fraction) else [threshold.right])
        found: dict[str, None] = {}
        for side in sides:
            for kind, id in mentions(side, threshold.elements, self._graph.sizes):
                found.update(dict.fromkeys(self._of(kind, id)))
        settings = {each.name for each in self._graph.model.settings}
        return tuple(sorted(found, key=lambda name: name in settings))

    def _of(self, kind: str, id: str) -> tuple[str, ...]:
        if kind in ("fact", "setting"):
            return (id.split("@")[0],)
        if kind != "value" or id not in self._graph.instances:
            return ()
        known = self._known.get(id)
        if known is None:
            self._known[id] = ()
            found: dict[str, None] = {}
            instance = self._graph.instances[id]
            for node in walk.written_in(instance.quantity.body):
                for inner, target in mentions(node, instance.elements, self._graph.sizes):
                    found.update(dict.fromkeys(self._of(inner, target)))
            known = self._known[id] = tuple(found)
        return known


def _at(graph: DecisionGraph, middle: Mapping[str, Value], fact: str, value: Fraction) -> dict[str, Value]:
    """The middle project with one fact, all its elements, moved."""
    return {name: value if name.split("@")[0] == fact else other for name, other in middle.items()}


def _difference(
    graph: DecisionGraph, threshold: _Threshold, fact: str, value: Fraction, middle: Mapping[str, Value]
) -> Fraction | None:
    calculation = Calculation(graph, _at(graph, middle, fact, value), threshold.forced)
    try:
        left = calculation.number(threshold.left, threshold.elements)
        right = threshold.right
        return left - (right if isinstance(right, Fraction) else calculation.number(right, threshold.elements))
    except NoValue:
        return None


def _root(
    graph: DecisionGraph,
    threshold: _Threshold,
    fact: str,
    reach: tuple[Fraction, Fraction],
    middle: Mapping[str, Value],
) -> Fraction | None:
    """Where the two sides meet inside the fact's domain: exactly where the difference is linear, else by halving."""
    low, high = reach
    third = (high - low) / 3
    places = (low, low + third, high - third, high)
    found = [_difference(graph, threshold, fact, place, middle) for place in places]
    ends = [(place, value) for place, value in zip(places, found, strict=True) if value is not None]
    if len(ends) == 4 and high > low:
        slope = (ends[3][1] - ends[0][1]) / (high - low)
        straight = all(value == ends[0][1] + slope * (place - low) for place, value in ends)
        if straight:
            if slope == 0:
                return None
            root = low - ends[0][1] / slope
            return root if low < root < high else None
    for (start, first), (end, second) in pairwise(ends):
        if (first < 0 < second) or (second < 0 < first):
            return _halved(graph, threshold, fact, (start, first), (end, second), middle)
    return None


def _halved(
    graph: DecisionGraph,
    threshold: _Threshold,
    fact: str,
    start: tuple[Fraction, Fraction],
    end: tuple[Fraction, Fraction],
    middle: Mapping[str, Value],
) -> Fraction | None:
    (low, first), (high, _) = start, end
    width = high - low
    while high - low > width * NEAR / 16:
        between = ((low + high) / 2).limit_denominator(10**18)
        value = _difference(graph, threshold, fact, between, middle)
        if value is None or not low < between < high:
            return None
        if value == 0:
            return between
        if (value < 0) == (first < 0):
            low = between
        else:
            high = between
    return (low + high) / 2


def _never_crossed(graph: DecisionGraph, threshold: _Threshold, middle: Mapping[str, Value]) -> bool:
    """Whether the comparison has a value in the middle project, so that it is just not met from there."""
    calculation = Calculation(graph, middle, threshold.forced)
    try:
        calculation.number(threshold.left, threshold.elements)
        return True
    except NoValue:
        return False


def _jump(
    graph: DecisionGraph,
    threshold: _Threshold,
    fact: str,
    root: Fraction,
    reach: tuple[Fraction, Fraction],
    middle: Mapping[str, Value],
) -> Jump | None:
    near = (reach[1] - reach[0]) * NEAR
    sides = [_limits(graph, threshold, fact, root, side * near, middle) for side in (-1, 1)]
    (before, result_before), (after, result_after) = sides
    if before is None or after is None:
        return None
    result_size = None
    if result_before is not None and result_after is not None:
        result_size = _relative(result_before, result_after)
    size = _relative(before, after)
    if not size and not result_size:
        return None
    asked, at, unit = _spoken(graph, threshold, fact, root, middle)
    return Jump(
        threshold.place,
        threshold.table,
        asked,
        at,
        unit,
        fact,
        root,
        before,
        after,
        size,
        result_before,
        result_after,
        result_size,
        threshold.span,
    )


def _limits(
    graph: DecisionGraph,
    threshold: _Threshold,
    fact: str,
    root: Fraction,
    beside: Fraction,
    middle: Mapping[str, Value],
) -> tuple[Fraction | None, Fraction | None]:
    """The quantity and the result at the threshold, with what is decided just beside it."""
    probe = Calculation(graph, _at(graph, middle, fact, root + beside), threshold.forced)
    result = graph.model.result
    wanted = [threshold.instance, *([result.name] if result is not None else [])]
    found: list[Fraction | None] = []
    for id in wanted:
        try:
            probe.quantity(id)
            exact = Calculation(graph, _at(graph, middle, fact, root), threshold.forced, probe.made)
            found.append(exact.quantity(id))
        except (NoValue, KeyError):
            found.append(None)
    return found[0], found[1] if len(found) > 1 else None


def _relative(before: Fraction, after: Fraction) -> Fraction:
    base = abs(before) or abs(after)
    return (after - before) / base if base else Fraction(0)


def _spoken(
    graph: DecisionGraph, threshold: _Threshold, fact: str, root: Fraction, middle: Mapping[str, Value]
) -> tuple[str, Fraction, m.Unit]:
    """What is compared, by name: a fact or quantity that stands alone on a side, else the fact that was moved."""
    calculation = Calculation(graph, _at(graph, middle, fact, root), threshold.forced)
    for side in (threshold.left, threshold.right):
        inner = side
        while isinstance(inner, m.Scaled):
            inner = inner.operand
        if isinstance(inner, m.Reference) and inner.kind in ("fact", "setting", "quantity"):
            try:
                return inner.name, calculation.number(inner, threshold.elements), inner.unit
            except NoValue:
                break
    units = {each.name: each.unit for each in graph.model.facts} | {
        each.name: each.unit for each in graph.model.settings
    }
    return fact, root, units[fact]
