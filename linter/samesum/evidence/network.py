"""The relation between projects, human inputs and routes, as a product of small diagrams.

Every branch point has a state: a branch, ``not reached``, or ``stuck`` (no branch open, or something
it asks has no value). The relation says for each project (facts), each human input
(settings, judgements) which states go together; counting and the questions about overlaps and gaps
are eliminations on it.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction

from samesum.evidence import groups
from samesum.evidence.cells import cut, sign_over
from samesum.evidence.diagrams import Diagrams, Limits, taken_apart
from samesum.evidence.readings import Readings, Variable
from samesum.evidence.symbols import Bounds, generators, is_linear
from samesum.graph import BranchPoint, DecisionGraph, Element, Leaf, asked, mentions, worked_on
from samesum.reading import model as m
from samesum.reading import walk


@dataclass(frozen=True, slots=True)
class PointRelation:
    """One branch point's part: where it is reached, where all it asks has a value, where each branch
    is open (both only meant where reached), and the relation of its state to the rest.

    ``own_sound`` and ``parts_sound`` share out ``sound``: the operations written in the branch point's own
    conditions (``tables`` names the tables they call), and the quantities that these work on."""

    point: BranchPoint
    level: int
    reach: int
    sound: int
    open: tuple[int, ...]
    factor: int
    own_sound: int
    parts_sound: int
    tables: tuple[str, ...]

    @property
    def not_reached(self) -> int:
        return len(self.open)

    @property
    def stuck(self) -> int:
        return len(self.open) + 1


@dataclass(frozen=True, slots=True)
class Network:
    """The whole relation. ``leaves``: where each formula that may lack a value is evaluated and where its own
    operations have a value. ``applies``: where the rulebook applies, as parts that must all hold. ``flows``:
    where the number of a formula reaches the result. ``cells``: of each numeric fact or setting, by level."""

    graph: DecisionGraph
    diagrams: Diagrams
    variables: Mapping[int, Variable]
    levels: Mapping[str, int]
    points: Mapping[str, PointRelation]
    leaves: tuple[tuple[Leaf, int, int], ...]
    flows: tuple[tuple[Leaf, int], ...]
    applies: tuple[int, ...]
    cells: Mapping[int, tuple[Bounds, ...]]
    domains: Mapping[str, Bounds]
    values: Mapping[str, tuple[str, ...]]
    groups: tuple[groups.ListedGroup, ...]
    unsure: Mapping[int, m.Condition | m.Expression]
    memory: dict[object, object] = field(default_factory=dict, compare=False, repr=False)

    def by_level(self) -> dict[int, PointRelation]:
        """The branch points' relations by the level of their state."""
        found = self.memory.get("by level")
        if not isinstance(found, dict):
            found = self.memory["by level"] = {each.level: each for each in self.points.values()}
        return found


@dataclass(slots=True)
class _Users:
    """Who evaluates an instance, and which branch points ask a choice."""

    leaves: dict[str, list[Leaf]] = field(default_factory=dict)
    asking: dict[str, list[str]] = field(default_factory=dict)
    tied: dict[str, list[str]] = field(default_factory=dict)
    always: set[str] = field(default_factory=set)
    always_asked: set[str] = field(default_factory=set)


