"""A calculation step by step: each quantity with its formula in names and in numbers, its branch and its clause."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

from samesum.evidence.routes.witness import Value, usual
from samesum.evidence.subjects.pointwise import Calculation, NoValue
from samesum.graph import DecisionGraph, Element, instance_id
from samesum.reading import model as m
from samesum.reading import walk
from samesum.settled.maker import WHERE_OPEN
from samesum.written import percent, plain

MOST_TERMS = 6
RANK = {"+": 1, "-": 1, "*": 2, "/": 2, "^": 4}


@dataclass(frozen=True, slots=True)
class Line:
    """One quantity. ``branches`` says which branch was taken at each of its branch points, with its condition;
    ``formula`` in names, ``numbers`` in numbers; ``value`` None where there is none, and then ``trouble``."""

    id: str
    unit: m.Unit
    clause: str
    branches: tuple[str, ...]
    formula: str
    numbers: str
    value: Fraction | None
    trouble: str = ""


def inputs_of(graph: DecisionGraph, values: Mapping[str, Value | tuple[Value, ...]]) -> dict[str, Value]:
    """A case's values by id; settings half-way and judgements yes where it gives none."""
    found: dict[str, Value] = {}
    both: tuple[m.Fact | m.Setting, ...] = (*graph.model.facts, *graph.model.settings)
    for each in both:
        given = values.get(each.name)
        if isinstance(given, tuple):
            found.update({f"{each.name}@{element}": value for element, value in enumerate(given, start=1)})
        else:
            found[each.name] = usual_middle(each.domain) if given is None else given
    for judgement in graph.model.judgements:
        value = values.get(judgement.name, True)
        found[judgement.name] = value if not isinstance(value, tuple) else True
    return found


def usual_middle(domain: m.Domain) -> Value:
    """Half-way through a domain of numbers; otherwise its first value, or yes."""
    if isinstance(domain, m.Range) and domain.low is not None and domain.high is not None:
        return (domain.low + domain.high) / 2
    return usual(domain)


def working(
    graph: DecisionGraph, values: Mapping[str, Value | tuple[Value, ...]], route: Mapping[str, str]
) -> list[Line]:
    """The steps to the result in the order of the calculation, on ``route`` and on the reference elsewhere. Exact."""
    calculation = _calculation(graph, values, route)
    assert graph.model.result is not None
    wording = _Wording(graph, calculation)
    lines: list[Line] = []
    _visit(graph.model.result.name, graph, calculation, wording, lines, set())
    return lines


def _calculation(
    graph: DecisionGraph, values: Mapping[str, Value | tuple[Value, ...]], route: Mapping[str, str]
) -> Calculation:
    forced = {
        id: graph.branch_points[id].branches.index(branch)
        for id, branch in route.items()
        if id in graph.branch_points and branch in graph.branch_points[id].branches
    }
    return Calculation(graph, inputs_of(graph, values), forced)


def why_no_result(
    graph: DecisionGraph, values: Mapping[str, Value | tuple[Value, ...]], route: Mapping[str, str]
) -> str:
    """Why a project has no result on a route, in a clause; "" where that is not known."""
    calculation = _calculation(graph, values, route)
    wording = _Wording(graph, calculation)
    try:
        for applies in graph.model.applies:
            if not calculation.holds(applies.condition, {}):
                clause = f" (clause {applies.about.clause})" if applies.about.clause else ""
                return f"`applies when {wording.condition(applies.condition, {})}`{clause} does not hold"
        assert graph.model.result is not None
        calculation.quantity(graph.model.result.name)
    except NoValue as error:
        return str(error)
    return ""


def _visit(
    id: str, graph: DecisionGraph, calculation: Calculation, wording: _Wording, lines: list[Line], seen: set[str]
) -> Fraction | None:
    if id in seen or id not in graph.instances:
        return None
    seen.add(id)
    instance = graph.instances[id]
    quantity = instance.quantity
    body: m.Body = quantity.body
    path: tuple[str, ...] = (id,)
    branches: list[str] = []
    trouble = ""
    while not isinstance(body, m.Formula):
        point_id = "/".join(path)
        if isinstance(body, m.Unknown):
            trouble = "the body could not be read"
            break
        point = graph.branch_points[point_id]
        for condition in point.conditions:
            if condition is not None:
                for other in _needed(condition, instance.elements, graph):
                    _visit(other, graph, calculation, wording, lines, seen)
        try:
            taken = calculation.state(point)
        except NoValue:
            trouble = f"no branch of {point_id} is open"
            break
        branch = walk.branches(body)[taken]
        where = f"{point_id}: {branch.name}"
        asked = walk.condition_of(branch)
        if asked is not None and not _unwritten(asked, instance.elements, graph):
            where += f" ({wording.condition(asked, instance.elements)}{_but(calculation, asked, instance.elements)})"
        branches.append(where)
        body, path = branch.body, (*path, branch.name)
    formula = numbers = ""
    value: Fraction | None = None
    if isinstance(body, m.Formula):
        for other in _needed(body.expression, instance.elements, graph):
            _visit(other, graph, calculation, wording, lines, seen)
        formula = wording.names(body.expression, instance.elements)
        try:
            value = calculation.number(body.expression, instance.elements)
            numbers = wording.numbers(body.expression, instance.elements)
        except NoValue as error:
            told = any(line.trouble == str(error) for line in lines)  # by a quantity that this one needs
            trouble = "the calculation has no value here" if told else str(error) or "the calculation has no value here"
    if WHERE_OPEN not in quantity.name:
        lines.append(Line(id, quantity.unit, quantity.about.clause, tuple(branches), formula, numbers, value, trouble))
    return value


