"""An expression with its unit, and how several are brought into one unit."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

from samesum.reading import tree
from samesum.reading.model import PLAIN, Expression, Number, Scaled, Unit, Unknown
from samesum.reading.scope import Declared, Scope
from samesum.reading.units import conversion, multiplied, same_dimension


@dataclass(frozen=True, slots=True)
class Typed:
    """An expression and its unit: None when unknown (a problem was reported), ``zero`` when it is a
    literal zero, which has every unit."""

    expression: Expression
    unit: Unit | None
    zero: bool = False


def say_unit(unit: Unit) -> str:
    return f"[{unit.text}]" if unit.text else "a plain number"


def fit(typed: Typed, unit: Unit | None, node: tree.Node, scope: Scope, what: str) -> Expression:
    """The expression in ``unit``; reports a mismatch as "``what`` …"."""
    if typed.unit is None or unit is None:
        return typed.expression
    if typed.zero and not same_dimension(typed.unit, unit):
        return _rezero(typed.expression, unit)
    if not same_dimension(typed.unit, unit):
        remedy = _bridge(typed.unit, unit, scope)
        wanted = f"{what} {say_unit(unit)}"
        if not unit.text:
            wanted = what.replace(" is in", " has no unit").replace(" are in", " have no unit")
            wanted = f"{what} a plain number" if wanted == what else wanted
        scope.report(node, f"{wanted}, but this is {say_unit(typed.unit)}", remedy, "unit")
        return typed.expression
    return scaled(typed.expression, typed.unit, unit)


def _bridge(found: Unit, wanted: Unit, scope: Scope) -> str:
    if not found.text and wanted.text:
        return f"write the unit behind the number, as in [{wanted.text}], or multiply by something in [{wanted.text}]"
    factor = multiplied(wanted, found, scope.units, -1)
    if factor.text and "(" not in factor.text:
        return f"check the formula, or multiply by something in {say_unit(factor)}"
    return "check the formula and the units of what it uses"


def scaled(expression: Expression, source: Unit, target: Unit) -> Expression:
    factor = conversion(source, target)
    if factor == 1:
        return expression
    if isinstance(expression, Number):
        return Number(expression.value * factor, target, expression.span)
    return Scaled(expression, factor, target, expression.span)


def _rezero(expression: Expression, unit: Unit) -> Expression:
    return Number(Fraction(0), unit, expression.span)


def unknown(scope: Scope, node: tree.Node) -> Typed:
    return Typed(Unknown(scope.span(node)), None)


def agreed(terms: list[tuple[Typed, tree.Tree]], scope: Scope, how: str) -> tuple[list[Expression], Unit | None, bool]:
    """The expressions in one unit, that of the first that has one; reports those that do not fit."""
    known = [(typed.unit, node) for typed, node in terms if typed.unit is not None and not typed.zero]
    if not known:
        unknown = any(typed.unit is None for typed, _ in terms)
        return [typed.expression for typed, _ in terms], None if unknown else PLAIN, not unknown
    unit = known[0][0]
    parts: list[Expression] = []
    fits = all(typed.unit is not None for typed, _ in terms)
    for typed, node in terms:
        if typed.unit is None:
            parts.append(typed.expression)
        elif typed.zero:
            parts.append(_rezero(typed.expression, unit) if typed.unit != unit else typed.expression)
        elif not same_dimension(typed.unit, unit):
            scope.report(node, f"{say_unit(unit)} and {say_unit(typed.unit)} cannot be {how}",
                         _bridge(typed.unit, unit, scope), "unit")  # fmt: skip
            parts.append(typed.expression)
            fits = False
        else:
            parts.append(scaled(typed.expression, typed.unit, unit))
    return parts, unit if fits else None, False


def index_is_known(word: tree.Word, declared: Declared, scope: Scope, number: bool = True) -> bool:
    """Whether the element meant by a name per index is known here; reports it when not. ``number`` tells
    whether the name stands for a number, which could be summed."""
    if not declared.index or declared.index in scope.indices:
        return True
    per = declared.index
    remedy = f"use it in a quantity per {per}"
    if number:
        remedy = f"write for instance `sum({word.text} over {per})`, or {remedy}"
    scope.report(word, f"`{word.text}` is per {per}, and here it is not said for which {per}", remedy)
    return False
