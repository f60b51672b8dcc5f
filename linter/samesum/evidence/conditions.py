"""Overlaps, gaps and branches that can never be taken, each with a project that shows it.

First a look at the branch point's own conditions: where they leave nothing open, or shut nothing
out, no more need be asked. Only what remains is asked of the part of the network that the branch
point depends on.
"""

from __future__ import annotations

import time
from collections.abc import Sequence
from dataclasses import dataclass

from samesum.evidence.counting import NOTHING, Layout, deep
from samesum.evidence.diagrams import Eliminated, OutOfLimits, eliminate, number, possible_values, read_back
from samesum.evidence.network import Network, PointRelation, cone
from samesum.evidence.witness import Witness, witness_from
from samesum.reading import model as m
from samesum.reading import walk


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
    open), ``row`` (no row of a table answers) or ``value`` (a calculation has no value, such as a division by zero)."""

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
    limits = network.diagrams.limits
    limits.deadline = time.monotonic() + seconds
    overlaps: list[Overlap] = []
    gaps: list[Gap] = []
    dead: list[DeadBranch] = []
    undecided: list[Undecided] = []
    d = network.diagrams
    with deep():
        states = _possible_states(network)
        for relation in network.points.values():
            point = relation.point
            working = _working(network, relation)
            if point.kind == "cases":
                for first in range(len(relation.open)):
                    for second in range(first + 1, len(relation.open)):
                        if point.conditions[first] is None or point.conditions[second] is None:
                            continue
                        branches = (point.branches[first], point.branches[second])
                        answer = _ask(network, [working, relation.open[first], relation.open[second]], relation, first)
                        if answer.says == "yes":
                            overlaps.append(Overlap(point.id, branches, answer.witness))
                        elif answer.says == "cannot tell":
                            undecided.append(Undecided(point.id, "overlap", branches))
            seen = None if states is None else states[relation.level]
            if (not point.leader or any(point.conditions)) and (seen is None or relation.stuck in seen):
                nothing = d.negate(d.some(relation.open))
                answer = _ask(network, [working, nothing], relation, relation.stuck)
                if answer.says == "yes":
                    gaps.append(Gap(point.id, answer.witness))
                elif answer.says == "cannot tell":
                    undecided.append(Undecided(point.id, "gap"))
            if not point.leader:
                dead += _dead(network, relation, working, seen, undecided)
            gaps += _rowless_conditions(network, relation, undecided)
        gaps += _rowless_formulas(network, undecided)
    order = {id: place for place, id in enumerate([*network.graph.instances, *network.graph.branch_points])}
    once = {gap.branch_point: gap for gap in reversed(gaps)}
    return Conditions(
        tuple(overlaps),
        tuple(sorted(once.values(), key=lambda gap: order[gap.branch_point])),
        tuple(dead),
        tuple(dict.fromkeys(undecided)),
    )


def _possible_states(network: Network) -> dict[int, frozenset[int]] | None:
    """Every state that each branch point can be in, inside the rulebook; None when it cannot be told for all."""
    d = network.diagrams
    layout = Layout.of(network, NOTHING, True)
    if not layout.exact:
        return None
    factors = [d.numbers(each.factor) for each in network.points.values()]
    factors += [d.numbers(network.applies), *layout.projects, *layout.inputs]
    limits = d.limits
    before = limits.deadline, limits.nodes
    limits.deadline = time.monotonic() + max(0.0, (limits.deadline - time.monotonic()) / 2)
    try:
        return possible_values(d, factors, [each.level for each in network.points.values()])
    except OutOfLimits:
        return None
    finally:
        limits.deadline, limits.nodes = before


def _working(network: Network, relation: PointRelation) -> int:
    return network.diagrams.both(relation.reach, relation.sound)


def _dead(
    network: Network,
    relation: PointRelation,
    working: int,
    seen: frozenset[int] | None,
    undecided: list[Undecided],
) -> list[DeadBranch]:
    """Branches that nobody inside the rulebook can take, although their branch point can be reached.
    ``seen`` are the states it can be in, None when that is not known."""
    d = network.diagrams
    id = relation.point.id
    found = [
        DeadBranch(id, name) for k, name in enumerate(relation.point.branches) if seen is not None and k not in seen
    ]
    if seen is not None and len(found) < len(relation.open):
        return found
    if seen is not None and relation.stuck not in seen:
        return []
    reachable: _Answer | None = None
    for k, branch in enumerate(relation.point.branches):
        answer = _Answer("no")
        if seen is None:
            if d.is_end(relation.open[k], True) and d.is_end(working, True) and d.is_end(network.applies, True):
                continue
            answer = _ask(network, [d.literal(relation.level, (k,))], relation, k, show=False)
        if answer.says == "no":
            if reachable is None:
                reachable = _ask(network, [working], relation, None, show=False)
            if reachable.says == "yes" and seen is None:
                found.append(DeadBranch(id, branch))
        if "cannot tell" in (answer.says, reachable.says if reachable else ""):
            undecided.append(Undecided(id, "dead branch", (branch,)))
    return found if reachable is not None and reachable.says == "yes" else []


def _rowless_conditions(network: Network, relation: PointRelation, undecided: list[Undecided]) -> list[Gap]:
    """Tables asked in the branch point's own conditions that have no row for some project."""
    d = network.diagrams
    if d.is_end(relation.own_sound, True):
        return []
    answer = _ask(
        network, [relation.reach, relation.parts_sound, d.negate(relation.own_sound)], relation, relation.stuck
    )
    if answer.says == "cannot tell":
        undecided.append(Undecided(relation.point.id, "gap"))
    return [Gap(relation.point.id, answer.witness, "row", relation.tables)] if answer.says == "yes" else []


