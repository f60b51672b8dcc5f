"""Places: where a rulebook branches or leaves a value to somebody, each with an identity of its own.

A place is a branch point (all elements of an index together), a setting or a judgement; any other declared
name is one too, because findings and decisions can be about it. Its identity is its
id; what it *says* is its aspects, written down so that layout, comments, the order of options and the order
of phrases do not matter. Two drafts are compared aspect by aspect, and a decision of the review body
remembers a fingerprint of them.
"""

from __future__ import annotations

import hashlib
import re
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from decimal import Context, Decimal
from fractions import Fraction
from typing import Literal

from samesum.graph import BranchPoint, DecisionGraph
from samesum.reading import model as m
from samesum.reading import walk
from samesum.spans import Span

_TOKEN = re.compile(r'"[^"\n]*"|#[^\n]*|\[[^\]\n]*\]|[^\W\d]\w*|\d[\d_]*(?:\.\d[\d_]*)?(?:[eE][-+]?\d+)?|<=|>=|<>|\S')
_NO_CALLS = frozenset(("and", "or", "not", "is", "of", "to", "over"))
_COMMA = re.compile(r"(?<=\d),(?=\d{3})")  # for people only; what was decided does not hang on it
NOT_SAID_TWICE = ("clause",)
"""Aspects that a fingerprint leaves out: renumbering a clause changes nothing that was decided."""


@dataclass(frozen=True, slots=True)
class Source:
    """A rulebook's text in lines, to quote from."""

    lines: tuple[str, ...]

    @staticmethod
    def of(text: str) -> Source:
        return Source(tuple(text.split("\n")))

    def between(self, span: Span) -> str:
        """The text of a span, as written."""
        if span.line == span.end_line:
            return self.lines[span.line - 1][span.column - 1 : span.end_column - 1]
        first = self.lines[span.line - 1][span.column - 1 :]
        last = self.lines[span.end_line - 1][: span.end_column - 1]
        return "\n".join([first, *self.lines[span.line : span.end_line - 1], last])

    def quoted(self, span: Span) -> str:
        """The text of a span on one line, without comments, with single spaces."""
        parts: list[str] = []
        before = ""
        for token in _TOKEN.findall(self.between(span)):
            if token.startswith("#"):
                continue
            if token[0] == "[":
                token = f"[{' '.join(token[1:-1].split())}]"
            elif token[0].isdecimal():
                token = token.replace("_", "")
            called = token == "(" and before[:1].isalpha() and before not in _NO_CALLS
            if parts and token not in (",", ")") and before != "(" and not called:
                parts.append(" ")
            parts.append(token)
            before = token
        return "".join(parts)


@dataclass(frozen=True, slots=True)
class Place:
    """``kind`` is a branch point's, ``setting``, ``judgement`` or ``declared``; ``aspects`` in the order people read
    them. ``points`` are the branch points of all elements (none for a
    setting or a judgement)."""

    id: str
    kind: str
    clause: str
    wording: str
    span: Span
    aspects: Mapping[str, str]
    points: tuple[BranchPoint, ...] = ()

    @property
    def fingerprint(self) -> str:
        """Sixteen hexadecimal digits (SHA-256, cut) of all that is said here."""
        said = "\n".join(
            f"{name}: {_COMMA.sub('', text) if name == 'values' else text}"
            for name, text in sorted(self.aspects.items())
            if name not in NOT_SAID_TWICE
        )
        return hashlib.sha256(said.encode()).hexdigest()[:16]


