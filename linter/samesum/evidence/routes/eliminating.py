"""Counting by elimination on products of diagrams.

A product of small diagrams stays a product, and one variable at a time is summed, maximised or projected
out of the few that mention it (Dechter 1999, Bucket elimination, Artificial Intelligence 113). 10^30 routes
are thus no more work than ten as long as the branch points hang together loosely, and every figure stays an
exact whole number.
"""

from __future__ import annotations

import heapq
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from samesum.evidence.routes.diagrams import END, OUTSIDE, Diagrams, product


def _least(x: Any, y: Any) -> Any:
    if x == OUTSIDE:
        return y
    if y == OUTSIDE:
        return x
    return min(x, y)


COMBINE: Mapping[str, Callable[[Any, Any], Any]] = {
    "sum": lambda x, y: x + y,
    "most": max,
    "least": _least,
    "exists": lambda x, y: 1 if x or y else 0,
    "all": lambda x, y: 1 if x and y else 0,
}


@dataclass(frozen=True, slots=True)
class Eliminated:
    """What one elimination took out, kept so that a witness can be read back."""

    level: int
    factors: tuple[int, ...]
    how: str
    result: int


def eliminate(
    diagrams: Diagrams,
    factors: Sequence[int],
    levels: Iterable[int],
    how: str,
    trail: list[Eliminated] | None = None,
) -> list[int]:
    """Take ``levels`` out of a product of ``factors`` (diagrams of whole numbers).

    ``how`` is ``sum``, ``most``, ``least`` or ``exists`` and must distribute over the product. The
    cheapest variable goes first; ties by level, so that the order never depends on hashing.
    Appends to ``trail`` what is needed to read a witness. Raises ``OutOfLimits``.
    """
    one = diagrams.end(1)
    pool: dict[int, None] = {factor: None for factor in factors if factor != one} if how == "exists" else {}
    items: list[int] = list(pool) if how == "exists" else [factor for factor in factors if factor != one]
    alive: dict[int, int] = dict(enumerate(items))
    where: dict[int, set[int]] = {}
    for number, factor in alive.items():
        for level in diagrams.support(factor):
            where.setdefault(level, set()).add(number)
    remaining = set(levels)
    counter = len(items)

    def cost(level: int) -> tuple[int, int]:
        together: set[int] = set()
        for number in where.get(level, ()):
            together |= diagrams.support(alive[number])
        return (len(together), level)

    costs = {level: cost(level) for level in remaining}
    queue = sorted(costs.values())
    while remaining:
        diagrams.limits.check()
        entry = heapq.heappop(queue)
        level = entry[1]
        if costs.get(level) != entry:
            continue  # its cost has changed since; the newer entry counts
        remaining.discard(level)
        del costs[level]
        numbers = sorted(where.pop(level, set()))
        involved = tuple(alive.pop(number) for number in numbers)
        touched: set[int] = set()
        for number, factor in zip(numbers, involved, strict=True):
            for other in diagrams.support(factor):
                touched.add(other)
                if other in where:
                    where[other].discard(number)
        if involved:
            result = take_out(diagrams, involved, level, how)
        else:
            result = diagrams.end(diagrams.size[level] if how == "sum" else 1)
        if trail is not None:
            trail.append(Eliminated(level, involved, how, result))
        if result != one:
            alive[counter] = result
            for other in diagrams.support(result):
                where.setdefault(other, set()).add(counter)
            counter += 1
        for other in sorted(touched & remaining):
            costs[other] = cost(other)
            heapq.heappush(queue, costs[other])
    return [alive[number] for number in sorted(alive)]


def take_out(diagrams: Diagrams, factors: Sequence[int], level: int, how: str) -> int:
    """Combine, over all values of one variable, the product of the factors at that value."""
    combine = COMBINE[how]
    seen: dict[tuple[int, ...], int] = {}
    products: dict[int, int] = {}
    for value in range(diagrams.size[level]):
        held = tuple(sorted(diagrams.restrict(factor, level, value) for factor in factors))
        if held in seen:
            product = seen[held]
        else:
            product = product_of(diagrams, held, zero_absorbs=how != "least")
            seen[held] = product
        products[product] = products.get(product, 0) + 1
    if how == "sum":
        parts = [
            product if times == 1 else diagrams.times(product, diagrams.end(times))
            for product, times in products.items()
        ]
    else:
        parts = list(products)
    while len(parts) > 1:  # in pairs: the diagrams that meet stay of like size
        paired = [
            diagrams.apply(how, combine, min(a, b), max(a, b)) for a, b in zip(parts[::2], parts[1::2], strict=False)
        ]
        if len(parts) % 2:
            paired.append(parts[-1])
        parts = paired
    result = parts[0]
    return diagrams.map("exists one", lambda x: 1 if x else 0, result) if how == "exists" else result


def taken_apart(diagrams: Diagrams, condition: int) -> tuple[int, ...]:
    """A condition as parts that all must hold and that share no variable where that is so. What hangs
    together in one diagram would otherwise tie everything that its parts touch to each other."""
    parts: list[int] = []
    rest = condition
    for level in sorted(diagrams.support(condition)):
        if len(diagrams.support(rest)) < 2:
            break
        if level not in diagrams.support(rest):
            continue
        others = [other for other in diagrams.support(rest) if other != level]
        alone = _some_of(diagrams, rest, others)
        remaining = _some_of(diagrams, rest, [level])
        if diagrams.both(alone, remaining) == rest:
            parts.append(alone)
            rest = remaining
    return tuple(part for part in (*parts, rest) if not diagrams.is_end(part, True))


