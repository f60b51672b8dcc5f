"""Expressions: every name looked up, every unit worked out.

``+ - min max`` and comparisons need one dimension and convert; a literal zero has every unit.
"""

from __future__ import annotations

from fractions import Fraction
from typing import Literal, cast

from samesum.reading import tree
from samesum.reading.lookups import resolve_lookup
from samesum.reading.model import (
    PLAIN,
    Arithmetic,
    Expression,
    Function,
    Negation,
    Number,
    Position,
    Reduction,
    Reference,
    Unit,
)
from samesum.reading.scope import Declared, Scope
from samesum.reading.typed import Typed, agreed, fit, index_is_known, say_unit, scaled, unknown
from samesum.reading.units import multiplied, raised
from samesum.reading.words import FUNCTIONS, listing, nearest

_REDUCTIONS = ("sum", "mean", "min", "max")
_KEEP_UNIT = ("abs", "round", "floor", "ceil")
_NEED_PLAIN = ("exp", "ln")
# Longer chains of + or * are built as a balanced tree, so that later stages need not go deep.
_LONG_CHAIN = 40
LARGEST_POWER = 1000
LARGEST_UNIT_POWER = 12


_Operator = Literal["+", "-", "*", "/"]
_Named = Literal["fact", "setting", "constant", "quantity"]
_Over = Literal["sum", "mean", "min", "max"]


def resolve_expression(node: tree.Tree, scope: Scope) -> Typed:
    """The expression that ``node`` writes; reports what is wrong with it."""
    if scope.too_deep(node):
        return unknown(scope, node)
    inner = scope.deeper()
    match node:
        case tree.Literal():
            return _number(node, scope)
        case tree.Use():
            return _name(node.name, scope)
        case tree.Grouped():
            return _grouped(node, inner)
        case tree.Minus():
            typed = resolve_expression(node.operand, inner)
            if isinstance(typed.expression, Number):
                number = typed.expression
                return Typed(Number(-number.value, number.unit, scope.span(node)), typed.unit, typed.zero)
            return Typed(Negation(typed.expression, typed.unit or PLAIN, scope.span(node)), typed.unit, typed.zero)
        case tree.Chain():
            return _chain(node, inner)
        case tree.Power():
            return _power(node, inner)
        case tree.Call():
            return _call(node, inner)
        case tree.Reduce():
            return _reduction(node, inner)
        case _:
            scope.report(node, "a condition stands where a number belongs", "conditions belong after `when`")
            return unknown(scope, node)


# --- leaves ----------------------------------------------------------------------------------


def _number(node: tree.Literal, scope: Scope) -> Typed:
    value = scope.number(node)
    if value is None:
        return unknown(scope, node)
    if node.unit is None:
        return Typed(Number(value, PLAIN, scope.span(node)), PLAIN, zero=value == 0 and not node.percent)
    unit = scope.unit(node.unit)
    if node.percent and unit is not None:
        scope.report(node.unit, "a number in % has no other unit", "leave out the % or the unit", "unit")
        return unknown(scope, node)
    return Typed(Number(value, unit or PLAIN, scope.span(node)), unit)


def _name(word: tree.Word, scope: Scope) -> Typed:
    declared = scope.find(word, ("fact", "setting", "constant", "quantity"))
    if declared is None or declared.kind == "unreadable":
        return unknown(scope, word)
    if (trouble := _no_number(declared)) is not None:
        scope.report(word, *trouble)
        return unknown(scope, word)
    if scope.only_constants and declared.kind != "constant":
        says = f"`{word.text}` is a {declared.kind}: a constant may use numbers and other constants only"
        scope.report(word, says, "make it a quantity instead")
        return unknown(scope, word)
    if not index_is_known(word, declared, scope):
        return unknown(scope, word)
    kind = cast(_Named, declared.kind)
    unit = declared.unit or PLAIN
    return Typed(Reference(word.text, kind, declared.index, unit, scope.span(word)), declared.unit)


