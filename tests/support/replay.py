"""Replaying a witness on the model: exact, by plain recursion, with no code of ``samesum.evidence``.

A witness leaves out what does not matter, so it is replayed with the missing names at the low end, in
the middle and at the high end of their domains: what it claims must hold each time.
"""

from __future__ import annotations

import math
import operator
from collections.abc import Iterator, Mapping
from fractions import Fraction

from samesum.evidence.evidence import Evidence
from samesum.evidence.routes.conditions import Gap, Overlap
from samesum.evidence.routes.witness import Value, Witness
from samesum.graph import BranchPoint, DecisionGraph, instance_id
from samesum.reading import model as m
from samesum.reading import walk

COMPARE = {
    "<": operator.lt,
    "<=": operator.le,
    "=": operator.eq,
    "<>": operator.ne,
    ">=": operator.ge,
    ">": operator.gt,
}  # fmt: skip


class NoValue(Exception):
    """There is no number or no branch here: a gap."""


class Replay:
    """One evaluation: ``values`` by name and element, ``route`` from branch point to branch."""

    def __init__(self, graph: DecisionGraph, values: Mapping[str, Value], route: Mapping[str, str]) -> None:
        self.graph = graph
        self.values = values
        self.route = route
        self.tables = {table.name: table for table in graph.model.tables}
        self.constants = {constant.name: constant for constant in graph.model.constants}

    def number(self, node: m.Expression, elements: Mapping[str, int]) -> Fraction:
        """The number an expression amounts to. Raises ``NoValue``."""
        match node:
            case m.Number(value=value):
                return value
            case m.Reference(kind="constant", name=name):
                return self.number(self.constants[name].expression, {})
            case m.Reference(kind="quantity", name=name, index=index):
                return self.quantity(instance_id(name, index, elements))
            case m.Reference(name=name, index=index):
                found = self.values[instance_id(name, index, elements)]
                assert isinstance(found, Fraction | int)
                return Fraction(found)
            case m.Position(index=index):
                return Fraction(elements[index])
            case m.Scaled(operand=operand, factor=factor):
                return self.number(operand, elements) * factor
            case m.Negation(operand=operand):
                return -self.number(operand, elements)
            case m.Lookup():
                return self.lookup(node, elements)
            case m.Arithmetic(operator=sign, left=left, right=right):
                return _worked(sign, self.number(left, elements), self.number(right, elements))
            case m.Function(name=name, arguments=arguments):
                return _called(name, [self.number(each, elements) for each in arguments])
            case m.Reduction(name=name, body=body, index=index):
                count = self.graph.sizes[index]
                parts = [self.number(body, {**elements, index: element}) for element in range(1, count + 1)]
                total = sum(parts, Fraction(0))
                return {"sum": total, "mean": total / count, "min": min(parts), "max": max(parts)}[name]
        raise AssertionError(node)

    def lookup(self, node: m.Lookup, elements: Mapping[str, int]) -> Fraction:
        table = self.tables[node.table]
        for row in table.rows:
            if all(self.labelled(*each, elements) for each in zip(row.labels, node.arguments, strict=True)):
                return row.value
        raise NoValue(f"no row of {node.table}")

    def labelled(self, label: str | m.Band, argument: m.Expression, elements: Mapping[str, int]) -> bool:
        if isinstance(label, m.Band):
            at = self.number(argument, elements)
            return (label.low is None or at > label.low) and (label.high is None or at <= label.high)
        if isinstance(argument, m.Value):
            return argument.name == label
        assert isinstance(argument, m.Reference)
        found = self.values[instance_id(argument.name, argument.index, elements)]
        return ("yes" if found is True else "no" if found is False else found) == label

    def holds(self, node: m.Condition, elements: Mapping[str, int]) -> bool:
        """Whether a condition holds; everything in it is asked. Raises ``NoValue``."""
        match node:
            case m.Comparison(operator=sign, left=left, right=right):
                return bool(COMPARE[sign](self.number(left, elements), self.number(right, elements)))
            case m.Is(subject=subject, values=values):
                found = self.values[instance_id(subject.name, subject.index, elements)]
                return ("yes" if found is True else "no" if found is False else found) in values
            case m.Holds(name=name, index=index):
                return bool(self.values[instance_id(name, index, elements)])
            case m.Takes(quantity=name, index=index, option=option):
                return self.branch(instance_id(name, index, elements)) == option
            case m.All(parts=parts):
                return all([self.holds(part, elements) for part in parts])
            case m.Some(parts=parts):
                return any([self.holds(part, elements) for part in parts])
            case m.Not(part=part):
                return not self.holds(part, elements)
        raise AssertionError(node)

    def told(self, point: BranchPoint) -> list[bool]:
        """Which of a branch point's own conditions hold (one without a condition holds)."""
        elements = self.graph.instances[point.instance].elements
        return [condition is None or self.holds(condition, elements) for condition in point.conditions]

    def open(self, point: BranchPoint) -> list[str]:
        """The branches that are open, as the language defines it."""
        told = self.told(point)
        if point.leader:
            taken = self.branch(point.leader)
            return [name for name, holds in zip(point.branches, told, strict=True) if holds and name == taken]
        if not point.kind.startswith("cases"):
            return [name for name, holds in zip(point.branches, told, strict=True) if holds]
        found = [
            name
            for name, holds, condition in zip(point.branches, told, point.conditions, strict=True)
            if condition is not None and holds
        ]
        if not found and point.conditions[-1] is None:
            return [point.branches[-1]]
        return found[:1] if point.kind == "cases in order" else found

    def branch(self, id: str) -> str:
        """The branch taken: the route's, which must be open, else the first open one."""
        point = self.graph.branch_points[id]
        found = self.open(point)
        if not found:
            raise NoValue(id)
        taken = self.route.get(id, found[0])
        assert taken in found, f"{id}: the route takes {taken}, open are {found}"
        return taken

    def quantity(self, id: str) -> Fraction:
        instance = self.graph.instances[id]
        body, path = instance.quantity.body, id
        while not isinstance(body, m.Formula):
            taken = self.branch(path)
            body = next(each.body for each in walk.branches(body) if each.name == taken)
            path = f"{path}/{taken}"
        return self.number(body.expression, instance.elements)