def places_of(graph: DecisionGraph, source: Source) -> dict[str, Place]:
    """Every place of a rulebook by id, in reading order."""
    found: list[Place] = []
    together: dict[str, list[BranchPoint]] = {}
    for point in graph.branch_points.values():
        if point.is_written:
            together.setdefault(point.general_id, []).append(point)
    for id, points in together.items():
        found.append(_branch_point(id, points, graph, source))
    for setting in graph.model.settings:
        found.append(_setting(setting))
    for judgement in graph.model.judgements:
        found.append(_judgement(judgement))
    taken = {each.id for each in found}
    model = graph.written
    inputs: tuple[m.Setting | m.Judgement, ...] = (*model.settings, *model.judgements)
    others: tuple[m.Fact | m.Setting | m.Judgement | m.Constant | m.Table | m.Quantity | m.Index, ...]
    others = (*model.facts, *inputs, *model.constants, *model.tables, *model.quantities, *model.indices)
    for other in others:
        if other.name not in taken:
            about = other.about
            aspects = {"text": source.quoted(about.span), "clause": about.clause}
            found.append(Place(other.name, "declared", about.clause, about.note, about.name_span, aspects))
    return {each.id: each for each in sorted(found, key=lambda each: (each.span, each.id))}


def fingerprints(graph: DecisionGraph, text: str) -> dict[str, str]:
    """The fingerprint of every place, by id."""
    return {id: place.fingerprint for id, place in places_of(graph, Source.of(text)).items()}


@dataclass(frozen=True, slots=True)
class Taken:
    """What the rulebook takes where nobody decides; of a number the value in base units counts, not how it is
    written."""

    id: str
    kind: Literal["choice", "setting", "judgement"]
    clause: str
    wording: str
    span: Span
    value: tuple[object, ...]
    text: str


def taken_of(written: m.Model) -> dict[str, Taken]:
    """Every choice, setting and judgement that takes something, by id, in reading order. ``written``: the rulebook as
    it was read, since settled it has none of them."""
    found: list[Taken] = []

    def choices(body: m.Body, id: str, about: m.About) -> None:
        if isinstance(body, m.Choice) and body.takes:
            text = f"takes {body.takes}"
            found.append(Taken(id, "choice", about.clause, about.note, body.span, (body.takes,), text))
        for branch in walk.branches(body):
            choices(branch.body, f"{id}/{branch.name}", about)

    for quantity in written.quantities:
        choices(quantity.body, quantity.name, quantity.about)
    for setting in written.settings:
        if setting.takes is not None:
            found.append(_taken(setting.name, "setting", setting.about, setting.takes, setting.unit))
    for judgement in written.judgements:
        if judgement.takes is not None:
            found.append(_taken(judgement.name, "judgement", judgement.about, judgement.takes, m.PLAIN))
    return {each.id: each for each in sorted(found, key=lambda each: (each.span, each.id))}


def _taken(
    name: str, kind: Literal["setting", "judgement"], about: m.About, takes: Fraction | str | bool, unit: m.Unit
) -> Taken:
    value: tuple[object, ...] = (takes,)
    text = takes if isinstance(takes, str) else "yes" if takes else "no"
    if isinstance(takes, Fraction):
        value = (takes * unit.factor, unit.dimension)
        text = f"{exact(takes)} {unit.text}" if unit.text else exact_percent(takes) if abs(takes) <= 1 else exact(takes)
    return Taken(name, kind, about.clause, about.note, about.name_span, value, f"takes {text}")


def _branch_point(id: str, points: list[BranchPoint], graph: DecisionGraph, source: Source) -> Place:
    point = points[0]
    body = point.body
    index = graph.instances[point.instance].quantity.index
    aspects: dict[str, str] = {}
    match body:
        case m.Choice():
            aspects["who decides"] = body.by
            aspects["when it is fixed"] = {"validation": "at validation", "period": "each period", "": "not stated"}[
                body.timing
            ]
            if body.correlated is not None:
                aspects["errors correlated"] = exact_percent(body.correlated)
        case m.Follows():
            aspects["who decides"] = f"follows {body.quantity}"
        case m.Cases():
            aspects["who decides"] = "its conditions, in order" if body.in_order else "its conditions"
    if index:
        aspects["per"] = index
    settled = _settled_under(graph.written, point.quantity)
    for branch in walk.branches(body):
        aspects[f"{branch_noun(point)} {branch.name}"] = _branch(branch, source, settled.get(branch.span, ""))
    aspects["wording"] = " ".join(point.wording.split())
    aspects["clause"] = point.clause
    return Place(id, point.kind, point.clause, point.wording, point.span, aspects, tuple(points))