def _no_number(declared: Declared) -> tuple[str, str] | None:
    name = declared.name
    if declared.kind == "judgement" or declared.yes_no:
        what = "a judgement" if declared.kind == "judgement" else f"a yes/no {declared.kind}"
        return f"`{name}` is {what} and has no number", f"ask it in a condition: `when {name}` or `when not {name}`"
    if declared.kind == "table":
        return f"`{name}` is a table", f"look something up in it: `{name}(…)` with what it is by in the brackets"
    if declared.kind == "index":
        return f"`{name}` is an index and has no number", f"write `position({name})` for the number of the element"
    if declared.values:
        return (
            f"`{name}` has named values and no number",
            f"ask it in a condition, as in `when {name} is {declared.values[0]}`, or look it up in a table",
        )
    return None


def _grouped(node: tree.Grouped, scope: Scope) -> Typed:
    typed = resolve_expression(node.inner, scope)
    if node.unit is None or typed.unit is None:
        return typed
    unit = scope.unit(node.unit)
    if unit is None:
        return Typed(typed.expression, None)
    if typed.unit != PLAIN:
        scope.report(node.unit, f"what is in the brackets already has a unit: {say_unit(typed.unit)}",
                     "leave out the unit behind the brackets", "unit")  # fmt: skip
        return Typed(typed.expression, None)
    if isinstance(typed.expression, Number):
        return Typed(Number(typed.expression.value, unit, scope.span(node)), unit)
    one = Number(Fraction(1), unit, scope.span(node.unit))
    return Typed(Arithmetic("*", typed.expression, one, unit, scope.span(node)), unit)


# --- operators -------------------------------------------------------------------------------


def _chain(node: tree.Chain, scope: Scope) -> Typed:
    terms = [(resolve_expression(node.first, scope), node.first)]
    terms += [(resolve_expression(term, scope), term) for _, term in node.rest]
    signs = [sign for sign, _ in node.rest]
    if signs[0] in "+-":
        parts, unit, zero = agreed(terms, scope, "added or subtracted")
        units = [unit] * len(parts)
        plus, minus = "+", "-"
    else:
        parts = [typed.expression for typed, _ in terms]
        units = [typed.unit for typed, _ in terms]
        plus, minus = "*", "/"
        zero = terms[0][0].zero
    if len(parts) > _LONG_CHAIN:
        expression, total = _balanced(parts, units, signs, plus, minus, scope, node)
        return Typed(expression, total, zero and plus == "+")
    total = units[0]
    expression = parts[0]
    for sign, part, unit, term in zip(signs, parts[1:], units[1:], [term for _, term in node.rest], strict=True):
        total = _joined(total, unit, sign, scope)
        operator = cast(_Operator, sign)
        span = scope.place.span(node.start, term.end)
        expression = Arithmetic(operator, expression, part, total or PLAIN, span)
    return Typed(expression, total, zero and plus == "+")


def _joined(left: Unit | None, right: Unit | None, sign: str, scope: Scope) -> Unit | None:
    if left is None or right is None:
        return None
    if sign in "+-":
        return left
    return multiplied(left, right, scope.units, 1 if sign == "*" else -1)


def _balanced(
    parts: list[Expression],
    units: list[Unit | None],
    signs: list[str],
    plus: str,
    minus: str,
    scope: Scope,
    node: tree.Chain,
) -> tuple[Expression, Unit | None]:
    """(a + c + …) − (b + d + …), each side halved again and again."""
    span = scope.span(node)

    def tree_of(items: list[tuple[Expression, Unit | None]]) -> tuple[Expression, Unit | None]:
        if len(items) == 1:
            return items[0]
        half = len(items) // 2
        (left, left_unit), (right, right_unit) = tree_of(items[:half]), tree_of(items[half:])
        unit = _joined(left_unit, right_unit, plus, scope)
        return Arithmetic(cast(_Operator, plus), left, right, unit or PLAIN, span), unit

    pairs = list(zip(parts, units, strict=True))
    above = [pairs[0]] + [pair for pair, sign in zip(pairs[1:], signs, strict=True) if sign == plus]
    below = [pair for pair, sign in zip(pairs[1:], signs, strict=True) if sign == minus]
    left, left_unit = tree_of(above)
    if not below:
        return left, left_unit
    right, right_unit = tree_of(below)
    unit = _joined(left_unit, right_unit, minus, scope)
    return Arithmetic(cast(_Operator, minus), left, right, unit or PLAIN, span), unit


