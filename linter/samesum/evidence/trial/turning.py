"""Projects that stand just where a comparison, a band of a table, a minimum or a maximum turns.

Overlaps are often open at such a place alone, and a result is often widest there. One fact is moved, the others
stay; a difference that is no straight line in it is followed by a few secants.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction

import numpy as np

from samesum.evidence.trial.arrays import Array
from samesum.evidence.trial.deciding import reference_decision
from samesum.evidence.trial.operations import TIE
from samesum.evidence.trial.plan import Plan
from samesum.evidence.trial.projects import Project, reach, rows_at
from samesum.evidence.trial.values import Evaluator, Rows
from samesum.reading import model as m

MOST_TURNS = 24
MOST_FACTS = 4  # moved for one turn
SECANTS = 6
ASIDE = Fraction(1, 1_000_000)  # of the domain's width: just beside a turn


@dataclass(frozen=True, slots=True)
class Turn:
    """Where the node ``left`` equals ``right`` (or ``bound``); ``facts``: the numeric ones that move the two."""

    left: int
    right: int | None
    bound: Fraction
    facts: tuple[str, ...]


def turns_of(plan: Plan) -> list[Turn]:
    """Where the plan turns, comparisons first."""
    moved: list[frozenset[str]] = []
    for node in plan.nodes:
        own = {node.name} if node.kind == "input" and node.name not in plan.human else set()
        moved.append(frozenset(own).union(*(moved[each] for each in node.args)))
    found = []
    for left, right, bound in sorted(_pairs(plan), key=lambda pair: pair[0]):
        facts = moved[left[1]] | (moved[right] if right is not None else frozenset())
        if facts:
            found.append(Turn(left[1], right, bound, tuple(sorted(facts)[:MOST_FACTS])))
    return list(dict.fromkeys(found))[:MOST_TURNS]


def _pairs(plan: Plan) -> Iterator[tuple[tuple[int, int], int | None, Fraction]]:
    """(how early to try it, one side), the other side, or a bound."""
    nothing = Fraction(0)
    for node in plan.nodes:
        if node.kind == "compare":
            yield (0, node.args[0]), node.args[1], nothing
        elif node.kind == "lookup":
            table = plan.tables[node.name]
            for place, (arg, key) in enumerate(zip(node.args, table.keys, strict=True)):
                if key.bands:
                    labels = [row.labels[place] for row in table.rows]
                    ends = {end for label in labels if isinstance(label, m.Band) for end in (label.low, label.high)}
                    for end in sorted(end for end in ends if end is not None):
                        yield (1, arg), None, end
        elif node.kind in ("min", "max"):
            for other in node.args[1:]:
                yield (2, node.args[0]), other, nothing
        elif node.kind == "call" and node.name == "abs":
            yield (2, node.args[0]), None, nothing


def at_turns(plan: Plan, projects: Sequence[Project]) -> list[Project]:
    """The projects, each moved to every turn by every fact that can move it there."""
    found: list[Project] = []
    for turn in turns_of(plan):
        for fact in turn.facts:
            for project in onto(plan, projects, turn, fact):
                low, high = reach(plan.numeric[fact])
                at = project[fact]
                assert isinstance(at, Fraction)
                aside = ASIDE * (high - low)
                sides = [each for each in (at - aside, at + aside) if low <= each <= high]
                found += [project, *({**project, fact: each} for each in sides)]
    return found


def standing_at(plan: Plan, project: Project) -> list[Turn]:
    """The turns at which a project stands."""
    rows = replace(rows_at(plan, [project]), free={})
    return [turn for turn in turns_of(plan) if _differences(plan, rows, turn)[1][0]]


def onto(plan: Plan, projects: Sequence[Project], turn: Turn, fact: str) -> list[Project]:
    """The projects moved to a turn by one fact; only those that get there inside its domain."""
    if not projects:
        return []
    rows = replace(rows_at(plan, projects), free={})
    low, high = (float(each) for each in reach(plan.numeric[fact]))
    start = rows.numbers[fact]
    before = np.broadcast_to(start, (rows.count,)).astype(np.float64)
    step = (high - low) / 16
    now = np.where(before + step <= high, before + step, before - step)
    with np.errstate(all="ignore"):
        d_before, _ = _differences(plan, _moved(rows, fact, before), turn)
        there = np.zeros(rows.count, dtype=bool)
        for _ in range(SECANTS):
            d_now, there = _differences(plan, _moved(rows, fact, now), turn)
            next_ = now - d_now * (now - before) / (d_now - d_before)
            stay = there | ~np.isfinite(next_)
            before, d_before = np.where(stay, before, now), np.where(stay, d_before, d_now)
            now = np.where(stay, now, next_)
            if stay.all():
                break
        _, there = _differences(plan, _moved(rows, fact, now), turn)
    made = []
    for place in np.flatnonzero(there).tolist():
        at = Fraction(f"{float(now[place]):.12g}")
        domain = plan.numeric[fact]
        if (domain.low is None or at >= domain.low) and (domain.high is None or at <= domain.high):
            made.append({**projects[place], fact: at})
    return made


def _moved(rows: Rows, fact: str, values: Array) -> Rows:
    return replace(rows, numbers={**rows.numbers, fact: values})


def _differences(plan: Plan, rows: Rows, turn: Turn) -> tuple[Array, Array]:
    """How far from a turn each row stands, and whether it stands at it; decisions as in the reference."""
    evaluator = Evaluator(plan, rows, decide=reference_decision(plan))
    nodes = [turn.left] if turn.right is None else [turn.left, turn.right]
    sides = [np.broadcast_to(evaluator.number(each).data, (rows.count,)) for each in nodes]
    scales = [np.broadcast_to(evaluator.scale(each).data, (rows.count,)) for each in nodes]
    if turn.right is None:
        sides.append(np.full(rows.count, float(turn.bound)))
        scales.append(np.full(rows.count, abs(float(turn.bound))))
    with np.errstate(all="ignore"):
        difference = sides[0] - sides[1]
        return difference, np.abs(difference) <= TIE * (scales[0] + scales[1])