def _worked(sign: str, a: Fraction, b: Fraction) -> Fraction:
    if sign == "/":
        if b == 0:
            raise NoValue("division by zero")
        return a / b
    if sign == "^":
        if a == 0 and b < 0:
            raise NoValue("0 to a negative power")
        if a < 0 and b.denominator != 1:
            raise NoValue("a root of a number below 0")
        return a ** int(b) if b.denominator == 1 else Fraction(float(a) ** float(b))
    return {"+": operator.add, "-": operator.sub, "*": operator.mul}[sign](a, b)


def _called(name: str, values: list[Fraction]) -> Fraction:
    first = values[0]
    if name in ("ln", "sqrt") and (first < 0 or (name == "ln" and first == 0)):
        raise NoValue(name)
    match name:
        case "min":
            return min(values)
        case "max":
            return max(values)
        case "abs":
            return abs(first)
        case "floor":
            return Fraction(math.floor(first))
        case "ceil":
            return Fraction(math.ceil(first))
        case "round":
            whole = math.floor(abs(first) + Fraction(1, 2))
            return Fraction(whole if first >= 0 else -whole)
    return Fraction({"sqrt": math.sqrt, "exp": math.exp, "ln": math.log}[name](float(first)))


# --- witnesses -----------------------------------------------------------------------------