def _power(node: tree.Power, scope: Scope) -> Typed:
    base = resolve_expression(node.base, scope)
    exponent = resolve_expression(node.exponent, scope)
    span = scope.span(node)
    power = _constant(exponent.expression)
    if exponent.unit is not None and exponent.unit.dimension:
        says = f"an exponent is a plain number, but this is {say_unit(exponent.unit)}"
        scope.report(node.exponent, says, "divide by something in the same unit first", "unit")
        return Typed(Arithmetic("^", base.expression, exponent.expression, PLAIN, span), None)
    if power is not None and abs(power) > LARGEST_POWER:
        scope.report(node.exponent, f"the exponent is too large; {LARGEST_POWER} is the most", kind="value")
        return unknown(scope, node)
    above = fit(exponent, PLAIN, node.exponent, scope, "an exponent is")
    if base.unit is None or exponent.unit is None:
        return Typed(Arithmetic("^", base.expression, above, PLAIN, span), None)
    if not base.unit.dimension:
        below = scaled(base.expression, base.unit, PLAIN)
        return Typed(Arithmetic("^", below, above, PLAIN, span), PLAIN)
    if power is None or abs(power) > LARGEST_UNIT_POWER or power.denominator > LARGEST_UNIT_POWER:
        scope.report(
            node.exponent,
            f"{say_unit(base.unit)} is raised to a power that is not a small number written out",
            f"divide by something in {say_unit(base.unit)} first, so that a plain number is raised",
            "unit",
        )
        return Typed(Arithmetic("^", base.expression, above, PLAIN, span), None)
    unit = raised(base.unit, power, scope.units)
    return Typed(Arithmetic("^", base.expression, above, unit, span), unit)


def _constant(expression: Expression) -> Fraction | None:
    """The value of an exponent written out, such as 2, -1 or (1/2)."""
    match expression:
        case Number():
            return expression.value * expression.unit.factor
        case Arithmetic(operator="/", left=Number(value=above), right=Number(value=below)) if below:
            return above / below
        case Negation():
            inner = _constant(expression.operand)
            return None if inner is None else -inner
    return None


# --- functions, tables, reductions -----------------------------------------------------------


def _call(node: tree.Call, scope: Scope) -> Typed:
    name = node.name.text
    declared = scope.names.get(name)
    if declared is not None and declared.kind == "table":
        return resolve_lookup(node, scope, resolve_expression)
    if name == "position":
        return _position(node, scope)
    if name in FUNCTIONS:
        return _function(node, scope)
    if declared is not None and declared.kind != "unreadable":
        scope.report(node.name, f"`{name}` is a {declared.kind} and takes nothing in brackets",
                     f"for a product write `{name} * (…)`")  # fmt: skip
    elif declared is None:
        tables = [other.name for other in scope.names.values() if other.kind == "table"]
        close = nearest(name, [*tables, *FUNCTIONS])
        if close:
            scope.report(node.name, f"there is no table or function `{name}`", f"did you mean `{close}`?", "name")
        else:
            scope.find(node.name, ("table",))
    for argument in node.arguments:
        if not isinstance(argument, tree.Use):
            resolve_expression(argument, scope)
        elif argument.name.text in scope.names:
            scope.find(argument.name)  # may well be what a table is by, so only note that it is used
    return unknown(scope, node)


def _position(node: tree.Call, scope: Scope) -> Typed:
    argument = node.arguments[0]
    if len(node.arguments) != 1 or not isinstance(argument, tree.Use):
        scope.report(node, "position takes the name of one index", "write it as in `position(stratum)`")
        return unknown(scope, node)
    declared = scope.find(argument.name, ("index",))
    if declared is None or declared.kind == "unreadable":
        return unknown(scope, node)
    if declared.kind != "index":
        scope.report(argument, f"`{declared.name}` is a {declared.kind}, not an index",
                     "position takes the name of an index")  # fmt: skip
        return unknown(scope, node)
    if declared.name not in scope.indices:
        scope.report(
            node,
            f"here it is not said which {declared.name} is meant",
            f"`position({declared.name})` stands in a quantity per {declared.name} or in a sum over it",
        )
        return unknown(scope, node)
    return Typed(Position(declared.name, PLAIN, scope.span(node)), PLAIN)


