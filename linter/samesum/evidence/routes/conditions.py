"""Overlaps, gaps and branches that can never be taken, each with a project that shows it.

First a look at the branch point's own conditions: where they leave nothing open, or shut nothing
out, no more need be asked. Only what remains is asked of the part of the network that the branch
point depends on.
"""

from __future__ import annotations

import time
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from itertools import combinations

from samesum.evidence.routes.counting import deep
from samesum.evidence.routes.diagrams import OutOfLimits
from samesum.evidence.routes.eliminating import COMBINE, Eliminated, eliminate, number, possible_values, read_back
from samesum.evidence.routes.layout import EVERYTHING, Layout
from samesum.evidence.routes.network import Network, PointRelation, cone
from samesum.evidence.routes.witness import Witness, witness_from
from samesum.reading.model import Cases


@dataclass(frozen=True, slots=True)
class Overlap:
    """Two branches of plain cases that are open together at ``witness``."""

    branch_point: str
    branches: tuple[str, str]
    witness: Witness | None


@dataclass(frozen=True, slots=True)
class Gap:
    """No branch of ``branch_point`` is open at ``witness``, or a table has no row there. ``branch_point`` is
    the quantity's own name when its formula stands outside any branch point. ``kind``: ``conditions`` (no branch
    open), ``row`` (no row of a table answers; ``names`` has the table) or ``value`` (a calculation has no value,
    such as a division by zero). ``kind`` and ``names`` are true of the witness: elsewhere another may be missing."""

    branch_point: str
    witness: Witness | None
    kind: str = "conditions"
    names: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class DeadBranch:
    """A branch that no project can take, although its branch point can be reached."""

    branch_point: str
    branch: str


@dataclass(frozen=True, slots=True)
class Undecided:
    """A question that could be neither shown nor refuted in the time given: ``asks`` is ``overlap``, ``gap`` or
    ``dead branch``."""

    branch_point: str
    asks: str
    branches: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Conditions:
    overlaps: tuple[Overlap, ...]
    gaps: tuple[Gap, ...]
    dead_branches: tuple[DeadBranch, ...]
    undecided: tuple[Undecided, ...]


@dataclass(frozen=True, slots=True)
class _Answer:
    """``yes`` with a witness, ``no``, or ``cannot tell``."""

    says: str
    witness: Witness | None = None


def examine_conditions(network: Network, seconds: float = 10.0) -> Conditions:
    """Every overlap, gap and dead branch of the rulebook. ``seconds`` bounds the work; what is not
    answered by then is undecided, never guessed."""
    network.diagrams.limits.deadline = time.monotonic() + seconds
    found = _Found([], [], [], [])
    with deep():
        states = _possible_states(network)
        for relation in network.points.values():
            _examine_point(network, relation, None if states is None else states[relation.level], found)
        _rowless_formulas(network, found)
    order = {id: place for place, id in enumerate([*network.graph.instances, *network.graph.branch_points])}
    once = {gap.branch_point: gap for gap in reversed(found.gaps)}
    return Conditions(
        tuple(found.overlaps),
        tuple(sorted(once.values(), key=lambda gap: order[gap.branch_point])),
        tuple(found.dead),
        tuple(dict.fromkeys(found.undecided)),
    )


@dataclass(frozen=True, slots=True)
class _Found:
    """The answers as they come in."""

    overlaps: list[Overlap]
    gaps: list[Gap]
    dead: list[DeadBranch]
    undecided: list[Undecided]


def _examine_point(network: Network, relation: PointRelation, seen: frozenset[int] | None, found: _Found) -> None:
    """One branch point's questions; ``seen`` are the states it can be in, None when that is not known."""
    d = network.diagrams
    point = relation.point
    try:
        working = d.both(relation.reach, relation.sound)
        nothing = d.negate(d.some(relation.open))
        pairs = _meeting(network, relation) if point.kind == "cases" else []
        taken = {first: d.literal(relation.level, (first,)) for first, _ in pairs}
    except OutOfLimits:
        found.undecided.append(Undecided(point.id, "gap"))
        if point.kind == "cases":
            found.undecided.append(Undecided(point.id, "overlap"))
        return
    for first, second in pairs:
        branches = (point.branches[first], point.branches[second])
        both_open = [working, relation.open[first], relation.open[second]]
        answer = _ask(network, [*both_open, taken[first]], relation, first)
        if answer.says == "no":  # inside the rulebook only when the second is taken, or when neither gets that far
            answer = _ask(network, both_open, relation, second)
        if answer.says == "yes":
            found.overlaps.append(Overlap(point.id, branches, answer.witness))
        elif answer.says == "cannot tell":
            found.undecided.append(Undecided(point.id, "overlap", branches))
    if (not point.leader or any(point.conditions)) and (seen is None or relation.stuck in seen):
        answer = _ask(network, [working, nothing], relation, relation.stuck)
        if answer.says == "yes":
            found.gaps.append(Gap(point.id, answer.witness))
        elif answer.says == "cannot tell":
            found.undecided.append(Undecided(point.id, "gap"))
    if not point.leader:
        _find_dead(network, relation, working, seen, found)
    _rowless_conditions(network, relation, found)


def _meeting(network: Network, relation: PointRelation) -> list[tuple[int, int]]:
    """The pairs of branches whose own conditions leave both open somewhere. Adding up how many are open shows at
    once where no two are, however many branches there are."""
    d = network.diagrams
    asked = [k for k, condition in enumerate(relation.point.conditions) if condition is not None]
    crowd = d.end(0)
    for k in asked:
        crowd = d.apply("sum", COMBINE["sum"], crowd, d.numbers(relation.open[k]))
    if max(d.ends(crowd)) < 2:
        return []
    pairs = combinations(asked, 2)
    return [(a, b) for a, b in pairs if not d.is_end(d.both(relation.open[a], relation.open[b]), False)]


