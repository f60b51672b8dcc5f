"""The condition of a lint rule's ``where``: the rulebook language's own conditions, over the attributes
of a piece of evidence instead of a rulebook's names."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Literal

from samesum.reading import tree
from samesum.reading.numbers import exact
from samesum.reading.read import Reader
from samesum.reading.sight import Mistake
from samesum.reading.syntax import parse_condition
from samesum.reading.words import listing, nearest
from samesum.spans import Span

Operator = Literal["<", "<=", ">", ">=", "=", "<>"]


@dataclass(frozen=True, slots=True)
class Attribute:
    """The attribute of that name."""

    name: str
    span: Span


@dataclass(frozen=True, slots=True)
class Plain:
    """A number; ``5 %`` is 0.05."""

    value: Fraction
    span: Span


Side = Attribute | Plain


@dataclass(frozen=True, slots=True)
class Compare:
    operator: Operator
    left: Side
    right: Side
    span: Span


@dataclass(frozen=True, slots=True)
class IsOneOf:
    """The attribute's text is one of ``values``."""

    attribute: Attribute
    values: tuple[str, ...]
    span: Span


@dataclass(frozen=True, slots=True)
class IsYes:
    """The yes/no attribute of that name."""

    attribute: Attribute
    span: Span


@dataclass(frozen=True, slots=True)
class AllOf:
    parts: tuple[WhereCondition, ...]
    span: Span


@dataclass(frozen=True, slots=True)
class AnyOf:
    parts: tuple[WhereCondition, ...]
    span: Span


@dataclass(frozen=True, slots=True)
class NotSo:
    part: WhereCondition
    span: Span


WhereCondition = Compare | IsOneOf | IsYes | AllOf | AnyOf | NotSo

# What an attribute holds: a number, a yes or no, or one of these texts (no texts listed: any text).
AttributeKind = Literal["number", "yes or no"] | tuple[str, ...]


@dataclass(frozen=True, slots=True)
class WhereMistake:
    """What is wrong; ``span`` counts lines and columns inside the condition's own text."""

    span: Span
    says: str
    remedy: str = ""


def parse_where(text: str, reader: Reader) -> WhereCondition | WhereMistake:
    """The condition that ``text`` writes, in the syntax of ``grammar/rulebook.lark``.

    Takes comparisons between attribute names and numbers, ``is`` and ``is one of``, yes/no names, and
    ``and``, ``or``, ``not`` with round brackets. Calculations, units and ``takes`` are mistakes.
    """
    found = parse_condition(text, reader.parser)
    place = tree.Place.of(text, 1)
    if isinstance(found, Mistake):
        return WhereMistake(place.span(found.start, found.end), found.says, found.remedy)
    try:
        return _condition(found, place, 0)
    except _Unfit as unfit:
        return WhereMistake(unfit.span, unfit.says, unfit.remedy)


class _Unfit(Exception):
    def __init__(self, span: Span, says: str, remedy: str = "") -> None:
        super().__init__(says)
        self.span, self.says, self.remedy = span, says, remedy


def _condition(node: tree.Tree, place: tree.Place, depth: int) -> WhereCondition:
    span = place.of_node(node)
    if depth > 60:
        raise _Unfit(span, "this is nested too deep")
    match node:
        case tree.Both():
            return AllOf(tuple(_condition(part, place, depth + 1) for part in node.parts), span)
        case tree.Either():
            return AnyOf(tuple(_condition(part, place, depth + 1) for part in node.parts), span)
        case tree.Negated():
            return NotSo(_condition(node.part, place, depth + 1), span)
        case tree.Grouped(unit=None):
            return _condition(node.inner, place, depth + 1)
        case tree.Use():
            return IsYes(Attribute(node.name.text, span), span)
        case tree.Compared():
            sides = [_side(side, place) for side in (node.first, *(side for _, side in node.rest))]
            found = [
                Compare(_operator(sign), sides[at], sides[at + 1], sides[at].span.to(sides[at + 1].span))
                for at, (sign, _) in enumerate(node.rest)
            ]
            return found[0] if len(found) == 1 else AllOf(tuple(found), span)
        case tree.IsValue(subject=tree.Use(name=name)):
            values = tuple(value.text for value in node.values)
            attribute = Attribute(name.text, place.of_node(name))
            is_one = _yes(attribute, values, span) or IsOneOf(attribute, values, span)
            return NotSo(is_one, span) if node.negated else is_one
        case _:
            raise _Unfit(span, "this cannot stand in a rule's condition",
                         "compare an attribute with a number, or ask whether it `is` something")  # fmt: skip


