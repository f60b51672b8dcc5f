"""CASES.yaml → projects whose values are checked against a rulebook, and every mistake in them.

Numbers stand in the declared unit afterwards; a text with a unit (``12 ppt``) is checked and converted. A
project gives a value for every fact that the rulebook uses; a judgement or setting that it gives is fixed.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from pathlib import Path

from samesum.problems import Problem, in_order
from samesum.reading import model as m
from samesum.reading import walk
from samesum.reading.domains import domain_words, in_percent, lies_inside, unit_behind
from samesum.reading.numbers import as_written
from samesum.reading.prescribed import prescribed_for, prescribed_words, taken_at
from samesum.reading.words import listing, nearest
from samesum.reading.written_numbers import Numbers
from samesum.reading.yaml_text import Entry, Fields, Listing, Node, Scalar, read_yaml
from samesum.spans import START, Span

Value = Fraction | str | bool
"""A number in its declared unit, one of the declared names, or yes (True) or no (False)."""

YES = {"yes": True, "true": True, "no": False, "false": False}


@dataclass(frozen=True, slots=True)
class Expected:
    """A worked example: ``value`` in the result's unit with as many decimals as written, and the branches that
    were taken; where the route names none, the reference is meant."""

    value: Fraction | None
    decimals: int
    route: tuple[tuple[str, str], ...]
    span: Span


@dataclass(frozen=True, slots=True)
class Case:
    """One project. ``values`` by name; a name per index has a tuple with one value an element."""

    name: str
    values: Mapping[str, Value | tuple[Value, ...]]
    expected: Expected | None
    span: Span


@dataclass(frozen=True, slots=True)
class Cases:
    file: str
    cases: tuple[Case, ...]


def read_cases(path: Path, model: m.Model) -> tuple[Cases, tuple[Problem, ...]]:
    """The projects of a YAML file and all that is wrong with them. Cases with a mistake are left out."""
    tree, problems = read_yaml(path)
    made, more = cases_from(tree, str(path), model) if tree is not None else (Cases(str(path), ()), ())
    if tree is None and not problems:
        more = (Problem(str(path), START, "the file is empty", "begin it with `cases:`", "file"),)
    return made, in_order((*problems, *more))


def cases_from(tree: Node, file: str, model: m.Model) -> tuple[Cases, tuple[Problem, ...]]:
    """The same from a tree that was read already."""
    reader = _Reader(file, model, Numbers(file), branch_points(model), taken_at(model, branch_points(model)))
    found = reader.whole(tree)
    return Cases(file, tuple(found)), in_order(reader.problems)


def used_names(model: m.Model) -> frozenset[str]:
    """Every declared name that the rulebook's result or applicability can lead to."""
    quantities = {each.name: each for each in model.quantities}
    stack = [] if model.result is None else [model.result.name]
    for applies in model.applies:
        stack += _names(applies.condition)
    found: set[str] = set()
    while stack:
        name = stack.pop()
        if name in found:
            continue
        found.add(name)
        if name in quantities:
            for body in walk.bodies(quantities[name].body):
                if isinstance(body, m.Follows):
                    stack.append(body.quantity)
            for node in walk.written_in(quantities[name].body):
                stack += _names(node)
    return frozenset(found)


def _names(node: walk.Node) -> list[str]:
    found = []
    for each in walk.inside(node):
        if isinstance(each, m.Reference | m.Holds):
            found.append(each.name)
        elif isinstance(each, m.Takes):
            found.append(each.quantity)
    return found


def branch_points(model: m.Model) -> dict[str, tuple[str, ...]]:
    """The branches of every branch point by its id (``stock@2/plots`` for an element)."""
    sizes = {each.name: each.most for each in model.indices}
    found: dict[str, tuple[str, ...]] = {}

    def inside(body: m.Body, id: str) -> None:
        branches = walk.branches(body)
        if branches:
            found[id] = tuple(branch.name for branch in branches)
        for branch in branches:
            inside(branch.body, f"{id}/{branch.name}")

    for quantity in model.quantities:
        for element in range(1, sizes.get(quantity.index, 0) + 1) if quantity.index else (0,):
            inside(quantity.body, f"{quantity.name}@{element}" if quantity.index else quantity.name)
    return found


def matching(points: Mapping[str, tuple[str, ...]], id: str) -> list[str]:
    """The branch point of an id; of a quantity per index without an element's number, those of all elements."""
    if id in points:
        return [id]
    head, slash, rest = id.partition("/")
    return [each for each in points if each.partition("@")[0] == head and each.partition("/")[1:] == (slash, rest)]


