"""How a plan hangs together for a given set of projects: which parts are live, who shares what, and where an
axis may be folded away without losing exactness.

An axis is folded at the lowest operation that everything depending on it leads through (its dominator), if that
operation is met at most once in any one evaluation, and its value is not asked by a condition.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field

from samesum.evidence.trial.plan import CONDITIONS, Node, Plan
from samesum.evidence.trial.values import Evaluator

Span = tuple[float, float]


@dataclass(slots=True)
class Structure:
    """``children``: what each live operation leads to. ``full``: operations whose every value matters (conditions
    and tables of bands ask them, or an operation that neither rises nor falls). ``spans``: the lowest and highest
    that a number can be, over all rows and routes (not sharp)."""

    plan: Plan
    children: Mapping[int, tuple[int, ...]]
    full: set[int]
    spans: Mapping[int, Span]
    cuts: set[int] = field(default_factory=set)
    dominator: dict[int, int] = field(default_factory=dict)
    depth: dict[int, int] = field(default_factory=dict)
    _once: dict[int, bool] = field(default_factory=dict)

    def below(self, start: Iterable[int]) -> set[int]:
        """Everything that these operations lead to, themselves included."""
        found: set[int] = set()
        stack = list(start)
        while stack:
            number = stack.pop()
            if number not in found:
                found.add(number)
                stack += self.children.get(number, ())
        return found

    def cut(self, numbers: Iterable[int]) -> None:
        """Lets these shared parts stand for themselves, at their lowest or their highest."""
        self.cuts |= set(numbers)
        self._once.clear()

    def uncut(self, number: int) -> None:
        self.cuts.discard(number)
        self._once.clear()

    def dominates(self, above: int, number: int) -> bool:
        """Whether everything that leads to ``number`` leads through ``above``."""
        while self.depth[number] > self.depth[above]:
            number = self.dominator[number]
        return number == above

    def met_once(self, number: int) -> bool:
        """Whether at most one use of the operation takes part in any one evaluation (uses under different branches
        of one branch point exclude each other)."""
        found = self._once.get(number)
        if found is None:
            found = self._uses(number) == 1
            self._once[number] = found
        return found

    def _uses(self, target: int) -> int:
        uses = {target: 1}
        total = 0
        for number in sorted(self.children):
            if number <= target:
                continue
            node = self.plan.nodes[number]
            inner = [0 if each in self.cuts else uses.get(each, 0) for each in self.children[number]]
            if target in self.cuts:
                inner = [
                    0 if each == target else count for each, count in zip(self.children[number], inner, strict=True)
                ]
            count = max(inner, default=0) if node.kind == "select" else sum(inner)
            if count:
                uses[number] = min(count, 9)
                if number in self.cuts or number == self.plan.root:
                    total += count
        if target == self.plan.root or target in self.cuts:
            return 1
        return total

    def owner(self, leaf: int) -> int:
        """Where an axis that begins at ``leaf`` is folded."""
        at = self.dominator[leaf]
        while at != self.plan.root and (
            at in self.full or self.plan.nodes[at].kind in CONDITIONS or not self.met_once(at)
        ):
            at = self.dominator[at]
        return at


def find_structure(evaluator: Evaluator) -> Structure:
    """The live structure of the evaluator's plan. Works out all conditions on the way."""
    plan = evaluator.plan
    children: dict[int, tuple[int, ...]] = {}
    asked: set[int] = set()
    stack = [plan.root]
    while stack:
        number = stack.pop()
        if number in children:
            continue
        node = plan.nodes[number]
        children[number] = _live(evaluator, node)
        stack += children[number]
        if node.kind in CONDITIONS:
            asked.add(number)
        elif node.kind == "lookup":
            asked |= {each for each in node.args if plan.nodes[each].kind not in ("code", "named")}
    made = Structure(plan, dict(sorted(children.items())), set(), {})
    made.spans = _spans(evaluator, made.children)
    for number in made.children:
        node = plan.nodes[number]
        if not steady(node, [made.spans.get(each, (-math.inf, math.inf)) for each in node.args]):
            asked |= set(node.args)
    made.full = made.below(asked)
    _dominators(made)
    return made


def _live(evaluator: Evaluator, node: Node) -> tuple[int, ...]:
    if node.kind != "select":
        return node.args
    state = evaluator.state(node.args[0])
    if state.codes is not None:
        taken = {int(each) for each in set(state.codes.data.ravel().tolist())}
    else:
        taken = {branch for branch, open_ in zip(state.order, state.open, strict=True) if open_.data.any()}
    bodies = [body for place, body in enumerate(node.args[1:]) if place in taken]
    return (node.args[0], *bodies)


def _dominators(made: Structure) -> None:
    root = made.plan.root
    parents: dict[int, list[int]] = {}
    for number, inner in made.children.items():
        for each in dict.fromkeys(inner):
            parents.setdefault(each, []).append(number)
    made.dominator[root] = root
    made.depth[root] = 0
    for number in sorted(made.children, reverse=True):
        if number == root:
            continue
        above: int | None = None
        for parent in parents.get(number, ()):
            above = parent if above is None else _meet(made, above, parent)
        if above is not None:
            made.dominator[number] = above
            made.depth[number] = made.depth[above] + 1


