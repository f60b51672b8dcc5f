"""One project on one route, worked out exactly: the plainest reading of the language.

Numbers are exact fractions; ``sqrt``, ``exp``, ``ln`` and odd powers go through floating point. What a
comparison, a table or a rounding decided is remembered, so that a calculation can be repeated at a
threshold itself with the decisions of its left or right side: that is the limit from that side.
"""

from __future__ import annotations

import math
import random
from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction

from samesum.evidence.routes import symbols
from samesum.evidence.routes.witness import Value, usual
from samesum.graph import BranchPoint, DecisionGraph, Element, instance_id
from samesum.reading import model as m
from samesum.reading import walk
from samesum.written import percent, plain

MOST_BITS = 20_000


class NoValue(Exception):
    """There is no number here: no branch open, no row, a division by zero, or a part that could not be read.
    Its text says which, in a clause for people, where that is known."""


@dataclass(slots=True)
class Decisions:
    """What was decided on the way: branches by branch point, rows of tables, whole numbers of roundings."""

    branches: dict[str, int] = field(default_factory=dict)
    rows: dict[tuple[int, tuple[tuple[str, int], ...]], int] = field(default_factory=dict)
    wholes: dict[tuple[int, tuple[tuple[str, int], ...]], int] = field(default_factory=dict)


def middle_project(graph: DecisionGraph) -> dict[str, Value]:
    """A project near the middle of every domain, by name and element; every judgement read as yes."""
    values: dict[str, Value] = {}
    for fact in graph.model.facts:
        value = usual(fact.domain)
        if fact.index:
            for element in range(1, graph.sizes.get(fact.index, 0) + 1):
                values[f"{fact.name}@{element}"] = value
        else:
            values[fact.name] = value
    for setting in graph.model.settings:
        values[setting.name] = usual(setting.domain)
    for judgement in graph.model.judgements:
        values[judgement.name] = True
    return values


def some_projects(graph: DecisionGraph, count: int = 3) -> list[dict[str, Value]]:
    """The project in the middle and a few others drawn evenly from the domains, the same ones every time."""
    draw = random.Random(20_06)
    middle = middle_project(graph)
    both: tuple[m.Fact | m.Setting, ...] = (*graph.model.facts, *graph.model.settings)
    domains = {each.name: each.domain for each in both}
    projects = [middle]
    for _ in range(count):
        values: dict[str, Value] = {}
        for name in middle:
            match domains.get(name.split("@")[0]):
                case m.OneOf(values=names):
                    values[name] = names[draw.randrange(len(names))]
                case m.Range(low=low, high=high):
                    first = low if low is not None else (high or Fraction(0)) - 1000
                    last = high if high is not None else first + 1000
                    values[name] = first + (last - first) * Fraction(draw.randrange(1, 1000), 1000)
                case _:
                    values[name] = draw.random() < 0.5
        projects.append(values)
    return projects


def preferred(options: tuple[m.Option, ...], open_ones: list[int]) -> int:
    """The option that stands for the truth: the reference, else the one with the lowest error, else the first."""
    for number in open_ones:
        if options[number].reference:
            return number

    def error(number: int) -> tuple[bool, Fraction, int]:
        found = options[number].error
        return (found is None, found or Fraction(0), number)

    return min(open_ones, key=error)


