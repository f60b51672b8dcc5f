"""Many-valued decision diagrams with whole numbers (or any value) at the ends, and elimination.

A diagram is a function of variables, each with a fixed number of values 0..size-1. Equal
functions are one node, so sharing costs nothing and equality is identity. The ends may hold
any hashable value: True and False for conditions, whole numbers of any length for counts,
expressions for the value of a quantity.

Counting is *elimination* (Dechter 1999, Bucket elimination, Artificial Intelligence 113): a
product of small diagrams stays a product, and one variable at a time is summed, maximised or
projected out of the few that mention it. 10^30 routes are thus no more work than ten as long
as the branch points hang together loosely, and every figure stays an exact whole number.
"""

from __future__ import annotations

import heapq
import time
from collections.abc import Callable, Hashable, Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

END = 1 << 60  # the level of an end: below every variable
OUTSIDE = "outside"  # absorbs in products, gives way in minima: a project outside the rulebook


class OutOfLimits(Exception):
    """The diagram grew past its limit of nodes, or the time is up; callers report a bracket."""


@dataclass(slots=True)
class Limits:
    """How much one analysis may spend. ``deadline`` is on the monotonic clock (seconds)."""

    deadline: float
    nodes: int = 1_200_000

    def check(self) -> None:
        if time.monotonic() > self.deadline:
            raise OutOfLimits("time")


