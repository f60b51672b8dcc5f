"""Many-valued decision diagrams with whole numbers (or any value) at the ends.

A diagram is a function of variables, each with a fixed number of values 0..size-1. Equal
functions are one node, so sharing costs nothing and equality is identity. The ends may hold
any hashable value: True and False for conditions, whole numbers of any length for counts,
expressions for the value of a quantity.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Hashable, Iterable, Sequence
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


def product(x: Any, y: Any) -> Any:
    """The product of two ends; OUTSIDE absorbs."""
    if x == OUTSIDE or y == OUTSIDE:
        return OUTSIDE
    return x * y


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
        return self.apply("times", product, min(a, b), max(a, b))