class Calculation:
    """The numbers of one project. ``forced`` sends branch points down a branch whatever their conditions say;
    ``replay`` repeats earlier decisions; choices take their reference option. Of an overlap the first branch counts."""

    def __init__(
        self,
        graph: DecisionGraph,
        values: Mapping[str, Value],
        forced: Mapping[str, int] | None = None,
        replay: Decisions | None = None,
    ) -> None:
        self.graph = graph
        self.values = values
        self.made = Decisions()
        self._forced = forced or {}
        self._replay = replay
        self._known: dict[str, Fraction] = {}
        self._tables = {table.name: table for table in graph.model.tables}
        self._constants = {constant.name: constant for constant in graph.model.constants}

    def quantity(self, id: str) -> Fraction:
        """The number of an instance. Raises ``NoValue``."""
        found = self._known.get(id)
        if found is None:
            instance = self.graph.instances[id]
            found = self._body(instance.quantity.body, id, (), instance.elements)
            self._known[id] = found
        return found

    def branch(self, point: BranchPoint, branch: int) -> Fraction:
        """The number that one branch gives, whether or not it is open. Raises ``NoValue``."""
        made = walk.branches(point.body)[branch]
        path = tuple(point.id.split("/")[1:])
        return self._body(made.body, point.instance, (*path, made.name), self.graph.instances[point.instance].elements)

    def _body(self, body: m.Body, id: str, path: tuple[str, ...], elements: Element) -> Fraction:
        if isinstance(body, m.Formula):
            return self.number(body.expression, elements)
        if isinstance(body, m.Unknown):
            raise NoValue
        point = self.graph.branch_points["/".join((id, *path))]
        branch = walk.branches(body)[self.state(point)]
        return self._body(branch.body, id, (*path, branch.name), elements)

    def state(self, point: BranchPoint) -> int:
        """The branch taken at a branch point. Raises ``NoValue`` when none is open."""
        found = self.made.branches.get(point.id)
        if found is None:
            found = self._decide(point)
            self.made.branches[point.id] = found
        return found

    def _decide(self, point: BranchPoint) -> int:
        if point.id in self._forced:
            return self._forced[point.id]
        if self._replay is not None and point.id in self._replay.branches:
            return self._replay.branches[point.id]
        elements = self.graph.instances[point.instance].elements
        if point.leader:
            leader = self.graph.branch_points[point.leader]
            name = leader.branches[self.state(leader)]
            if name not in point.branches:
                raise NoValue
            return point.branches.index(name)
        open_ones: list[int] = []
        for number, condition in enumerate(point.conditions):
            if condition is None and point.kind != "choice":
                if not open_ones:
                    open_ones.append(number)
            elif condition is None or self.holds(condition, elements):
                open_ones.append(number)
        if not open_ones:
            raise NoValue(f"no branch of `{point.id}` is open" if point.is_written else "")
        if isinstance(point.body, m.Choice):
            return preferred(point.body.options, open_ones)
        return open_ones[0]

    # -- conditions ---------------------------------------------------------------------

    def holds(self, node: m.Condition, elements: Element) -> bool:
        """Whether a condition holds. Raises ``NoValue``."""
        match node:
            case m.Comparison(operator=operator, left=left, right=right):
                difference = self.number(left, elements) - self.number(right, elements)
                sign = (difference > 0) - (difference < 0)
                allowed = {"<": (-1,), "<=": (-1, 0), "=": (0,), "<>": (-1, 1), ">=": (0, 1), ">": (1,)}
                return sign in allowed[operator]
            case m.Is(subject=subject, values=values):
                return self.values[instance_id(subject.name, subject.index, elements)] in values
            case m.Holds(name=name, index=index):
                return self.values[instance_id(name, index, elements)] is True
            case m.Takes(quantity=name, index=index, option=option):
                point = self.graph.branch_points[instance_id(name, index, elements)]
                return point.branches[self.state(point)] == option
            case m.All(parts=parts):
                return all(self.holds(part, elements) for part in parts)
            case m.Some(parts=parts):
                return any(self.holds(part, elements) for part in parts)
            case m.Not(part=part):
                return not self.holds(part, elements)
            case m.Unknown():
                raise NoValue

    # -- numbers ------------------------------------------------------------------------

    def number(self, node: m.Expression, elements: Element) -> Fraction:
        """The number of an expression. Raises ``NoValue``."""
        match node:
            case m.Number(value=value):
                return value
            case m.Reference(kind="constant", name=name):
                return self.number(self._constants[name].expression, {})
            case m.Reference(kind="quantity", name=name, index=index):
                return self.quantity(instance_id(name, index, elements))
            case m.Reference(name=name, index=index):
                given = self.values[instance_id(name, index, elements)]
                if not isinstance(given, Fraction):
                    raise NoValue
                return given
            case m.Position(index=index):
                return Fraction(elements[index])
            case m.Scaled(operand=operand, factor=factor):
                return self.number(operand, elements) * factor
            case m.Negation(operand=operand):
                return -self.number(operand, elements)
            case m.Arithmetic(operator=operator, left=left, right=right):
                return _arithmetic(operator, self.number(left, elements), self.number(right, elements))
            case m.Function(name=name, arguments=arguments):
                return self._function(node, name, [self.number(each, elements) for each in arguments], elements)
            case m.Reduction(name=name, body=body, index=index):
                count = self.graph.sizes.get(index, 0)
                parts = [self.number(body, {**elements, index: element}) for element in range(1, count + 1)]
                if not parts:
                    raise NoValue
                match name:
                    case "min":
                        return min(parts)
                    case "max":
                        return max(parts)
                    case "sum":
                        return sum(parts, Fraction(0))
                    case "mean":
                        return sum(parts, Fraction(0)) / len(parts)
            case m.Lookup():
                return self._lookup(node, elements)
            case _:
                raise NoValue

    def _function(self, node: m.Function, name: str, arguments: list[Fraction], elements: Element) -> Fraction:
        first = arguments[0]
        match name:
            case "min":
                return min(arguments)
            case "max":
                return max(arguments)
            case "abs":
                return abs(first)
            case "floor" | "ceil" | "round":
                key = (id(node), tuple(sorted(elements.items())))
                if self._replay is not None and key in self._replay.wholes:
                    whole = self._replay.wholes[key]
                elif name == "round":
                    whole = symbols.nearest(first)
                else:
                    whole = math.floor(first) if name == "floor" else math.ceil(first)
                self.made.wholes[key] = whole
                return Fraction(whole)
        try:
            match name:
                case "sqrt":
                    root = symbols.call("sqrt", (symbols.number(first),)) if first >= 0 else None
                    if root is None:
                        raise NoValue
                    exact = root.constant
                    return exact if exact is not None else Fraction(math.sqrt(first))
                case "exp":
                    return Fraction(math.exp(first))
                case "ln":
                    return Fraction(math.log(first))
        except (ValueError, OverflowError):
            raise NoValue from None
        raise NoValue

    def _lookup(self, node: m.Lookup, elements: Element) -> Fraction:
        table = self._tables[node.table]
        key = (id(node), tuple(sorted(elements.items())))
        if self._replay is not None and key in self._replay.rows:
            row = self._replay.rows[key]
        else:
            row = self._row(table, node, elements)
        self.made.rows[key] = row
        return table.rows[row].value

    def _row(self, table: m.Table, node: m.Lookup, elements: Element) -> int:
        given: list[str | Fraction] = []
        for argument, key in zip(node.arguments, table.keys, strict=True):
            if key.bands:
                given.append(self.number(argument, elements))
            elif isinstance(argument, m.Value):
                given.append(argument.name)
            elif isinstance(argument, m.Reference):
                value = self.values[instance_id(argument.name, argument.index, elements)]
                given.append(value if isinstance(value, str) else "yes" if value is True else "no")
            else:
                raise NoValue
        for number, row in enumerate(table.rows):
            if all(_answers(label, each) for label, each in zip(row.labels, given, strict=True)):
                return number
        asked = ", ".join(_asked(key, each) for key, each in zip(table.keys, given, strict=True))
        raise NoValue(f"the table `{table.name}` has no row for {asked}")