def _unwritten(asked: m.Condition, elements: Element, graph: DecisionGraph) -> bool:
    """Whether a condition asks which option was the lowest, in words that nobody wrote."""
    return any("/" in id for id in _needed(asked, elements, graph))


def _but(calculation: Calculation, asked: m.Condition, elements: Element) -> str:
    """A word of caution where a route sends a project down a branch that is not open to it."""
    try:
        return "" if calculation.holds(asked, elements) else "; which does not hold here"
    except NoValue:
        return "; which has no value here"


def _needed(node: walk.Node, elements: Element, graph: DecisionGraph) -> list[str]:
    """The quantities that an expression or condition evaluates."""
    from samesum.graph import mentions

    return [id for kind, id in mentions(node, elements, graph.sizes) if kind == "value"]


@dataclass(slots=True)
class _Wording:
    graph: DecisionGraph
    calculation: Calculation

    def names(self, node: m.Expression, elements: Element) -> str:
        return self._said(node, elements, False, 0)

    def numbers(self, node: m.Expression, elements: Element) -> str:
        return self._said(node, elements, True, 0)

    def _said(self, node: m.Expression, elements: Element, numbers: bool, rank: int) -> str:
        match node:
            case m.Number(value=value, unit=unit):
                return in_unit(value, unit)
            case m.Scaled(operand=operand):
                return self._said(operand, elements, numbers, rank)
            case m.Value(name=name):
                return name
            case m.Position(index=index):
                return str(elements[index]) if numbers else f"position({index})"
            case m.Reference(name=name, kind=kind, index=index, unit=unit):
                if kind == "fact" and name in self._named():
                    return str(self.calculation.values.get(instance_id(name, index, elements))) if numbers else name
                if not numbers:
                    return instance_id(name, index, elements) if index in elements else name
                return in_unit(self.calculation.number(node, elements), unit)
            case m.Lookup(table=table, arguments=arguments, unit=unit):
                if numbers:
                    return in_unit(self.calculation.number(node, elements), unit)
                return f"{table}({', '.join(self._said(each, elements, False, 0) for each in arguments)})"
            case m.Negation(operand=operand):
                return _bracketed(f"-{self._said(operand, elements, numbers, 4)}", 3, rank)
            case m.Arithmetic(operator=operator, left=left, right=right):
                own = RANK[operator]
                one = self._said(left, elements, numbers, own + (operator == "^"))
                other = self._said(right, elements, numbers, own + 1)
                return _bracketed(f"{one} {operator} {other}", own, rank)
            case m.Function(name=name, arguments=arguments):
                return f"{name}({', '.join(self._said(each, elements, numbers, 0) for each in arguments)})"
            case m.Reduction():
                return self._reduced(node, elements, numbers, rank)
            case _:
                return "?"

    def _reduced(self, node: m.Reduction, elements: Element, numbers: bool, rank: int) -> str:
        count = self.graph.sizes.get(node.index, 0)
        if not numbers:
            inner = self._said(
                node.body, {key: value for key, value in elements.items() if key != node.index}, False, 0
            )
            return f"{node.name}({inner} over {node.index})"
        if count > MOST_TERMS:
            return in_unit(self.calculation.number(node, elements), node.unit)
        terms = [
            self._said(node.body, {**elements, node.index: element}, True, 1 if node.name == "sum" else 0)
            for element in range(1, count + 1)
        ]
        if node.name == "sum":
            return _bracketed(" + ".join(terms), 1, rank) if count > 1 else terms[0]
        return f"{node.name}({', '.join(terms)})"

    def _named(self) -> set[str]:
        return {fact.name for fact in self.graph.model.facts if not isinstance(fact.domain, m.Range)}

    def condition(self, node: m.Condition, elements: Element, inside: str = "") -> str:
        """A condition in the rulebook's own words."""
        match node:
            case m.Comparison(operator=operator, left=left, right=right):
                return f"{self.names(left, elements)} {operator} {self.names(right, elements)}"
            case m.Is(subject=subject, values=values):
                listed = values[0] if len(values) == 1 else f"one of {', '.join(values[:-1])} or {values[-1]}"
                return f"{instance_id(subject.name, subject.index, elements)} is {listed}"
            case m.Holds(name=name, index=index):
                return instance_id(name, index, elements)
            case m.Takes(quantity=name, index=index, option=option):
                return f"{instance_id(name, index, elements)} takes {option}"
            case m.All(parts=parts):
                said = " and ".join(self.condition(part, elements, "and") for part in parts)
                return f"({said})" if inside == "not" else said
            case m.Some(parts=parts):
                said = " or ".join(self.condition(part, elements, "or") for part in parts)
                return f"({said})" if inside in ("and", "not") else said
            case m.Not(part=part):
                return f"not {self.condition(part, elements, 'not')}"
            case _:
                return "?"


def in_unit(value: Fraction, unit: m.Unit) -> str:
    """``12 [ha]``; a plain share below one as ``35 %`` where it is a short one."""
    if unit.text:
        return f"{plain(value)} [{unit.text}]"
    if 0 < abs(value) < 1 and (value * 1000).denominator == 1:
        return percent(value)
    return plain(value)


def _bracketed(text: str, own: int, rank: int) -> str:
    return f"({text})" if own < rank else text