def _meet(made: Structure, a: int, b: int) -> int:
    while a != b:
        if made.depth[a] >= made.depth[b]:
            a = made.dominator[a]
        else:
            b = made.dominator[b]
    return a


# --- spans -----------------------------------------------------------------------------------


def _spans(evaluator: Evaluator, children: Mapping[int, tuple[int, ...]]) -> dict[int, Span]:
    plan = evaluator.plan
    found: dict[int, Span] = {}
    for number in children:
        node = plan.nodes[number]
        if node.kind in CONDITIONS or node.kind in ("code", "named"):
            continue
        found[number] = _span(
            evaluator, node, [found.get(each, (0.0, 0.0)) for each in node.args], found, children[number]
        )
    return found


def _span(
    evaluator: Evaluator, node: Node, parts: list[Span], found: Mapping[int, Span], live: tuple[int, ...]
) -> Span:
    plan = evaluator.plan
    match node.kind:
        case "number":
            return float(node.number), float(node.number)
        case "input":
            values = evaluator.rows.numbers[node.name]
            low, high = (float(values.min()), float(values.max())) if len(values) else (0.0, 0.0)
            if node.name in evaluator.candidates:
                wide = evaluator.candidates[node.name]
                low, high = min(low, float(wide.min())), max(high, float(wide.max()))
            return low, high
        case "lookup":
            rows = [float(row.value) for row in plan.tables[node.name].rows]
            return (min(rows), max(rows)) if rows else (0.0, 0.0)
        case "select":
            bodies = [found[each] for each in live[1:]]
            return (min(low for low, _ in bodies), max(high for _, high in bodies)) if bodies else (0.0, 0.0)
        case "guard":
            return parts[0]
        case _:
            return arithmetic_span(node, parts)


def arithmetic_span(node: Node, parts: list[Span]) -> Span:
    """A range that holds whatever the operation gives on the ranges of its parts (plain floats: for deciding
    which way is up, not for proofs)."""
    match node.kind:
        case "linear":
            low = high = float(node.number)
            for (a, b), weight in zip(parts, node.weights, strict=True):
                scale = float(weight)
                if scale:
                    low, high = low + scale * (a if scale > 0 else b), high + scale * (b if scale > 0 else a)
            return low, high
        case "product":
            span = parts[0]
            for other in parts[1:]:
                span = _around(*(_times(x, y) for x in span for y in other))
            return span
        case "divide":
            (a, b), (c, d) = parts
            if c <= 0 <= d:
                return -math.inf, math.inf
            return _around(*(x / y for x in (a, b) for y in (c, d)))
        case "power":
            return _power_span(parts[0], parts[1])
        case "min" | "max":
            fold = min if node.kind == "min" else max
            return fold(low for low, _ in parts), fold(high for _, high in parts)
        case _:
            return _function_span(node.name, parts[0])


def _times(x: float, y: float) -> float:
    return 0.0 if x == 0 or y == 0 else x * y


def _around(*values: float) -> Span:
    if any(math.isnan(value) for value in values):
        return -math.inf, math.inf
    return min(values), max(values)


def _power_span(base: Span, exponent: Span) -> Span:
    try:
        if exponent[0] == exponent[1] and exponent[0] == int(exponent[0]) and exponent[0] >= 0:
            ends = (base[0] ** exponent[0], base[1] ** exponent[0])
            return _around(*ends, 0.0) if base[0] < 0 < base[1] else _around(*ends)
        if base[0] > 0:
            return _around(*(x**y for x in base for y in exponent))
    except (OverflowError, ValueError):
        pass
    return -math.inf, math.inf


def _function_span(name: str, part: Span) -> Span:
    low, high = part
    try:
        match name:
            case "abs":
                return (0.0 if low <= 0 <= high else min(abs(low), abs(high))), max(abs(low), abs(high))
            case "sqrt":
                return math.sqrt(max(low, 0.0)), math.sqrt(max(high, 0.0))
            case "exp":
                return math.exp(low), math.exp(high)
            case "ln":
                return (math.log(low) if low > 0 else -math.inf), (math.log(high) if high > 0 else -math.inf)
            case "floor" | "ceil" | "round":
                return low - 1, high + 1
    except OverflowError:
        pass
    return -math.inf, math.inf


def steady(node: Node, parts: list[Span]) -> bool:
    """Whether the operation, over these ranges, only rises or only falls in each of its parts while the others stand
    still, and has a value everywhere. Then its extremes are at the ends of independent parts."""
    match node.kind:
        case "divide":
            return not parts[1][0] <= 0 <= parts[1][1]
        case "power":
            base, exponent = parts
            if exponent[0] == exponent[1] and exponent[0] == int(exponent[0]) and exponent[0] > 0:
                return int(exponent[0]) % 2 == 1 or base[0] >= 0 or base[1] <= 0
            return base[0] > 0
        case "call" if node.name == "abs":
            return parts[0][0] >= 0 or parts[0][1] <= 0
        case "call" if node.name == "sqrt":
            return parts[0][0] >= 0
        case "call" if node.name == "ln":
            return parts[0][0] > 0
        case _:
            return True