def filled(graph: DecisionGraph, witness: Witness) -> Iterator[dict[str, Value]]:
    """The witness's values by name and element, with what it leaves out at either end and in the middle."""
    for share in (Fraction(0), Fraction(1, 2), Fraction(1)):
        values: dict[str, Value] = {}
        model = graph.model
        both: tuple[m.Fact | m.Setting, ...] = (*model.facts, *model.settings)
        for declared in both:
            index = declared.index if isinstance(declared, m.Fact) else ""
            for element in range(1, graph.sizes[index] + 1) if index else (0,):
                values[f"{declared.name}@{element}" if index else declared.name] = _at(declared.domain, share)
        for judgement in model.judgements:
            values[judgement.name] = share > 0
        for name, value in witness.inputs:
            if isinstance(value, tuple):
                values.update((f"{name}@{element}", each) for element, each in enumerate(value, start=1))
            else:
                values[name] = value
        _inside(graph, values)
        yield values


def _at(domain: m.Domain, share: Fraction) -> Value:
    if isinstance(domain, m.OneOf):
        return domain.values[int(share * (len(domain.values) - 1))]
    if isinstance(domain, m.YesNo):
        return share > 0
    low = Fraction(-1000) if domain.low is None else domain.low
    high = low + 2000 if domain.high is None else domain.high
    return low + (high - low) * share


def _inside(graph: DecisionGraph, values: Mapping[str, Value]) -> None:
    for declared in (*graph.model.facts, *graph.model.settings):
        for id, value in values.items():
            if id.split("@")[0] != declared.name:
                continue
            domain = declared.domain
            if isinstance(domain, m.Range):
                assert isinstance(value, Fraction | int), (id, value)
                assert domain.low is None or value >= domain.low, (id, value)
                assert domain.high is None or value <= domain.high, (id, value)
            elif isinstance(domain, m.OneOf):
                assert value in domain.values, (id, value)
            else:
                assert isinstance(value, bool), (id, value)


def _applies(replay: Replay) -> None:
    for applies in replay.graph.model.applies:
        assert replay.holds(applies.condition, {}), "the witness is outside the rulebook"


def _on_the_way(replay: Replay) -> None:
    """Every branch of the route is open, and its branch point stands on the route."""
    for id, taken in replay.route.items():
        point = replay.graph.branch_points[id]
        assert taken in replay.open(point), (id, taken)
        if point.parent is not None:
            assert replay.route.get(point.parent[0], point.parent[1]) == point.parent[1], id


def check_overlap(evidence: Evidence, overlap: Overlap) -> None:
    """The witness shows both branches open together."""
    graph = evidence.graph
    assert overlap.witness is not None
    point = graph.branch_points[overlap.branch_point]
    for values in filled(graph, overlap.witness):
        replay = Replay(graph, values, dict(overlap.witness.route))
        _applies(replay)
        _on_the_way(replay)
        assert set(overlap.branches) <= set(replay.open(point)), (overlap, values)


def check_gap(evidence: Evidence, gap: Gap) -> None:
    """The witness leaves no branch open, or leads to something without a value."""
    graph = evidence.graph
    assert gap.witness is not None
    for values in filled(graph, gap.witness):
        replay = Replay(graph, values, dict(gap.witness.route))
        _applies(replay)
        _on_the_way(replay)
        assert _stuck(replay, gap), (gap, values)


def _stuck(replay: Replay, gap: Gap) -> bool:
    try:
        if gap.branch_point in replay.graph.branch_points:
            point = replay.graph.branch_points[gap.branch_point]
            if not replay.open(point):
                return True
        if gap.branch_point in replay.graph.instances:
            replay.quantity(gap.branch_point)
        else:
            taken = replay.branch(gap.branch_point)
            for leaf in replay.graph.leaves[point.instance]:
                if leaf.under == (gap.branch_point, taken):
                    replay.number(leaf.expression, replay.graph.instances[leaf.instance].elements)
    except NoValue:
        return True
    return False


def check_witnesses(evidence: Evidence) -> None:
    """Every overlap and gap that the evidence claims, replayed."""
    for overlap in evidence.conditions.overlaps:
        check_overlap(evidence, overlap)
    for gap in evidence.conditions.gaps:
        check_gap(evidence, gap)