def build_network(
    graph: DecisionGraph, limits: Limits, on_paper: bool = False, domains: Mapping[str, Bounds] | None = None
) -> Network:
    """The relation of a rulebook. ``on_paper`` leaves out all conditions, asked or obeyed. ``domains`` narrows
    numeric facts and settings (by name and element), down to one value where a project is given.

    Raises ``OutOfLimits`` when even the branch points' own parts are too much for the limits.
    """
    diagrams = Diagrams(limits)
    readings = Readings(graph, diagrams)
    readings.domains.update(domains or {})
    wanted = _reachable_instances(graph, on_paper)
    users = _find_users(graph, set(wanted), on_paper)
    evaluated: dict[str, int] = {}

    def is_evaluated(id: str) -> int:
        found = evaluated.get(id)
        if found is None:
            if id in users.always:
                found = diagrams.end(True)
            else:
                found = diagrams.some(
                    [leaf_evaluated(leaf) for leaf in users.leaves.get(id, ())]
                    + [readings.reached(asker) for asker in users.asking.get(id, ())]
                )
            evaluated[id] = found
        return found

    def under(place: tuple[str, str]) -> int:
        """Where a branch's body is evaluated."""
        point = graph.branch_points[place[0]]
        taken = readings.state(point.id, (point.branches.index(place[1]),))
        if point.parent is None and (point.instance in users.tied or point.instance in users.always_asked):
            return diagrams.both(taken, is_evaluated(point.instance))
        return taken

    def leaf_evaluated(leaf: Leaf) -> int:
        return is_evaluated(leaf.instance) if leaf.under is None else under(leaf.under)

    relations: dict[str, PointRelation] = {}
    for point in graph.branch_points.values():
        if point.instance not in wanted:
            continue
        if point.parent is not None:
            reach = under(point.parent)
        else:
            reach = is_evaluated(point.instance)
            if point.instance in users.always_asked:
                reach = diagrams.end(True)
            reach = diagrams.some([reach, *(readings.reached(each) for each in users.tied.get(point.instance, ()))])
        relations[point.id] = _relate(point, reach, readings, graph, on_paper)
    leaves: list[tuple[Leaf, int, int]] = []
    flows: list[tuple[Leaf, int]] = []
    applies = diagrams.end(True)
    if not on_paper:
        for each in graph.model.applies:
            holds = diagrams.both(readings.condition(each.condition, {}), readings.sound(each.condition, {}))
            applies = diagrams.both(applies, holds)
        flowing = _flows(graph, users, diagrams, under)
        for id in wanted:
            instance = graph.instances[id]
            for leaf in graph.leaves[id]:
                sound = readings.sound(leaf.expression, instance.elements, own=True)
                if not diagrams.is_end(sound, True):
                    leaves.append((leaf, leaf_evaluated(leaf), sound))
                if any(kind == "setting" for kind, _ in mentions(leaf.expression, instance.elements, graph.sizes)):
                    reaches = flowing(id)
                    flows.append((leaf, diagrams.both(reaches, under(leaf.under)) if leaf.under else reaches))
    return _settle(graph, diagrams, readings, relations, leaves, flows, applies)


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


def _relate(point: BranchPoint, reach: int, readings: Readings, graph: DecisionGraph, on_paper: bool) -> PointRelation:
    d = readings.diagrams
    elements = graph.instances[point.instance].elements
    count = len(point.branches)
    sound = own_sound = d.end(True)
    tables: dict[str, None] = {}
    holds: list[int] = []
    for condition in point.conditions:
        if condition is None or on_paper:
            holds.append(d.end(True))
            continue
        sound = d.both(sound, readings.sound(condition, elements))
        own_sound = d.both(own_sound, readings.sound(condition, elements, own=True))
        tables.update((node.table, None) for node in walk.inside(condition) if isinstance(node, m.Lookup))
        holds.append(readings.condition(condition, elements))
    if point.leader:
        leader = graph.branch_points[point.leader]
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
    return PointRelation(
        point,
        level,
        reach,
        sound,
        tuple(holds),
        d.some(parts),
        own_sound,
        _parts_sound(point, readings, elements, on_paper),
        tuple(tables),
    )


def _parts_sound(point: BranchPoint, readings: Readings, elements: Element, on_paper: bool) -> int:
    """Where the quantities have a value that a branch point's own operations work on."""
    d = readings.diagrams
    result = d.end(True)
    for condition in point.conditions if not on_paper else ():
        for kind, id in worked_on(condition, elements, readings.graph.sizes) if condition else ():
            if kind == "value":
                result = d.both(result, readings.sound_quantity(id))
    return result


def _flows(
    graph: DecisionGraph, users: _Users, d: Diagrams, under: Callable[[tuple[str, str]], int]
) -> Callable[[str], int]:
    """Where an instance's number reaches the result through formulas alone."""
    memo: dict[str, int] = {}

    def flowing(id: str) -> int:
        found = memo.get(id)
        if found is None:
            if graph.model.result is not None and id == graph.model.result.name:
                found = d.end(True)
            else:
                found = d.some(
                    d.both(flowing(leaf.instance), under(leaf.under)) if leaf.under else flowing(leaf.instance)
                    for leaf in users.leaves.get(id, ())
                )
            memo[id] = found
        return found

    return flowing