def branch_noun(point: BranchPoint) -> str:
    return "branch" if point.kind in ("cases", "cases in order") else "option"


def _settled_under(written: m.Model, quantity: str) -> dict[Span, str]:
    """What is taken under each branch of a quantity whose body is a choice that nobody makes, by the branch's line."""
    name = quantity.partition("/")[0]  # an option can be a quantity of its own once the choice is settled
    found: dict[Span, str] = {}
    for each in written.quantities:
        for body in walk.bodies(each.body) if each.name == name else ():
            for branch in walk.branches(body):
                if isinstance(branch.body, m.Choice) and branch.body.takes:
                    found[branch.span] = branch.body.takes
    return found


def _branch(branch: m.When | m.Option, source: Source, takes: str) -> str:
    said = []
    condition = walk.condition_of(branch)
    if condition is not None:
        said.append(f"when {source.quoted(condition.span)}")
    if isinstance(branch, m.Option):
        if branch.error is not None:
            said.append(f"error {exact_percent(branch.error)}")
        if branch.bias is not None:
            said.append(f"bias {exact_percent(branch.bias)}")
        if branch.cost is not None:
            said.append(f"cost {source.quoted(branch.cost.span)}")
        if branch.reference:
            said.append("reference")
    match branch.body:
        case _ if takes:
            said.append(f"a choice that takes {takes}")
        case m.Formula(expression=expression):
            said.append(f"= {source.quoted(expression.span)}")
        case m.Choice() | m.Follows():
            said.append("a choice")
        case m.Cases():
            said.append("cases")
        case _:
            said.append("?")
    return "; ".join(said)


def exact_percent(value: Fraction) -> str:
    """``35 %``, with every digit that was written."""
    return f"{exact(value * 100)} %"


def exact(value: Fraction) -> str:
    """``0.35``, with every digit that was written."""
    return f"{Context(prec=80).divide(Decimal(value.numerator), Decimal(value.denominator)).normalize():f}"


def _setting(setting: m.Setting) -> Place:
    aspects = {
        "who decides": setting.by,
        "values": domain_text(setting.domain, setting.unit),
        "wording": " ".join(setting.about.note.split()),
        "clause": setting.about.clause,
    }
    return Place(setting.name, "setting", setting.about.clause, setting.about.note, setting.about.name_span, aspects)


def _judgement(judgement: m.Judgement) -> Place:
    about = judgement.about
    aspects = {
        "who decides": judgement.by,
        "wording": " ".join(f"{judgement.wording} {about.note}".split()),
        "clause": about.clause,
    }
    return Place(judgement.name, "judgement", about.clause, judgement.wording, about.name_span, aspects)


def domain_text(domain: m.Domain, unit: m.Unit) -> str:
    """``5 to 50 km``, ``5 % to 20 %``, ``one of a or b``, ``yes or no``."""
    from samesum.reading.words import listing

    match domain:
        case m.YesNo():
            return "yes or no"
        case m.OneOf(values=values):
            return f"one of {listing(values)}"
        case m.Range(low=low, high=high):
            from samesum.written import percent, plain

            ends = [bound for bound in (low, high) if bound is not None]
            share = not unit.text and len(ends) == 2 and all(-1 <= bound <= 1 for bound in ends)
            low_text, high_text = (
                "any number" if bound is None else percent(bound) if share else plain(bound) for bound in (low, high)
            )
            if low is None and high is None:
                return "any number"
            return f"{low_text} to {high_text}" + (f" {unit.text}" if unit.text else "")
    raise AssertionError(domain)


def changes(before: Place, after: Place) -> tuple[tuple[str, str, str], ...]:
    """Aspects that differ: name, text before ("" when it was not there), text after ("" when it is gone)."""
    names: Iterable[str] = dict.fromkeys([*before.aspects, *after.aspects])
    return tuple(
        (name, before.aspects.get(name, ""), after.aspects.get(name, ""))
        for name in names
        if before.aspects.get(name, "") != after.aspects.get(name, "")
    )