@dataclass(slots=True)
class Diagrams:
    """A workshop of diagrams over common variables. ``size`` maps a level to its number of
    values; a smaller level stands nearer the top."""

    limits: Limits
    size: dict[int, int] = field(default_factory=dict)
    level: list[int] = field(default_factory=list)
    kids: list[tuple[int, ...]] = field(default_factory=list)
    content: list[Any] = field(default_factory=list)
    _ends: dict[tuple[type, Hashable], int] = field(default_factory=dict)
    _nodes: dict[tuple[int, tuple[int, ...]], int] = field(default_factory=dict)
    _memo: dict[str, dict[Any, int]] = field(default_factory=dict)
    _supports: dict[int, frozenset[int]] = field(default_factory=dict)
    _steps: int = 0

    # -- making -------------------------------------------------------------------------

    def end(self, value: Hashable) -> int:
        """The constant ``value``."""
        key = (type(value), value)
        found = self._ends.get(key)
        if found is None:
            found = self._new(END, (), value)
            self._ends[key] = found
        return found

    def node(self, level: int, kids: tuple[int, ...]) -> int:
        """The diagram that looks at ``level`` and goes on with ``kids[value]``."""
        # counted here, where most of the work passes, and not only where a node is new
        self._steps += 1 + len(kids)
        if self._steps >= 20_000:
            self._steps = 0
            self.limits.check()
        first = kids[0]
        if all(kid == first for kid in kids):
            return first
        key = (level, kids)
        found = self._nodes.get(key)
        if found is None:
            found = self._new(level, kids, None)
            self._nodes[key] = found
        return found

    def _new(self, level: int, kids: tuple[int, ...], value: Any) -> int:
        if len(self.level) >= self.limits.nodes:
            raise OutOfLimits("size")
        self.level.append(level)
        self.kids.append(kids)
        self.content.append(value)
        return len(self.level) - 1

    def literal(self, level: int, values: Iterable[int]) -> int:
        """True where the variable has one of ``values``."""
        wanted = set(values)
        yes, no = self.end(True), self.end(False)
        return self.node(level, tuple(yes if value in wanted else no for value in range(self.size[level])))

    # -- combining ----------------------------------------------------------------------

    def apply(self, name: str, operation: Callable[[Any, Any], Hashable], a: int, b: int) -> int:
        """``operation`` on the ends of ``a`` and ``b``; ``name`` identifies the operation."""
        memo = self._memo.setdefault(name, {})
        levels, kids, content = self.level, self.kids, self.content

        def walk(a: int, b: int) -> int:
            key = (a, b)
            found = memo.get(key)
            if found is not None:
                return found
            la, lb = levels[a], levels[b]
            if la == END and lb == END:
                result = self.end(operation(content[a], content[b]))
            elif la == lb:
                result = self.node(la, tuple(map(walk, kids[a], kids[b])))
            elif la < lb:
                result = self.node(la, tuple([walk(kid, b) for kid in kids[a]]))
            else:
                result = self.node(lb, tuple([walk(a, kid) for kid in kids[b]]))
            memo[key] = result
            return result

        return walk(a, b)

    def map(self, name: str, operation: Callable[[Any], Hashable], a: int) -> int:
        """``operation`` on every end."""
        return self.graft(name, lambda value: self.end(operation(value)), a)

    def graft(self, name: str, replacement: Callable[[Any], int], a: int) -> int:
        """Every end replaced by a whole diagram (whose variables may stand anywhere in the order)."""
        memo = self._memo.setdefault(name, {})
        levels, kids = self.level, self.kids

        def walk(a: int) -> int:
            found = memo.get(a)
            if found is not None:
                return found
            level = levels[a]
            if level == END:
                result = replacement(self.content[a])
            else:
                below = [walk(kid) for kid in kids[a]]
                if all(levels[kid] > level for kid in below):
                    result = self.node(level, tuple(below))
                else:
                    result = self._select(level, below)
            memo[a] = result
            return result

        return walk(a)

    def _select(self, level: int, below: Sequence[int]) -> int:
        """``below[value of the variable]`` where some of ``below`` look at higher variables."""
        memo: dict[tuple[int, ...], int] = {}

        def walk(parts: tuple[int, ...]) -> int:
            found = memo.get(parts)
            if found is not None:
                return found
            top = min(self.level[part] for part in parts)
            if top > level or len(set(parts)) == 1:
                result = self.node(level, parts)
            elif top == level:  # restrict each part to its own value
                result = self.node(
                    level,
                    tuple(
                        self.kids[part][value] if self.level[part] == level else part
                        for value, part in enumerate(parts)
                    ),
                )
            else:
                result = self.node(
                    top,
                    tuple(
                        walk(tuple(self.kids[part][value] if self.level[part] == top else part for part in parts))
                        for value in range(self.size[top])
                    ),
                )
            memo[parts] = result
            return result

        return walk(tuple(below))

    def restrict(self, a: int, level: int, value: int) -> int:
        """``a`` with one variable held at ``value``."""
        if self.level[a] > level:
            return a
        if self.level[a] == level:
            return self.kids[a][value]
        memo = self._memo.setdefault(f"restrict {level} {value}", {})
        levels, kids = self.level, self.kids

        def walk(a: int) -> int:
            here = levels[a]
            if here > level:
                return a
            if here == level:
                return kids[a][value]
            found = memo.get(a)
            if found is None:
                found = self.node(here, tuple([walk(kid) for kid in kids[a]]))
                memo[a] = found
            return found

        return walk(a)

    def support(self, a: int) -> frozenset[int]:
        """The variables that ``a`` looks at."""
        found = self._supports.get(a)
        if found is not None:
            return found
        seen: set[int] = set()
        result: set[int] = set()
        stack = [a]
        while stack:
            node = stack.pop()
            if node in seen or self.level[node] == END:
                continue
            seen.add(node)
            result.add(self.level[node])
            stack.extend(self.kids[node])
        self._supports[a] = frozenset(result)
        return self._supports[a]

    def ends(self, a: int) -> set[Any]:
        """The values that stand at the ends of ``a``."""
        seen: set[int] = set()
        result: set[Any] = set()
        stack = [a]
        while stack:
            node = stack.pop()
            if node in seen:
                continue
            seen.add(node)
            if self.level[node] == END:
                result.add(self.content[node])
            else:
                stack.extend(self.kids[node])
        return result

    def is_end(self, a: int, value: Hashable) -> bool:
        """Whether ``a`` is the constant ``value``."""
        return self.level[a] == END and type(self.content[a]) is type(value) and bool(self.content[a] == value)

    def choose(self, condition: int, a: int, b: int) -> int:
        """``a`` where the condition holds, else ``b``."""
        memo = self._memo.setdefault("choose", {})
        levels, kids = self.level, self.kids

        def walk(c: int, a: int, b: int) -> int:
            if levels[c] == END:
                return a if self.content[c] else b
            if a == b:
                return a
            key = (c, a, b)
            found = memo.get(key)
            if found is None:
                top = min(levels[c], levels[a], levels[b])
                parts = [kids[each] if levels[each] == top else (each,) * self.size[top] for each in (c, a, b)]
                found = self.node(top, tuple([walk(x, y, z) for x, y, z in zip(*parts, strict=True)]))
                memo[key] = found
            return found

        return walk(condition, a, b)

    def exchange(self, name: str, replacement: Callable[[int], tuple[int, Sequence[int]] | None], a: int) -> int:
        """Variables exchanged for others: ``replacement(level)`` gives the new level and, for each of
        its values, the old variable's value; None leaves the variable."""
        memo = self._memo.setdefault(name, {})

        def walk(a: int) -> int:
            level = self.level[a]
            if level == END:
                return a
            found = memo.get(a)
            if found is None:
                below = [walk(kid) for kid in self.kids[a]]
                new = replacement(level)
                if new is not None:
                    level, old = new
                    below = [below[value] for value in old]
                found = self._select(level, below)
                memo[a] = found
            return found

        return walk(a)

    # -- conditions ---------------------------------------------------------------------

    def both(self, a: int, b: int) -> int:
        """``and`` of two diagrams of True and False."""
        yes, no = self.end(True), self.end(False)
        if a == no or b == no:
            return no
        if a in (yes, b):
            return b
        if b == yes:
            return a
        return self.apply("and", lambda x, y: x and y, min(a, b), max(a, b))

    def either(self, a: int, b: int) -> int:
        """``or`` of two diagrams of True and False."""
        yes, no = self.end(True), self.end(False)
        if a == yes or b == yes:
            return yes
        if a in (no, b):
            return b
        if b == no:
            return a
        return self.apply("or", lambda x, y: x or y, min(a, b), max(a, b))

    def negate(self, a: int) -> int:
        """``not``."""
        return self.map("not", lambda x: not x, a)

    def every(self, parts: Iterable[int]) -> int:
        result = self.end(True)
        for part in parts:
            result = self.both(result, part)
        return result

    def some(self, parts: Iterable[int]) -> int:
        result = self.end(False)
        for part in parts:
            result = self.either(result, part)
        return result

    # -- numbers ------------------------------------------------------------------------

    def numbers(self, a: int) -> int:
        """True and False as 1 and 0."""
        return self.map("numbers", lambda x: int(x) if isinstance(x, bool) else x, a)

    def times(self, a: int, b: int) -> int:
        """Product; 0 and OUTSIDE absorb (OUTSIDE first)."""
        one = self.end(1)
        if a == one:
            return b
        if b == one:
            return a
        return self.apply("times", _times, min(a, b), max(a, b))


def _times(x: Any, y: Any) -> Any:
    if x == OUTSIDE or y == OUTSIDE:
        return OUTSIDE
    return x * y


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
        result = _times(result, diagrams.content[factor])
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
                found = _times(found, evaluate(diagrams, factor, values))
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