def _asked(key: m.Key, given: str | Fraction) -> str:
    """``water 80 cm``, ``soil clay``."""
    if isinstance(given, str):
        return f"{key.name} {given}"
    number = f"{plain(given)} {key.unit.text}" if key.unit.text else percent(given) if abs(given) < 1 else plain(given)
    return f"{key.name} {number}"


def _answers(label: str | m.Band, given: str | Fraction) -> bool:
    if isinstance(label, m.Band):
        if isinstance(given, str):
            return False
        return (label.low is None or given > label.low) and (label.high is None or given <= label.high)
    return label == given


def _arithmetic(operator: str, a: Fraction, b: Fraction) -> Fraction:
    match operator:
        case "+":
            return a + b
        case "-":
            return a - b
        case "*":
            return a * b
        case "/":
            if b == 0:
                raise NoValue("it divides by zero")
            return a / b
    return _power(a, b)


def _power(a: Fraction, b: Fraction) -> Fraction:
    if a == 0 and b <= 0:
        if b == 0:
            return Fraction(1)
        raise NoValue
    if b.denominator == 1:
        size = max(a.numerator.bit_length(), a.denominator.bit_length())
        if abs(b) * size > MOST_BITS:
            raise NoValue
        return a ** int(b)
    if a < 0:
        raise NoValue
    try:
        return Fraction(float(a) ** float(b))
    except (OverflowError, ValueError):
        raise NoValue from None