def _some_of(diagrams: Diagrams, condition: int, levels: Sequence[int]) -> int:
    """Where some value of ``levels`` makes the condition hold."""
    for level in levels:
        condition = diagrams.some(diagrams.restrict(condition, level, value) for value in range(diagrams.size[level]))
    return condition


def product_of(diagrams: Diagrams, factors: Iterable[int], zero_absorbs: bool = True) -> int:
    """The product, smallest supports first. ``zero_absorbs`` is False where OUTSIDE may occur."""
    parts = sorted(factors, key=lambda factor: (len(diagrams.support(factor)), factor))
    zero = diagrams.end(0)
    if zero_absorbs and zero in parts:
        return zero
    result = diagrams.end(1)
    for part in parts:
        result = diagrams.times(result, part)
        if zero_absorbs and result == zero:
            return zero
    return result


def number(diagrams: Diagrams, factors: Sequence[int]) -> Any:
    """The value of a product in which every variable was eliminated."""
    result: Any = 1
    for factor in factors:
        assert diagrams.level[factor] == END
        result = product(result, diagrams.content[factor])
    return result


def read_back(diagrams: Diagrams, trail: Sequence[Eliminated], held: Mapping[int, int] | None = None) -> dict[int, int]:
    """A value for every eliminated variable, last eliminated first, such that the whole product
    is what the elimination found: the first value of the best kind (largest for ``most`` and
    ``sum``, smallest for ``least``, not 0 for ``exists``)."""
    values: dict[int, int] = dict(held or {})
    for step in reversed(trail):
        best: int | None = None
        best_number: Any = None
        for value in range(diagrams.size[step.level]):
            values[step.level] = value
            found: Any = 1
            for factor in step.factors:
                found = product(found, evaluate(diagrams, factor, values))
            if found == OUTSIDE or (step.how != "least" and not found):
                continue
            if best is None or (found < best_number if step.how == "least" else found > best_number):
                best, best_number = value, found
            if step.how == "exists":
                break
        values[step.level] = 0 if best is None else best
    return values


def evaluate(diagrams: Diagrams, a: int, values: Mapping[int, int]) -> Any:
    """The end that ``values`` lead to. Variables that do not matter may be missing."""
    while diagrams.level[a] != END:
        a = diagrams.kids[a][values.get(diagrams.level[a], 0)]
    return diagrams.content[a]


def possible_values(diagrams: Diagrams, factors: Sequence[int], levels: Sequence[int]) -> dict[int, frozenset[int]]:
    """For each of ``levels``, the values it has somewhere in a product of 0s and 1s.

    One elimination of everything, then the way back: each step of the elimination learns from the step that
    took over from it what the rest of the product allows (the messages of a bucket tree; Dechter 1999).
    About three times the cost of one elimination, for all variables together. Raises ``OutOfLimits``.
    """
    everything = sorted({level for factor in factors for level in diagrams.support(factor)} | set(levels))
    trail: list[Eliminated] = []
    if not number(diagrams, eliminate(diagrams, factors, everything, "exists", trail)):
        return {level: frozenset() for level in levels}
    place = {step.level: position for position, step in enumerate(trail)}
    own: list[list[int]] = [[] for _ in trail]
    for factor in factors:
        if diagrams.support(factor):
            own[min(place[level] for level in diagrams.support(factor))].append(factor)
    children: list[list[int]] = [[] for _ in trail]
    scopes: list[set[int]] = []
    upwards: list[list[int]] = []
    for position, step in enumerate(trail):
        scope = {level for factor in own[position] for level in diagrams.support(factor)}
        scope |= {level for child in children[position] for level in scopes[child]}
        scope.discard(step.level)
        scopes.append(scope)
        received = own[position] + [factor for child in children[position] for factor in upwards[child]]
        upwards.append(eliminate(diagrams, received, [step.level], "exists"))
        if scope:
            children[min(place[level] for level in scope)].append(position)
    wanted = set(levels)
    found: dict[int, frozenset[int]] = {}
    downwards: list[list[int]] = [[] for _ in trail]
    for position in range(len(trail) - 1, -1, -1):
        level = trail[position].level
        here = own[position] + downwards[position]
        for child in children[position]:
            others = here + [f for other in children[position] if other != child for f in upwards[other]]
            downwards[child] = _within(diagrams, others, scopes[child])
        if level in wanted:
            all_here = here + [factor for child in children[position] for factor in upwards[child]]
            belief = _within(diagrams, all_here, {level})
            found[level] = frozenset(
                value
                for value in range(diagrams.size[level])
                if all(evaluate(diagrams, factor, {level: value}) for factor in belief)
            )
    return found


def _within(diagrams: Diagrams, factors: Sequence[int], scope: set[int]) -> list[int]:
    """A product of 0s and 1s with everything outside ``scope`` projected out."""
    outside = sorted({level for factor in factors for level in diagrams.support(factor)} - scope)
    return eliminate(diagrams, factors, outside, "exists")