def _yes(attribute: Attribute, values: tuple[str, ...], span: Span) -> WhereCondition | None:
    """``name is yes`` and ``name is no``."""
    if values == ("yes",):
        return IsYes(attribute, span)
    return NotSo(IsYes(attribute, span), span) if values == ("no",) else None


def _operator(sign: str) -> Operator:
    operators: tuple[Operator, ...] = ("<", "<=", ">", ">=", "=", "<>")
    return next(each for each in operators if each == sign)


def _side(node: tree.Tree, place: tree.Place) -> Side:
    span = place.of_node(node)
    match node:
        case tree.Grouped(unit=None, inner=tree.Literal() | tree.Use() as inner_node):
            return _side(inner_node, place)
        case tree.Use():
            return Attribute(node.name.text, span)
        case tree.Minus(operand=tree.Literal(unit=None) as number):
            inner = _side(number, place)
            return Plain(-inner.value, span) if isinstance(inner, Plain) else inner
        case tree.Literal(unit=None):
            value = exact(node.text)
            if value is None:
                raise _Unfit(span, "this number is too long or too large")
            return Plain(value / 100 if node.percent else value, span)
        case tree.Literal():
            raise _Unfit(span, "numbers have no unit here", "leave the unit out")
        case _:
            says = "nothing is calculated in a rule's condition"
            raise _Unfit(span, says, "write the name of an attribute or a number")


# --- checking names against the attributes that there are -----------------------------------------


def unfit_names(where: WhereCondition, attributes: Mapping[str, AttributeKind]) -> tuple[WhereMistake, ...]:
    """What is wrong with the names in ``where``, given what attributes there are and what they hold."""
    match where:
        case AllOf(parts=parts) | AnyOf(parts=parts):
            return tuple(mistake for part in parts for mistake in unfit_names(part, attributes))
        case NotSo():
            return unfit_names(where.part, attributes)
        case Compare():
            sides = (side for side in (where.left, where.right) if isinstance(side, Attribute))
            found = [_unfit(side, attributes, "number", "it is no number to compare") for side in sides]
        case IsYes():
            found = [_unfit(where.attribute, attributes, "yes or no", "it is not yes or no")]
        case IsOneOf():
            found = [_unfit(where.attribute, attributes, "text", "it has no named values")]
            kind = attributes.get(where.attribute.name)
            if isinstance(kind, tuple) and kind:
                found += [_no_value(where, value, kind) for value in where.values if value not in kind]
    return tuple(mistake for mistake in found if mistake is not None)


def _unfit(
    attribute: Attribute, attributes: Mapping[str, AttributeKind], wanted: str, says: str
) -> WhereMistake | None:
    kind = attributes.get(attribute.name)
    if kind is None:
        close = nearest(attribute.name, attributes)
        remedy = f"did you mean `{close}`?" if close else f"there are {listing(sorted(attributes), 'and')}"
        return WhereMistake(attribute.span, f"there is no attribute `{attribute.name}`", remedy)
    if (wanted == "text") == isinstance(kind, tuple) and (wanted == "text" or kind == wanted):
        return None
    return WhereMistake(attribute.span, f"`{attribute.name}` cannot be asked like this: {says}")


def _no_value(where: IsOneOf, value: str, values: tuple[str, ...]) -> WhereMistake:
    close = nearest(value, values)
    remedy = f"did you mean `{close}`?" if close else f"it can be {listing(values)}"
    return WhereMistake(where.span, f"`{value}` is no value of `{where.attribute.name}`", remedy)
