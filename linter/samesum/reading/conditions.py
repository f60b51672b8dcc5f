"""Conditions: comparisons in one unit, named values inside their domain, options that exist."""

from __future__ import annotations

from typing import Literal, cast

from samesum.reading import tree
from samesum.reading.expressions import resolve_expression
from samesum.reading.model import (
    PLAIN,
    All,
    Comparison,
    Condition,
    Holds,
    Is,
    Not,
    Reference,
    Some,
    Takes,
    Unknown,
)
from samesum.reading.scope import Declared, Scope
from samesum.reading.typed import agreed, index_is_known
from samesum.reading.words import listing, nearest

_Operator = Literal["<", "<=", ">", ">=", "=", "<>"]
_Asked = Literal["fact", "setting", "judgement"]
_Valued = Literal["fact", "setting"]


def resolve_condition(node: tree.Tree, scope: Scope) -> Condition:
    """The condition that ``node`` writes; reports what is wrong with it."""
    if scope.too_deep(node):
        return Unknown(scope.span(node))
    inner = scope.deeper()
    span = scope.span(node)
    match node:
        case tree.Both():
            return All(tuple(resolve_condition(part, inner) for part in node.parts), span)
        case tree.Either():
            return Some(tuple(resolve_condition(part, inner) for part in node.parts), span)
        case tree.Negated():
            return Not(resolve_condition(node.part, inner), span)
        case tree.Grouped() if node.unit is None:
            return resolve_condition(node.inner, inner)
        case tree.Compared():
            return _compared(node, inner)
        case tree.IsValue():
            return _is_value(node, inner)
        case tree.TakesOption():
            return _takes(node, inner)
        case tree.Use():
            return _holds(node.name, inner)
        case _:
            scope.report(node, "a number stands where a condition belongs", "compare it with something, as in `… > 0`")
            return Unknown(span)


def _compared(node: tree.Compared, scope: Scope) -> Condition:
    sides = [node.first, *(side for _, side in node.rest)]
    terms = [(resolve_expression(side, scope), side) for side in sides]
    parts, unit, _ = agreed(terms, scope, "compared")
    found = []
    for at, (sign, side) in enumerate(node.rest):
        span = scope.place.span(sides[at].start, side.end)
        found.append(Comparison(cast(_Operator, sign), parts[at], parts[at + 1], span))
    if unit is None:
        return Unknown(scope.span(node))
    return found[0] if len(found) == 1 else All(tuple(found), scope.span(node))


def _holds(word: tree.Word, scope: Scope) -> Condition:
    declared = scope.find(word, ("judgement", "fact", "setting"))
    span = scope.span(word)
    if declared is None or declared.kind == "unreadable":
        return Unknown(span)
    if declared.kind != "judgement" and not declared.yes_no:
        scope.report(word, f"`{word.text}` alone is no condition", _how_to_ask(declared))
        return Unknown(span)
    if not index_is_known(word, declared, scope, number=False):
        return Unknown(span)
    return Holds(word.text, cast(_Asked, declared.kind), declared.index, span)


def _how_to_ask(declared: Declared) -> str:
    name = declared.name
    if declared.values:
        return f"ask for its value, as in `{name} is {declared.values[0]}`"
    if declared.kind == "quantity" and declared.options:
        return f"ask for its option, as in `{name} takes {declared.options[0]}`, or compare it, as in `{name} > 0`"
    if declared.kind in ("table", "index"):
        return f"it is {'an index' if declared.kind == 'index' else 'a table'}; compare a number instead"
    return f"compare it with something, as in `{name} > 0`"


def _is_value(node: tree.IsValue, scope: Scope) -> Condition:
    span = scope.span(node)
    subject = node.subject
    if not isinstance(subject, tree.Use):
        scope.report(subject, "`is` asks for the value of a fact or setting, and this is a calculation",
                     "compare numbers with < <= > >= = or <>")  # fmt: skip
        return Unknown(span)
    declared = scope.find(subject.name, ("fact", "setting"))
    if declared is None or declared.kind == "unreadable":
        return Unknown(span)
    if not index_is_known(subject.name, declared, scope, number=False):
        return Unknown(span)
    if declared.yes_no or declared.kind == "judgement":
        return _is_yes(node, subject.name, declared, scope)
    if not declared.values:
        numeric = declared.kind in ("fact", "setting", "constant")
        scope.report(subject, f"`{declared.name}` has no named values",
                     "compare numbers with < <= > >= = or <>" if numeric else _how_to_ask(declared))  # fmt: skip
        return Unknown(span)
    good = True
    seen: set[str] = set()
    for value in node.values:
        if value.text not in declared.values:
            close = nearest(value.text, declared.values)
            scope.absent(value, f"`{value.text}` is no value of `{declared.name}`",
                         f"did you mean `{close}`?" if close else f"it can be {listing(declared.values)}")  # fmt: skip
            good = False
        elif value.text in seen:
            scope.report(value, f"`{value.text}` is listed twice")
        seen.add(value.text)
    if not good:
        return Unknown(span)
    kind = cast(_Valued, declared.kind)
    reference = Reference(declared.name, kind, declared.index, PLAIN, scope.span(subject))
    found = Is(reference, tuple(dict.fromkeys(value.text for value in node.values)), span)
    return Not(found, span) if node.negated else found


def _is_yes(node: tree.IsValue, word: tree.Word, declared: Declared, scope: Scope) -> Condition:
    span = scope.span(node)
    if len(node.values) != 1 or node.values[0].text not in ("yes", "no"):
        scope.report(node.values[0], f"`{word.text}` is yes or no",
                     f"write `{word.text}` or `not {word.text}`")  # fmt: skip
        return Unknown(span)
    kind = cast(_Asked, declared.kind)
    holds = Holds(word.text, kind, declared.index, span)
    return holds if (node.values[0].text == "yes") != node.negated else Not(holds, span)


def _takes(node: tree.TakesOption, scope: Scope) -> Condition:
    span = scope.span(node)
    if not isinstance(node.subject, tree.Use):
        scope.report(node.subject, "`takes` asks for the option of a quantity, and this is a calculation")
        return Unknown(span)
    word = node.subject.name
    declared = scope.find(word, ("quantity",))
    if declared is None or declared.kind == "unreadable":
        return Unknown(span)
    if declared.options is None:
        what = "its body is no choice" if declared.kind == "quantity" else f"it is a {declared.kind}"
        scope.report(word, f"`{word.text}` takes no option: {what}",
                     f"write `{word.text} is …`" if declared.values else "")  # fmt: skip
        return Unknown(span)
    if not index_is_known(word, declared, scope, number=False):
        return Unknown(span)
    if node.option.text not in declared.options:
        close = nearest(node.option.text, declared.options)
        remedy = f"did you mean `{close}`?" if close else f"its options are {listing(declared.options, 'and')}"
        scope.absent(node.option, f"`{node.option.text}` is no option of `{word.text}`", remedy)
        return Unknown(span)
    return Takes(word.text, declared.index, node.option.text, span)