def _settle(
    graph: DecisionGraph,
    d: Diagrams,
    readings: Readings,
    relations: Mapping[str, PointRelation],
    leaves: Sequence[tuple[Leaf, int, int]],
    flows: Sequence[tuple[Leaf, int]],
    applies: int,
) -> Network:
    """Signs of one linear fact become that fact's cells; the rest become groups. Signs that no
    condition depends on in the end are left out."""
    used: set[int] = set()
    for each in relations.values():
        for part in (each.factor, each.reach, each.sound, each.own_sound, each.parts_sound, *each.open):
            used |= d.support(part)
    for part in (applies, *(part for _, *parts in leaves for part in parts), *(flow for _, flow in flows)):
        used |= d.support(part)
    thresholds: dict[str, list[Fraction]] = {}
    single: dict[int, tuple[str, Fraction]] = {}
    signs = {each: level for each, level in readings.signs.items() if level in used}
    for sum, level in signs.items():
        names = sorted(generators(sum))
        if len(names) == 1 and is_linear(sum):
            threshold = -sum.terms[0][1] if not sum.terms[0][0] else Fraction(0)
            single[level] = (names[0], threshold)
            thresholds.setdefault(names[0], []).append(threshold)
    cells: dict[int, tuple[Bounds, ...]] = {}
    exchanged: dict[int, tuple[int, tuple[int, ...]]] = {}
    for name, cuts in sorted(thresholds.items()):
        level = readings.level(name)
        cells[level] = cut(readings.domains[name], cuts)
        d.size[level] = len(cells[level])
    for sign_level, (name, threshold) in single.items():
        level = readings.level(name)
        exchanged[sign_level] = (level, tuple(sign_over(cell, threshold) for cell in cells[level]))
    listed = groups.collect(readings, {each: level for each, level in signs.items() if level not in single}, cells)
    for name in (name for group in listed for name in group.names):
        level = readings.level(name)
        if level not in cells:
            cells[level] = cut(readings.domains[name], ())
            d.size[level] = len(cells[level])

    def settled(a: int) -> int:
        return d.exchange("settle", exchanged.get, a)

    points = {
        id: PointRelation(
            each.point,
            each.level,
            settled(each.reach),
            settled(each.sound),
            tuple(settled(part) for part in each.open),
            settled(each.factor),
            settled(each.own_sound),
            settled(each.parts_sound),
            each.tables,
        )
        for id, each in relations.items()
    }
    variables = {
        level: variable
        for level, variable in sorted(readings.variables.items())
        if level not in exchanged
        and (variable.kind != "numeric" or level in cells)
        and (variable.kind not in ("sign", "unsure") or level in used)
    }
    return Network(
        graph,
        d,
        variables,
        dict(readings.levels),
        points,
        tuple((leaf, settled(evaluated), settled(sound)) for leaf, evaluated, sound in leaves),
        tuple((leaf, settled(flow)) for leaf, flow in flows),
        taken_apart(d, settled(applies)),
        cells,
        dict(readings.domains),
        dict(readings.values),
        listed,
        {level: node for level, node in readings.unsure.items() if level in used},
    )


def complete_factors(network: Network) -> list[int]:
    """The relation of complete routes: nothing stuck, every formula with a value, the rulebook applies."""
    d = network.diagrams
    factors = [_not_stuck(network, each) for each in network.points.values()]
    factors += [d.either(d.negate(evaluated), sound) for _, evaluated, sound in network.leaves]
    return [d.numbers(factor) for factor in (*factors, *network.applies)]


def _not_stuck(network: Network, relation: PointRelation) -> int:
    d = network.diagrams
    return d.both(relation.factor, d.literal(relation.level, range(relation.stuck)))


def cone(network: Network, start: Iterable[int]) -> Iterator[int]:
    """The factors (with stuck states) of every branch point that the diagrams ``start`` depend on.

    The rest can be left out of a question: whatever the inputs, each branch point has some state.
    """
    d = network.diagrams
    by_level = network.by_level()
    todo = sorted({level for each in start for level in d.support(each) if level in by_level})
    seen: set[int] = set()
    while todo:
        level = todo.pop()
        if level in seen:
            continue
        seen.add(level)
        factor = by_level[level].factor
        yield d.numbers(factor)
        todo += sorted(other for other in d.support(factor) if other in by_level and other not in seen)