def _function(node: tree.Call, scope: Scope) -> Typed:
    name = node.name.text
    terms = [(resolve_expression(argument, scope), argument) for argument in node.arguments]
    span = scope.span(node)
    if name in ("min", "max") and len(terms) > 1:
        parts, unit, zero = agreed(terms, scope, "compared")
        return Typed(Function(name, tuple(parts), unit or PLAIN, span), unit, zero)
    if name in _REDUCTIONS:
        example = f"{name}(… over INDEX)"
        both = f" or {name}(a, b)" if name in ("min", "max") else ""
        scope.report(node, f"`{name}` lacks what it goes over", f"write it as in `{example}`{both}")
        return unknown(scope, node)
    if len(terms) != 1:
        scope.report(node, f"`{name}` takes one number, not {len(terms)}")
        return unknown(scope, node)
    typed, argument = terms[0]
    if name in _NEED_PLAIN:
        inner = fit(typed, PLAIN, argument, scope, f"`{name}` takes")
        return Typed(Function(name, (inner,), PLAIN, span), PLAIN if typed.unit is not None else None)
    if name == "sqrt":
        if typed.unit is None:
            return Typed(Function(name, (typed.expression,), PLAIN, span), None)
        plain = not typed.unit.dimension
        inner = scaled(typed.expression, typed.unit, PLAIN) if plain else typed.expression
        unit = PLAIN if plain else raised(typed.unit, Fraction(1, 2), scope.units)
        return Typed(Function(name, (inner,), unit, span), unit)
    return Typed(Function(name, (typed.expression,), typed.unit or PLAIN, span), typed.unit, typed.zero)


def _reduction(node: tree.Reduce, scope: Scope) -> Typed:
    name = node.name.text
    span = scope.span(node)
    if name not in _REDUCTIONS:
        close = nearest(name, _REDUCTIONS)
        scope.report(node.name, f"`{name}` cannot go over an index",
                     f"did you mean `{close}`?" if close else f"only {listing(_REDUCTIONS)} can")  # fmt: skip
        return unknown(scope, node)
    declared = scope.find(node.index, ("index",))
    if declared is None or declared.kind == "unreadable":
        known = {other.name: other for other in scope.names.values() if other.kind == "index"}
        for each in known:  # so that names per index do not complain on top
            scope = scope.over(each)
        resolve_expression(node.body, scope)
        return unknown(scope, node)
    if declared.kind != "index":
        indices = [other.name for other in scope.names.values() if other.kind == "index"]
        scope.report(node.index, f"`{declared.name}` is a {declared.kind}, not an index",
                     f"the indices are {listing(indices, 'and')}" if indices else "declare an index first")  # fmt: skip
        return unknown(scope, node)
    if _goes_over(node.body, declared.name):
        scope.report(node, f"one reduction over `{declared.name}` stands inside another over the same index",
                     "give the inner one a quantity of its own")  # fmt: skip
        return unknown(scope, node)
    body = resolve_expression(node.body, scope.over(declared.name))
    operator = cast(_Over, name)
    return Typed(Reduction(operator, body.expression, declared.name, body.unit or PLAIN, span), body.unit, body.zero)


def _goes_over(node: tree.Tree, index: str) -> bool:
    """Whether a reduction over ``index`` stands somewhere inside ``node``."""
    waiting: list[tree.Tree] = [node]
    while waiting:
        at = waiting.pop()
        match at:
            case tree.Reduce():
                if at.index.text == index:
                    return True
                waiting.append(at.body)
            case tree.Call():
                waiting.extend(at.arguments)
            case tree.Grouped():
                waiting.append(at.inner)
            case tree.Minus():
                waiting.append(at.operand)
            case tree.Chain():
                waiting.extend([at.first, *(term for _, term in at.rest)])
            case tree.Power():
                waiting.extend([at.base, at.exponent])
            case _:
                pass
    return False