def _rowless_formulas(network: Network, undecided: list[Undecided]) -> list[Gap]:
    d = network.diagrams
    found = []
    for leaf, evaluated, sound in network.leaves:
        answer = _ask(network, [evaluated, d.negate(sound)], None, None)
        if answer.says == "yes":
            tables = tuple(
                dict.fromkeys(node.table for node in walk.inside(leaf.expression) if isinstance(node, m.Lookup))
            )
            found.append(Gap(leaf.id, answer.witness, "row" if tables else "value", tables))
        elif answer.says == "cannot tell":
            undecided.append(Undecided(leaf.id, "gap"))
    return found


def _ask(
    network: Network, parts: Sequence[int], relation: PointRelation | None, state: int | None, show: bool = True
) -> _Answer:
    """Whether the parts can hold together somewhere inside the rulebook; ``show`` asks for the witness too."""
    d = network.diagrams
    together = d.end(True)
    for part in parts:
        together = d.both(together, part)
    if d.is_end(together, False):
        return _Answer("no")
    start = [together, network.applies]
    factors = [d.numbers(together), d.numbers(network.applies), *cone(network, start)]
    try:
        for loose in (False, True):
            layout = Layout.of(network, NOTHING, loose)
            if layout.exact and not loose:
                continue
            relevant = {level for factor in factors for level in d.support(factor)}
            related = [each for each in (*layout.projects, *layout.inputs) if d.support(each) & relevant]
            related = _grown(network, related, layout)
            levels = {level for factor in (*factors, *related) for level in d.support(factor)}
            unsure = [level for level in layout.unsure if level in levels]
            trail: list[Eliminated] = []
            remaining = eliminate(d, [*factors, *related], unsure, "exists" if loose else "all", trail)
            rest = sorted(levels - set(unsure))
            found = number(d, eliminate(d, remaining, rest, "exists", trail))
            if found and (layout.exact or not loose):
                if not show:
                    return _Answer("yes")
                held = {relation.level: state} if relation is not None and state is not None else {}
                values = read_back(d, trail)
                return _Answer("yes", witness_from(network, {**values, **held}))
            if not found and loose:
                return _Answer("no")
    except OutOfLimits:
        pass
    return _Answer("cannot tell")


def _grown(network: Network, related: list[int], layout: Layout) -> list[int]:
    """With a group's factor its sibling comes along: they share the kind of project."""
    d = network.diagrams
    levels = {level for each in related for level in d.support(each)}
    return [each for each in (*layout.projects, *layout.inputs) if d.support(each) & levels]
