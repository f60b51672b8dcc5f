"""Every way to the result of a small rulebook, as exact sums with the conditions under which they hold.

What is asked of them is in ``apart``.
"""

from __future__ import annotations

import time
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any, Literal

from samesum.evidence.choosing.batches import middle
from samesum.evidence.routes import ranges, symbols
from samesum.evidence.routes.ranges import Bounds
from samesum.evidence.routes.symbols import Sum
from samesum.evidence.trial.deciding import preferred
from samesum.evidence.trial.plan import Node, Plan
from samesum.reading import model as m

MOST_WAYS = 240
SIGNS = {"<": (-1,), "<=": (-1, 0), "=": (0,), "<>": (-1, 1), ">=": (0, 1), ">": (1,)}
ALL_SIGNS = frozenset((-1, 0, 1))

Answer = Literal["yes", "no", "cannot tell"]
Key = tuple[str, Any]
Conditions = Mapping[Key, Any]


class TooManyWays(Exception):
    """The ways are too many, or one holds something that is no exact sum."""


@dataclass(frozen=True, slots=True)
class Way:
    """``value`` under ``when``: signs of sums, codes of names, yes or no, branches taken."""

    when: Conditions
    value: Sum


@dataclass(slots=True)
class Executor:
    """``reference``: everything decided as the reference decides it. ``copy`` is added to the names of settings, so
    that two copies are free of each other."""

    plan: Plan
    reference: bool
    copy: str
    box: dict[str, Bounds]
    deadline: float
    _values: dict[int, list[Way]] = field(default_factory=dict)
    _truths: dict[int, list[tuple[Conditions, bool]]] = field(default_factory=dict)

    def result(self) -> list[Way]:
        """All ways to the result inside the rulebook, what is human left out of their conditions."""
        plan = self.plan
        root = plan.nodes[plan.root]
        ways = self.values(plan.result)
        if root.kind == "guard":
            for each in root.args[1:]:
                holding = [when for when, truth in self.truths(each) if truth]
                ways = self._checked([Way(when, way.value) for way in ways for when in merged(way.when, holding)])
        found: dict[tuple[Sum, frozenset[tuple[Key, Any]]], Way] = {}
        for way in ways:
            kept = {
                key: value
                for key, value in way.when.items()
                if key[0] != "state" and not (key[0] in ("flag", "code") and key[1] in plan.human)
            }
            found.setdefault((way.value, frozenset(kept.items())), Way(kept, way.value))
        return list(found.values())

    def _checked(self, ways: list[Any]) -> list[Any]:
        if len(ways) > MOST_WAYS or time.monotonic() > self.deadline:
            raise TooManyWays
        return ways

    # -- numbers --------------------------------------------------------------------------

    def values(self, number: int) -> list[Way]:
        found = self._values.get(number)
        if found is None:
            found = self._checked(list(self._made(self.plan.nodes[number])))
            self._values[number] = found
        return found

    def _made(self, node: Node) -> Iterator[Way]:
        match node.kind:
            case "number":
                yield Way({}, symbols.number(node.number))
            case "input":
                yield Way({}, self._input(node.name))
            case "select":
                for branch, body in enumerate(node.args[1:]):
                    for when in self.taken(node.args[0], branch):
                        for way in self.values(body):
                            for together in merged(when, [way.when]):
                                yield Way(together, way.value)
            case "lookup":
                yield from self._rows(node)
            case "guard":
                yield from self.values(node.args[0])
            case _:
                for when, parts in self._combinations([self.values(each) for each in node.args]):
                    yield Way(when, _operated(node, parts))

    def _input(self, name: str) -> Sum:
        domain = self.plan.numeric[name]
        if name in self.plan.human:
            if self.reference:
                return symbols.number(middle(domain))
            name = f"{name}{self.copy}"
        self.box.setdefault(name, Bounds(domain.low, domain.high))
        return symbols.name(name)

    def _combinations(self, parts: Sequence[Sequence[Way]]) -> list[tuple[Conditions, list[Sum]]]:
        found: list[tuple[Conditions, list[Sum]]] = [({}, [])]
        for ways in parts:
            found = self._checked(
                [
                    (together, [*values, way.value])
                    for when, values in found
                    for way in ways
                    for together in merged(when, [way.when])
                ]
            )
        return found

    def _rows(self, node: Node) -> Iterator[Way]:
        table = self.plan.tables[node.name]
        for row in table.rows:
            whens: list[Conditions] = [{}]
            for label, key, arg in zip(row.labels, table.keys, node.args, strict=True):
                whens = [each for when in whens for each in merged(when, self._answering(label, key, arg))]
            for when in whens:
                yield Way(when, symbols.number(row.value))

    def _answering(self, label: str | m.Band, key: m.Key, arg: int) -> list[Conditions]:
        inner = self.plan.nodes[arg]
        if isinstance(label, str):
            if inner.kind == "named":
                return [{}] if inner.name == label else []
            names = self.plan.named[inner.name]
            return [self._code(inner.name, (names.index(label),))] if label in names else []
        found: list[Conditions] = []
        for way in self.values(arg):
            whens: list[Conditions] = [way.when]
            for bound, operator in ((label.low, ">"), (label.high, "<=")):
                if bound is not None:
                    sign = self._sign(symbols.add(way.value, symbols.number(-bound)), SIGNS[operator])
                    whens = [each for when in whens for each in merged(when, [] if sign is None else [sign])]
            found += whens
        return found

    # -- conditions -----------------------------------------------------------------------

    def _code(self, name: str, codes: Sequence[int]) -> Conditions:
        if self.reference and name in self.plan.human:
            return {} if 0 in codes else {("never", name): frozenset()}
        return {("code", name): frozenset(codes)}

    def _sign(self, value: Sum, signs: Sequence[int]) -> Conditions | None:
        """The sum has one of these signs; None when it cannot."""
        constant = value.constant
        if constant is not None:
            return {} if (constant > 0) - (constant < 0) in signs else None
        leading = value.terms[-1][1]
        wanted = frozenset(signs)
        if leading < 0:
            wanted = frozenset(-sign for sign in wanted)
        value = symbols.scale(value, 1 / leading)
        reach = ranges.bounds(value, self.box)
        possible = set(ALL_SIGNS)
        if reach.low is not None and reach.low >= 0:
            possible.discard(-1)
            if reach.low > 0:
                possible.discard(0)
        if reach.high is not None and reach.high <= 0:
            possible.discard(1)
            if reach.high < 0:
                possible.discard(0)
        if not wanted & possible:
            return None
        return {} if possible <= wanted else {("sign", value): wanted & possible}

    def truths(self, number: int) -> list[tuple[Conditions, bool]]:
        found = self._truths.get(number)
        if found is None:
            found = self._checked(self._truth(self.plan.nodes[number]))
            self._truths[number] = found
        return found

    def _truth(self, node: Node) -> list[tuple[Conditions, bool]]:
        match node.kind:
            case "true":
                return [({}, True)]
            case "holds":
                if self.reference and node.name in self.plan.human:
                    return [({}, True)]
                return [({("flag", node.name): frozenset((truth,))}, truth) for truth in (True, False)]
            case "is":
                name = self.plan.nodes[node.args[0]].name
                others = tuple(code for code in range(len(self.plan.named[name])) if code not in node.chosen)
                pairs = ((node.chosen, True), (others, False))
                return [
                    (when, truth)
                    for codes, truth in pairs
                    if codes and ("never", name) not in (when := self._code(name, codes))
                ]
            case "takes":
                point = self.plan.point(node.args[0])
                return [
                    (when, branch == node.chosen[0])
                    for branch in range(len(point.branches))
                    for when in self.taken(node.args[0], branch)
                ]
            case "compare":
                found: list[tuple[Conditions, bool]] = []
                for when, (left, right) in self._combinations([self.values(each) for each in node.args]):
                    difference = symbols.subtract(left, right)
                    holding = SIGNS[node.name]
                    for signs, truth in ((holding, True), (tuple(ALL_SIGNS - set(holding)), False)):
                        sign = self._sign(difference, signs)
                        if sign is not None:
                            found += [(together, truth) for together in merged(when, [sign])]
                return found
            case "not":
                return [(when, not truth) for when, truth in self.truths(node.args[0])]
            case _:
                whole = node.kind == "all"
                made: list[tuple[Conditions, bool]] = [({}, whole)]
                for each in node.args:
                    made = self._checked(
                        [
                            (together, (truth and more) if whole else (truth or more))
                            for when, truth in made
                            for other, more in self.truths(each)
                            for together in merged(when, [other])
                        ]
                    )
                return made

    def taken(self, number: int, branch: int) -> list[Conditions]:
        """Under what a branch is taken."""
        node, point = self.plan.nodes[number], self.plan.point(number)
        conditions = node.args[: len(point.branches)]
        if point.leader:
            leader = self.plan.point(node.args[-1])
            name = point.branches[branch]
            if name not in leader.branches:
                return []
            whens = self.taken(node.args[-1], leader.branches.index(name))
            return self._holding(whens, [(conditions[branch], True)])
        needed = [(conditions[branch], True)]
        before: Sequence[int] = ()
        if self.reference:
            order = preferred(self.plan, node.name)
            before = order[: order.index(branch)]
        elif point.kind == "cases in order":
            before = range(branch)
        if point.kind == "cases" and point.conditions[branch] is None:
            before = [each for each in range(len(conditions)) if each != branch]
        needed += [(conditions[each], False) for each in before]
        return self._holding([{("state", node.name): frozenset((branch,))}], needed)

    def _holding(self, whens: list[Conditions], needed: Sequence[tuple[int, bool]]) -> list[Conditions]:
        for condition, wanted in needed:
            truths = [when for when, truth in self.truths(condition) if truth == wanted]
            whens = self._checked([together for when in whens for together in merged(when, truths)])
        return whens


def merged(when: Conditions, others: Sequence[Conditions]) -> Iterator[Conditions]:
    """``when`` together with each of the others, where they do not exclude each other."""
    for other in others:
        made = dict(when)
        for key, value in other.items():
            both = value & made[key] if key in made else value
            if not both:
                break
            made[key] = both
        else:
            yield made


def _operated(node: Node, parts: Sequence[Sum]) -> Sum:
    made: Sum | None
    match node.kind:
        case "linear":
            scaled = [symbols.scale(part, weight) for part, weight in zip(parts, node.weights, strict=True)]
            made = symbols.total([symbols.number(node.number), *scaled])
        case "product":
            made = parts[0]
            for part in parts[1:]:
                made = symbols.multiply(made, part)
        case "divide":
            made = symbols.divide(parts[0], parts[1])
        case "power":
            made = symbols.power(parts[0], parts[1])
        case "min" | "max":
            made = symbols.call(node.kind, tuple(parts))
        case _:
            made = symbols.call(node.name, tuple(parts))
    if made is None or len(made.terms) > 200:
        raise TooManyWays
    return made
