"""From the decision graph to the network: who evaluates what, and each branch point's relation.

In three steps: every condition is read (which brings up all comparisons with numbers), the numbers are
cut into cells at what they are compared with, and the branch points' states are related on those cells.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, field
from fractions import Fraction

from samesum.evidence.routes import groups
from samesum.evidence.routes.cells import cut, sign_over
from samesum.evidence.routes.diagrams import Diagrams, Limits
from samesum.evidence.routes.eliminating import taken_apart
from samesum.evidence.routes.network import LeafRelation, Network, PointRelation
from samesum.evidence.routes.ranges import Bounds, bounds
from samesum.evidence.routes.readings import Readings
from samesum.evidence.routes.soundness import Soundness
from samesum.evidence.routes.symbols import constant_term, generators, without_constant
from samesum.graph import BranchPoint, DecisionGraph, Leaf, Mention, asked, mentions


def build_network(
    graph: DecisionGraph, limits: Limits, on_paper: bool = False, domains: Mapping[str, Bounds] | None = None
) -> Network:
    """The relation of a rulebook. ``on_paper`` leaves out all conditions, asked or obeyed. ``domains`` narrows
    numeric facts and settings (by name and element), down to one value where a project is given.

    Raises ``OutOfLimits`` when even the branch points' own parts are too much for the limits.
    """
    d = Diagrams(limits)
    readings = Readings(graph, d)
    readings.domains.update(domains or {})
    soundness = Soundness(readings)
    wanted = _reachable_instances(graph, on_paper)
    inside = set(wanted)
    points = [point for point in graph.branch_points.values() if point.instance in inside]
    asking = {point.id: _read_point(point, soundness, on_paper) for point in points}
    lacking_leaves: list[tuple[Leaf, int, Mapping[str, int]]] = []
    applying: list[int] = []
    if not on_paper:
        for id in wanted:
            elements = graph.instances[id].elements
            for leaf in graph.leaves[id]:
                sound = soundness.of(leaf.expression, elements, own=True)
                if not d.is_end(sound, True):
                    lacking_leaves.append((leaf, sound, soundness.lacking(leaf.expression, elements)))
        for each in graph.model.applies:
            applying += [readings.condition(each.condition, {}), soundness.of(each.condition, {})]
    read = [part for each in asking.values() for part in each.parts()]
    read += [part for _, sound, lacking in lacking_leaves for part in (sound, *lacking.values())]
    cells = _cut_into_cells(readings, [*read, *applying])
    ways = _Ways(graph, readings, _find_users(graph, inside, on_paper))
    relations: dict[str, PointRelation] = {}
    for point in points:
        settled = asking[point.id].settled(cells.settle)
        relations[point.id] = _relate(point, ways.reach(point), settled, readings, on_paper)
    flows = [
        (leaf, ways.flow(leaf))
        for id in (wanted if not on_paper else ())
        for leaf in graph.leaves[id]
        if any(kind == "setting" for kind, _ in mentions(leaf.expression, graph.instances[id].elements, graph.sizes))
    ]
    return Network(
        graph,
        d,
        {
            level: variable
            for level, variable in sorted(readings.variables.items())
            if variable.kind != "sign"
            and (variable.kind not in ("numeric", "sum") or level in cells.of)
            and (variable.kind != "unsure" or level in cells.used)
        },
        dict(readings.levels),
        relations,
        tuple(
            LeafRelation(leaf, ways.evaluated(leaf), cells.settle(sound), _settled(lacking, cells.settle))
            for leaf, sound, lacking in lacking_leaves
        ),
        tuple(flows),
        taken_apart(d, d.every(cells.settle(each) for each in applying)),
        cells.of,
        dict(readings.domains),
        dict(readings.values),
        cells.groups,
        {level: node for level, node in readings.unsure.items() if level in cells.used},
    )


# --- reading -----------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class _Asked:
    """What a branch point asks: each branch's condition, where what they ask has a value, and where an operation of
    their own lacks one (by table)."""

    holds: tuple[int, ...]
    sound: int
    lacking: Mapping[str, int]

    def parts(self) -> tuple[int, ...]:
        return (*self.holds, self.sound, *self.lacking.values())

    def settled(self, settle: Callable[[int], int]) -> _Asked:
        """The same on cells instead of signs."""
        return _Asked(tuple(map(settle, self.holds)), settle(self.sound), _settled(self.lacking, settle))


def _settled(lacking: Mapping[str, int], settle: Callable[[int], int]) -> dict[str, int]:
    return {table: settle(where) for table, where in lacking.items()}


def _read_point(point: BranchPoint, soundness: Soundness, on_paper: bool) -> _Asked:
    readings = soundness.readings
    d = readings.diagrams
    elements = readings.graph.instances[point.instance].elements
    sound = d.end(True)
    lacking: dict[str, int] = {}
    holds: list[int] = []
    for condition in point.conditions:
        if condition is None or on_paper:
            holds.append(d.end(True))
            continue
        sound = d.both(sound, soundness.of(condition, elements))
        for table, where in soundness.lacking(condition, elements).items():
            lacking[table] = d.either(lacking.get(table, d.end(False)), where)
        holds.append(readings.condition(condition, elements))
    if lacking:
        conditions = [each for each in point.conditions if each is not None]
        asks = (mention for each in conditions for mention in mentions(each, elements, readings.graph.sizes))
        parts_sound = _parts_sound(asks, soundness)
        lacking = {table: d.both(where, parts_sound) for table, where in lacking.items()}
    return _Asked(tuple(holds), sound, lacking)


def _parts_sound(asked: Iterable[Mention], soundness: Soundness) -> int:
    """Where all quantities and choices that are asked have a value."""
    d = soundness.readings.diagrams
    return d.every(
        soundness.quantity(id) if kind == "value" else soundness.not_stuck(id)
        for kind, id in asked
        if kind in ("value", "takes")
    )


# --- cells -------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class _Cells:
    """The cells of every number that is compared (by level), the groups, the levels that matter, and how a
    diagram of signs becomes one of cells."""

    of: Mapping[int, tuple[Bounds, ...]]
    groups: tuple[groups.ListedGroup, ...]
    used: frozenset[int]
    settle: Callable[[int], int]


def _cut_into_cells(readings: Readings, read: Iterable[int]) -> _Cells:
    """Cells for every number that something read depends on; sums of several facts make groups."""
    d = readings.diagrams
    used = frozenset(level for part in read for level in d.support(part))
    signs = {each: level for each, level in readings.signs.items() if level in used}
    borders: dict[int, dict[Fraction, str]] = {}
    for each in signs:
        base = readings.value_level(without_constant(each))
        asked_as = readings.borders.get(each, set())
        borders.setdefault(base, {})[-constant_term(each)] = next(iter(asked_as)) if len(asked_as) == 1 else "apart"
    cells: dict[int, tuple[Bounds, ...]] = {}
    for base, cuts in sorted(borders.items()):
        variable = readings.variables[base]
        domain = bounds(variable.sum, readings.domains) if variable.sum else readings.domains[variable.name]
        cells[base] = cut(domain, cuts)
        d.size[base] = len(cells[base])
    exchanged: dict[int, tuple[int, tuple[int, ...]]] = {}
    for each, level in signs.items():
        base, threshold = readings.value_level(without_constant(each)), -constant_term(each)
        values = tuple(sign_over(cell, threshold, borders[base][threshold]) for cell in cells[base])
        exchanged[level] = (base, values)
    sums = [(each, level) for each, level in sorted(readings.sums.items(), key=lambda item: item[1]) if level in cells]
    for name in sorted({name for each, _ in sums for name in generators(each)}):
        level = readings.level(name)
        if level not in cells:
            cells[level] = cut(readings.domains[name], {})
            d.size[level] = len(cells[level])
    listed = groups.collect(readings, sums, cells)
    return _Cells(cells, listed, used, lambda a: d.exchange("settle", exchanged.get, a))


# --- what is reached ---------------------------------------------------------------------


@dataclass(slots=True)
class _Users:
    """Who evaluates an instance, and which branch points ask a choice."""

    leaves: dict[str, list[Leaf]] = field(default_factory=dict)
    asking: dict[str, list[str]] = field(default_factory=dict)
    tied: dict[str, list[str]] = field(default_factory=dict)
    always: set[str] = field(default_factory=set)
    always_asked: set[str] = field(default_factory=set)


def _find_users(graph: DecisionGraph, wanted: set[str], on_paper: bool) -> _Users:
    users = _Users()
    if graph.model.result is not None:
        users.always.add(graph.model.result.name)
    for id, leaves in graph.leaves.items():
        for leaf in leaves if id in wanted else ():
            for kind, target in mentions(leaf.expression, graph.instances[id].elements, graph.sizes):
                if kind == "value":
                    users.leaves.setdefault(target, []).append(leaf)
    for point in graph.branch_points.values():
        if point.instance not in wanted:
            continue
        if point.leader:
            users.tied.setdefault(point.leader, []).append(point.id)
        if on_paper:
            continue
        for condition, elements in asked(point, graph):
            for kind, target in mentions(condition, elements, graph.sizes):
                if kind == "value":
                    users.asking.setdefault(target, []).append(point.id)
                elif kind == "takes":
                    users.tied.setdefault(target, []).append(point.id)
    if not on_paper:
        for applies in graph.model.applies:
            for kind, target in mentions(applies.condition, {}, graph.sizes):
                if kind == "value":
                    users.always.add(target)
                elif kind == "takes":
                    users.always_asked.add(target)
    return users


def _reachable_instances(graph: DecisionGraph, on_paper: bool) -> list[str]:
    """Every instance that the result (or applicability) can lead to, in the graph's order."""
    found: set[str] = set()
    stack = [graph.model.result.name] if graph.model.result is not None else []
    if not on_paper:
        for applies in graph.model.applies:
            stack += [id for kind, id in mentions(applies.condition, {}, graph.sizes) if kind in ("value", "takes")]
    by_instance: dict[str, list[BranchPoint]] = {}
    for point in graph.branch_points.values():
        by_instance.setdefault(point.instance, []).append(point)
    while stack:
        id = stack.pop()
        if id in found or id not in graph.instances:
            continue
        found.add(id)
        elements = graph.instances[id].elements
        for leaf in graph.leaves[id]:
            stack += [each for kind, each in mentions(leaf.expression, elements, graph.sizes) if kind == "value"]
        for point in by_instance.get(id, ()):
            if point.leader:
                stack.append(point.leader)
            for condition, where in asked(point, graph) if not on_paper else ():
                stack += [each for kind, each in mentions(condition, where, graph.sizes) if kind in ("value", "takes")]
    return [id for id in graph.instances if id in found]