def _possible_states(network: Network) -> dict[int, frozenset[int]] | None:
    """Every state that each branch point can be in, inside the rulebook; None when it cannot be told for all."""
    d = network.diagrams
    layout = Layout.of(network, EVERYTHING, True)
    if not layout.exact:
        return None
    factors = [d.numbers(each.factor) for each in network.points.values()]
    factors += [*map(d.numbers, network.applies), *layout.projects, *layout.inputs]
    limits = d.limits
    before = limits.deadline, limits.nodes
    limits.deadline = time.monotonic() + max(0.0, (limits.deadline - time.monotonic()) / 2)
    try:
        return possible_values(d, factors, [each.level for each in network.points.values()])
    except OutOfLimits:
        return None
    finally:
        limits.deadline, limits.nodes = before


def _find_dead(
    network: Network, relation: PointRelation, working: int, seen: frozenset[int] | None, found: _Found
) -> None:
    """Branches that nobody inside the rulebook can take, although their branch point can be reached. Not those that
    stand for a choice that nobody makes: the text has no such branch."""
    if isinstance(relation.point.body, Cases) and relation.point.body.settled:
        return
    d = network.diagrams
    id = relation.point.id
    if seen is not None:
        dead = [DeadBranch(id, name) for k, name in enumerate(relation.point.branches) if k not in seen]
        if len(dead) == len(relation.open):  # never past its conditions, or never reached at all
            answer = _Answer("no") if relation.stuck not in seen else _ask(network, [working], relation, None, False)
            dead = dead if answer.says == "yes" else []
        found.dead.extend(dead)
        return
    for k, branch in enumerate(relation.point.branches):
        if not network.applies and all(d.is_end(each, True) for each in (relation.open[k], working)):
            continue
        answer = _ask(network, [], relation, k, show=False)
        if answer.says == "no":
            answer = _ask(network, [working], relation, None, show=False)
            if answer.says == "yes":
                found.dead.append(DeadBranch(id, branch))
        if answer.says == "cannot tell":
            found.undecided.append(Undecided(id, "dead branch", (branch,)))


def _rowless_conditions(network: Network, relation: PointRelation, found: _Found) -> None:
    """Operations in the branch point's own conditions that have no value for some project: no row of a table, or a
    division by zero."""
    id = relation.point.id
    answers = ((table, _ask(network, [relation.reach, where], None, None)) for table, where in relation.lacking.items())
    _rowless(id, answers, found)


def _rowless_formulas(network: Network, found: _Found) -> None:
    """Formulas whose own operations have no value for some project: no row, or a division by zero."""
    for each in network.leaves:
        answers = ((table, _ask(network, [each.evaluated, where], None, None)) for table, where in each.lacking.items())
        _rowless(each.leaf.id, answers, found)


def _rowless(id: str, answers: Iterable[tuple[str, _Answer]], found: _Found) -> None:
    """The gap of the first table that is shown to have no row, so that what is said of it is true of its witness."""
    undecided = False
    for table, answer in answers:
        if answer.says == "yes":
            found.gaps.append(Gap(id, answer.witness, "row" if table else "value", (table,) if table else ()))
            return
        undecided = undecided or answer.says == "cannot tell"
    if undecided:
        found.undecided.append(Undecided(id, "gap"))


def _ask(
    network: Network, parts: Sequence[int], relation: PointRelation | None, state: int | None, show: bool = True
) -> _Answer:
    """Whether the parts can hold together somewhere inside the rulebook, with the branch point in ``state`` where
    one is given without parts; ``show`` asks for the witness too."""
    try:
        return _asked(network, parts, relation, state, show)
    except OutOfLimits:
        return _Answer("cannot tell")


def _asked(
    network: Network, parts: Sequence[int], relation: PointRelation | None, state: int | None, show: bool
) -> _Answer:
    d = network.diagrams
    together = d.every(parts)
    if not parts and relation is not None and state is not None:
        together = d.literal(relation.level, (state,))
    if d.is_end(together, False):
        return _Answer("no")
    start = [together, *network.applies]
    factors = [*map(d.numbers, start), *cone(network, start)]
    for loose in (False, True):
        layout = Layout.of(network, EVERYTHING, loose)
        if layout.exact and not loose:
            continue
        relevant = {level for factor in factors for level in d.support(factor)}
        related = _related(network, relevant, layout)
        levels = {level for factor in (*factors, *related) for level in d.support(factor)}
        unsure = [level for level in layout.unsure if level in levels]
        trail: list[Eliminated] = []
        remaining = eliminate(d, [*factors, *related], unsure, "exists" if loose else "all", trail)
        rest = sorted(levels - set(unsure))
        found = number(d, eliminate(d, remaining, rest, "exists", trail))
        if found and (layout.exact or not loose):
            if not show:
                return _Answer("yes")
            return _Answer("yes", witness_from(network, read_back(d, trail)))
        if not found and loose:
            return _Answer("no")
    return _Answer("cannot tell")


def _related(network: Network, relevant: set[int], layout: Layout) -> list[int]:
    """What can occur together among the ``relevant`` levels. With a group's factor its sibling comes along (they
    share the kind of project), and so does a group in which nothing was shown to occur."""
    d = network.diagrams
    everything = (*layout.projects, *layout.inputs)
    levels = {level for each in everything if d.support(each) & relevant for level in d.support(each)}
    return [each for each in everything if not d.support(each) or d.support(each) & levels]