@dataclass(slots=True)
class _Reader:
    file: str
    model: m.Model
    parser: Numbers
    points: Mapping[str, tuple[str, ...]]
    taken: Mapping[str, str]
    problems: list[Problem] = field(default_factory=list)

    def report(self, span: Span, says: str, remedy: str = "", kind: str = "value") -> None:
        self.problems.append(Problem(self.file, span, says, remedy, kind))

    def whole(self, tree: Node) -> list[Case]:
        form = "write `cases:` and below it a list, each project beginning with `- name: ...`"
        if not isinstance(tree, Fields) or tree.get("cases") is None:
            self.report(tree.span, "the file has no `cases`", form, "shape")
            return []
        for entry in tree:
            if entry.key.text != "cases":
                self.unknown(entry.key, ("cases",), "part of a file of cases")
        listed = tree.get("cases")
        if not isinstance(listed, Listing) or not listed.items:
            self.report(
                tree.span if listed is None else listed.span, "`cases` is not a list of projects", form, "shape"
            )
            return []
        found: list[Case] = []
        names: dict[str, int] = {}
        for number, item in enumerate(listed.items, start=1):
            if not isinstance(item, Fields):
                self.report(item.span, "a project is expected here: names with their values", form, "shape")
                continue
            before = len(self.problems)
            case = self.case(item, number)
            if case.name in names:
                says = f"two projects are called {case.name} (first on line {names[case.name]})"
                self.report(case.span, says, "give one of them another name")
            names.setdefault(case.name, item.span.line)
            if len(self.problems) == before:
                found.append(case)
        return found

    def unknown(self, key: Scalar, known: tuple[str, ...], what: str) -> None:
        close = nearest(key.text, known)
        remedy = f"did you mean `{close}`?" if close else f"known here: {listing(known, 'and')}"
        self.report(key.span, f"`{key.text}` is no {what}", remedy, "name")

    # -- one project --------------------------------------------------------------------

    def case(self, item: Fields, number: int) -> Case:
        name = f"case {number}"
        given = item.get("name")
        if isinstance(given, Scalar) and given.text.strip():
            name = given.text.strip()
        elif given is not None:
            self.report(given.span, "the project's name is no text", "write `name: ...`", "shape")
        model = self.model
        every: list[m.Fact | m.Setting | m.Judgement] = [*model.facts, *model.settings, *model.judgements]
        declared = {each.name: each for each in every}
        values: dict[str, Value | tuple[Value, ...]] = {}
        lengths: dict[str, tuple[int, str]] = {}
        expected: Expected | None = None
        for entry in item:
            key = entry.key.text
            if key == "name":
                continue
            if key == "expected":
                expected = self.expected(entry)
            elif key not in declared:
                self.not_declared(entry.key, tuple(declared))
            else:
                found = self.entry(declared[key], entry, lengths)
                prescribed = None if isinstance(declared[key], m.Fact) else prescribed_for(declared[key])
                if prescribed is not None and found is not None:
                    if found != prescribed:
                        self.prescribed(declared[key], entry)
                elif found is not None:
                    values[key] = found
        used = used_names(self.model)
        written = {entry.key.text for entry in item}
        missing = [fact.name for fact in self.model.facts if fact.name in used and fact.name not in written]
        if missing:
            what = f"fact {missing[0]} is" if len(missing) == 1 else f"facts {listing(missing, 'and')} are"
            self.report(self.first(item), f"{name}: the {what} missing", "add a line for each: `name: value`")
        return Case(name, values, expected, self.first(item))

    def first(self, item: Fields) -> Span:
        entry = next(iter(item), None)
        return item.span if entry is None else entry.key.span

    def prescribed(self, declared: m.Fact | m.Setting | m.Judgement, entry: Entry) -> None:
        says, remedy = prescribed_words(declared)
        self.report(entry.value.span, says, remedy)

    def not_declared(self, key: Scalar, known: tuple[str, ...]) -> None:
        others = {
            "constant": {each.name for each in self.model.constants},
            "quantity": {each.name for each in self.model.quantities},
            "table": {each.name for each in self.model.tables},
        }
        for kind, names in others.items():
            if key.text in names:
                says = f"`{key.text}` is a {kind} of the rulebook and is not given by a project"
                self.report(key.span, says, "leave it out", "name")
                return
        close = nearest(key.text, (*known, "name", "expected"))
        remedy = (
            f"did you mean `{close}`?" if close else "a project gives facts, judgements and settings of the rulebook"
        )
        self.report(key.span, f"the rulebook has no fact, judgement or setting `{key.text}`", remedy, "name")

    def entry(
        self, declared: m.Fact | m.Setting | m.Judgement, entry: Entry, lengths: dict[str, tuple[int, str]]
    ) -> Value | tuple[Value, ...] | None:
        node = entry.value
        if isinstance(declared, m.Fact) and declared.index:
            index = next((each for each in self.model.indices if each.name == declared.index), None)
            if not isinstance(node, Listing):
                says = f"{declared.name} is per {declared.index}: a list is expected"
                self.report(node.span, says, f"write `{declared.name}: [first, second]`", "shape")
                return None
            count = len(node.items)
            if index is not None and not 1 <= count <= index.most:
                says = f"{declared.name} has {count} values, and a project has at most {index.most} of {index.name}"
                self.report(node.span, says, f"give 1 to {index.most} values")
                return None
            other = lengths.setdefault(declared.index, (count, declared.name))
            if other[0] != count:
                says = f"{declared.name} has {count} values and {other[1]} has {other[0]}, both per {declared.index}"
                self.report(node.span, says, "give both the same number of values")
                return None
            found = [self.value(declared, item) for item in node.items]
            return None if None in found else tuple(each for each in found if each is not None)
        return self.value(declared, node)

    def value(self, declared: m.Fact | m.Setting | m.Judgement, node: Node) -> Value | None:
        if not isinstance(node, Scalar):
            self.report(node.span, f"{declared.name}: one value is expected here", "write it without brackets", "shape")
            return None
        text = node.text.strip()
        if not text:
            self.report(node.span, f"{declared.name} has no value", "write one, or leave the line out")
            return None
        domain = m.YesNo() if isinstance(declared, m.Judgement) else declared.domain
        if isinstance(domain, m.YesNo):
            if text.lower() in YES:
                return YES[text.lower()]
            self.report(node.span, f"{declared.name} is yes or no, not `{text}`", "write yes or no")
            return None
        if isinstance(domain, m.OneOf):
            if text in domain.values:
                return text
            close = nearest(text, domain.values)
            remedy = f"did you mean `{close}`?" if close else f"write one of {listing(domain.values)}"
            self.report(node.span, f"{declared.name} is {listing(domain.values)}, not `{text}`", remedy)
            return None
        assert not isinstance(declared, m.Judgement)
        number = self.number(text, declared.unit, declared.name, node.span)
        if number is not None and not lies_inside(number, domain):
            says = f"{declared.name} is {as_written(number)}{unit_behind(declared.unit)}, outside its domain"
            remedy = f"the rulebook says {domain_words(domain, declared.unit)}"
            if in_percent(domain, declared.unit) and "%" not in text and lies_inside(number / 100, domain):
                remedy += f"; write `{as_written(number)} %`"
            self.report(node.span, says, remedy)
            return None
        return number

    def number(self, text: str, unit: m.Unit, name: str, span: Span) -> Fraction | None:
        found = self.parser.read(text, unit, name, span)
        self.problems += self.parser.problems
        self.parser.problems.clear()
        return found

    # -- worked examples ----------------------------------------------------------------

    def expected(self, entry: Entry) -> Expected | None:
        node = entry.value
        if not isinstance(node, Fields):
            self.report(
                node.span, "`expected` holds a value and a route", "write `value:` and `route:` below it", "shape"
            )
            return None
        value: Fraction | None = None
        decimals = 0
        route: list[tuple[str, str]] = []
        for part in node:
            if part.key.text == "value":
                value, decimals = self.expected_value(part)
            elif part.key.text == "route":
                route = self.route(part.value)
            else:
                self.unknown(part.key, ("value", "route"), "part of `expected`")
        return Expected(value, decimals, tuple(route), entry.key.span)

    def expected_value(self, part: Entry) -> tuple[Fraction | None, int]:
        unit = self.model.result.unit if self.model.result is not None else m.PLAIN
        if not isinstance(part.value, Scalar):
            self.report(part.value.span, "the expected value is one number", "write it without brackets", "shape")
            return None, 0
        text = part.value.text.strip()
        _, point, after = text.partition(".")
        digits = re.match(r"[\d_]*", after) if point else None
        return self.number(text, unit, "value", part.value.span), len(digits[0].replace("_", "")) if digits else 0

    def route(self, node: Node) -> list[tuple[str, str]]:
        if not isinstance(node, Fields):
            self.report(node.span, "the route names branch points and branches", "write `quantity: option`", "shape")
            return []
        found = []
        for entry in node:
            points = matching(self.points, entry.key.text)
            if not points:
                close = nearest(entry.key.text, self.points)
                remedy = f"did you mean `{close}`?" if close else "`samesum register --all` lists the branch points"
                self.report(entry.key.span, f"`{entry.key.text}` is no branch point", remedy, "name")
                continue
            branches = self.points[points[0]]
            branch = entry.value.text.strip() if isinstance(entry.value, Scalar) else ""
            if branch not in branches:
                close = nearest(branch, branches)
                remedy = f"did you mean `{close}`?" if close else f"its branches are {listing(branches, 'and')}"
                self.report(entry.value.span, f"`{entry.key.text}` has no branch `{branch}`", remedy, "name")
                continue
            takes = self.taken.get(points[0], "")
            if takes and takes != branch:
                says = f"the rulebook itself takes {takes} at `{entry.key.text}`, and nobody chooses there"
                self.report(entry.key.span, says, "leave it out of the route", "name")
            elif not takes:
                found += [(point, branch) for point in points]
        return found