@dataclass(slots=True)
class _Ways:
    """Where each instance, formula and branch point is evaluated or reached, as diagrams over states."""

    graph: DecisionGraph
    readings: Readings
    users: _Users
    _evaluated: dict[str, int] = field(default_factory=dict)
    _flowing: dict[str, int] = field(default_factory=dict)

    def instance(self, id: str) -> int:
        """Where an instance's body is evaluated."""
        found = self._evaluated.get(id)
        if found is None:
            d = self.readings.diagrams
            if id in self.users.always:
                found = d.end(True)
            else:
                found = d.some(
                    [self.evaluated(leaf) for leaf in self.users.leaves.get(id, ())]
                    + [self.readings.reached(asker) for asker in self.users.asking.get(id, ())]
                )
            self._evaluated[id] = found
        return found

    def under(self, place: tuple[str, str]) -> int:
        """Where a branch's body is evaluated."""
        point = self.graph.branch_points[place[0]]
        taken = self.readings.state(point.id, (point.branches.index(place[1]),))
        if point.parent is None and (point.instance in self.users.tied or point.instance in self.users.always_asked):
            return self.readings.diagrams.both(taken, self.instance(point.instance))
        return taken

    def evaluated(self, leaf: Leaf) -> int:
        """Where a formula is evaluated."""
        return self.instance(leaf.instance) if leaf.under is None else self.under(leaf.under)

    def reach(self, point: BranchPoint) -> int:
        """Where a branch point is reached."""
        d = self.readings.diagrams
        if point.parent is not None:
            return self.under(point.parent)
        if point.instance in self.users.always_asked:
            return d.end(True)
        tied = [self.readings.reached(each) for each in self.users.tied.get(point.instance, ())]
        return d.some([self.instance(point.instance), *tied])

    def flow(self, leaf: Leaf) -> int:
        """Where a formula's number reaches the result through formulas alone."""
        d = self.readings.diagrams
        id = leaf.instance
        found = self._flowing.get(id)
        if found is None:
            if self.graph.model.result is not None and id == self.graph.model.result.name:
                found = d.end(True)
            else:
                found = d.some(self.flow(user) for user in self.users.leaves.get(id, ()))
            self._flowing[id] = found
        return d.both(found, self.under(leaf.under)) if leaf.under else found


