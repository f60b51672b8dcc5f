"""From a project to a better one nearby: one fact at a time by steps of every size, along turns where it stands at one.

The moves are the same every time, and so many at most.
"""

from __future__ import annotations

import math
import random
import time
from collections.abc import Callable, Iterator, Sequence
from fractions import Fraction

import numpy as np

from samesum.evidence.trial.arrays import Array
from samesum.evidence.trial.plan import Plan
from samesum.evidence.trial.projects import Project, reach
from samesum.evidence.trial.turning import onto, standing_at
from samesum.reading import model as m

CLIMBS = 32  # moves of one climb
STEPS = 30  # sizes of steps, each half of the one before
MOST_MOVES = 512  # tried at once
DIGITS = 7  # to which a value is rounded as well, for the best value is often a short one
FINE = Fraction(1, 10**9)  # of the width of a domain: a finer step could be one that comparisons do not see

Score = Callable[[Sequence[Project]], Array]
"""How good each project is: the higher the better, infinite where nothing is better, NaN where it counts nothing."""


def climbed(plan: Plan, start: Project, score: Score, deadline: float, most: int = MOST_MOVES) -> tuple[float, Project]:
    """The best project found from ``start``, and how good it is; minus infinity where nothing counts."""
    draw = random.Random(1)
    best, value = start, _known(score([start]))[0]
    misses = 0
    for _ in range(CLIMBS):
        if value == math.inf or time.monotonic() > deadline:
            break
        moves, all_ = _moves(plan, best, draw, most)
        tried = [*moves, *_along(plan, best, moves, most)]
        if not tried:
            break
        scores = _known(score(tried))
        place = int(np.argmax(scores))
        if scores[place] > value:
            best, value, misses = tried[place], float(scores[place]), 0
            continue
        misses += 1
        if all_ or misses > 2:
            break
    return float(value), best


def _known(scores: Array) -> Array:
    return np.where(np.isnan(scores), -np.inf, scores)


def _moves(plan: Plan, best: Project, draw: random.Random, most: int) -> tuple[list[Project], bool]:
    """Projects that differ in one fact (or in all elements of one); whether these are all moves there are."""
    asked = {node.name for node in plan.nodes if node.kind in ("input", "code", "holds")}
    facts: list[tuple[str, ...]] = []
    for fact in plan.graph.model.facts:
        size = plan.graph.sizes.get(fact.index, 0)
        ids = tuple(f"{fact.name}@{element}" for element in range(1, size + 1)) if fact.index else (fact.name,)
        ids = tuple(id for id in ids if id in asked)
        facts += [(id,) for id in ids] + ([ids] if len(ids) > 1 else [])
    domains = {fact.name: fact.domain for fact in plan.graph.model.facts}
    share = max(1, most // (2 * STEPS + DIGITS + 2))
    chosen = facts if len(facts) <= share else [facts[place] for place in sorted(draw.sample(range(len(facts)), share))]
    moves = []
    for ids in chosen:
        for other in _others(domains[ids[0].partition("@")[0]], best[ids[0]], len(ids) > 1):
            moves.append({**best, **dict.fromkeys(ids, other)})
    return moves, len(chosen) == len(facts)


def _others(domain: m.Domain, value: object, itself: bool) -> Iterator[Fraction | str | bool]:
    """Values to try instead of one; ``itself`` among them where other elements have another."""
    if isinstance(domain, m.OneOf):
        yield from (each for each in domain.values if itself or each != value)
    elif isinstance(domain, m.YesNo):
        yield from (each for each in (True, False) if itself or each != value)
    elif isinstance(value, Fraction):
        low, high = reach(domain)
        fine = Fraction(10) ** math.floor(math.log10((high - low) * FINE)) if high > low else Fraction(1)
        tried = [low, high, *((value,) if itself else ())]
        for number in range(1, STEPS + 1):
            step = (high - low) / 2**number
            tried += [round((value + side * step) / fine) * fine for side in (1, -1)]
        tried += [Fraction(round(value * 10**digits), 10**digits) for digits in range(DIGITS)]
        low = low if domain.low is not None else min(low, value * 2)
        high = high if domain.high is not None else max(high, value * 2)
        yield from (each for each in dict.fromkeys(tried) if low <= each <= high and (itself or each != value))


def _along(plan: Plan, best: Project, moves: Sequence[Project], most: int) -> list[Project]:
    """The moves along each turn at which the project stands: another of its facts goes with the one that moves."""
    found: list[Project] = []
    for turn in standing_at(plan, best)[:2]:
        for fact in turn.facts:
            mine = [move for move in moves if move[fact] == best[fact] and any(move[f] != best[f] for f in turn.facts)]
            found += onto(plan, mine, turn, fact)
    return found[:most]
