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
from samesum.reading.numbers import as_written
from samesum.reading.scope import Declared, Scope
from samesum.reading.typed import agreed, index_is_known
from samesum.reading.words import listing, nearest

_YES_NO = {"yes": True, "true": True, "no": False, "false": False}
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
    if len(sides) == 2 and _asks_for_a_value(node, scope):
        return Unknown(scope.span(node))
    terms = [(resolve_expression(side, scope), side) for side in sides]
    parts, unit, _ = agreed(terms, scope, "compared")
    found = []
    for at, (sign, side) in enumerate(node.rest):
        span = scope.place.span(sides[at].start, side.end)
        found.append(Comparison(cast(_Operator, sign), parts[at], parts[at + 1], span))
        _hundredfold(sides[at], side, scope)
    if unit is None:
        return Unknown(scope.span(node))
    return found[0] if len(found) == 1 else All(tuple(found), scope.span(node))


def _asks_for_a_value(node: tree.Compared, scope: Scope) -> bool:
    """``fuel = wood`` and ``urban = yes``, which are asked with ``is`` or by the name alone; reports it."""
    (sign, second), first = node.rest[0], node.first
    if sign not in ("=", "<>") or not isinstance(first, tree.Use) or not isinstance(second, tree.Use):
        return False
    for subject, value in ((first.name, second.name), (second.name, first.name)):
        declared = scope.names.get(subject.text)
        if declared is None or (value.text in scope.names and value.text not in declared.values):
            continue
        if declared.kind == "judgement" or declared.yes_no:
            scope.find(subject)
            says, remedy = "is yes or no and is not compared", f"write `{subject.text}` or `not {subject.text}`"
            if value.text in _YES_NO:
                holds = _YES_NO[value.text] == (sign == "=")
                remedy = f"write `{subject.text}`" if holds else f"write `not {subject.text}`"
            scope.report(node, f"`{subject.text}` {says}", remedy)
            return True
        if declared.values:
            scope.find(subject)
            close = value.text if value.text in declared.values else nearest(value.text, declared.values)
            asked = f"{subject.text} is {'not ' if sign == '<>' else ''}{close or declared.values[0]}"
            says = "a named value is asked for with `is`"
            scope.report(node, says, f"write `{asked}`" if close else f"write it as in `{asked}`")
            return True
    return False


def _hundredfold(first: tree.Tree, second: tree.Tree, scope: Scope) -> None:
    """A share compared with 20 where 20 % is meant: reported only where nothing else can be meant, since the number
    lies beyond the domain by more than the whole of it and its hundredth part inside."""
    for subject, literal in ((first, second), (second, first)):
        if not isinstance(subject, tree.Use) or not isinstance(literal, tree.Literal):
            continue
        declared = scope.names.get(subject.name.text)
        value = scope.number(literal)
        if declared is None or declared.share is None or value is None or literal.percent or literal.unit is not None:
            continue
        low, high = declared.share
        if value > high + (high - low) and low <= value / 100 <= high:
            percent = literal.text
            scope.report(literal, f"`{declared.name}` is a share, and {percent} means {as_written(value * 100)} %",
                         f"write {percent} %", "value")  # fmt: skip


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