# --- relating ----------------------------------------------------------------------------


def _relate(point: BranchPoint, reach: int, asked: _Asked, readings: Readings, on_paper: bool) -> PointRelation:
    """The relation of one branch point's state to what it depends on."""
    d = readings.diagrams
    count = len(point.branches)
    sound = asked.sound
    holds = list(asked.holds)
    if point.leader:
        leader = readings.graph.branch_points[point.leader]
        sound = d.both(sound, d.negate(readings.state(leader.id, (len(leader.branches) + 1,))))
        holds = [
            d.both(each, readings.state(leader.id, (leader.branches.index(name),)))
            for each, name in zip(holds, point.branches, strict=True)
        ]
    elif point.kind in ("cases", "cases in order") and not on_paper:
        earlier = d.end(False)
        for number, condition in enumerate(point.conditions):
            if condition is None:
                holds[number] = d.negate(earlier)
            else:
                here = holds[number]
                if point.kind == "cases in order":
                    holds[number] = d.both(here, d.negate(earlier))
                earlier = d.either(earlier, here)
    level = readings.level(f"point:{point.id}")
    working = d.both(reach, sound)
    parts = [d.both(d.negate(reach), d.literal(level, (count,)))]
    stuck = d.both(reach, d.negate(d.both(sound, d.some(holds))))
    parts.append(d.both(stuck, d.literal(level, (count + 1,))))
    for number, each in enumerate(holds):
        parts.append(d.both(d.both(working, each), d.literal(level, (number,))))
    return PointRelation(point, level, reach, sound, tuple(holds), d.some(parts), asked.lacking)
