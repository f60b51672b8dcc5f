"""Phrases: which a declaration, choice or option may have, each at most once."""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction

from samesum.reading import tree
from samesum.reading.model import Decider, Unit
from samesum.reading.numbers import as_written
from samesum.reading.scope import Scope
from samesum.reading.units import conversion, same_dimension
from samesum.reading.words import DECIDERS, listing, nearest

# How each phrase is written; phrases of one group exclude each other.
WRITTEN: Mapping[str, str] = {
    "clause": "`clause …`",
    "source": '`source "…"`',
    "draft": '`draft "…"`',
    "rounded": "`rounded down to …`",
    "at_most": "`at most …`",
    "range": "`LOW to HIGH`",
    "one_of": "`one of …`",
    "yes_no": "`yes or no`",
    "by": "`by …`",
    "per": "`per …`",
    "wording": "the wording in quotes",
    "spread": "`mean … spread …`",
    "fixed": "`fixed at validation`",
    "open": "`open each period`",
    "correlated": "`errors correlated …`",
    "only_when": "`only when …`",
    "error": "`error … %`",
    "bias": "`bias … %`",
    "cost": "`cost …`",
    "reference": "`reference`",
    "withheld": "`not in reference`",
    "settled": "`takes …`",
}
_GROUPS = {"range": "domain", "one_of": "domain", "yes_no": "domain", "fixed": "timing", "open": "timing"}
_DOMAIN = ("range", "one_of", "yes_no")
ALLOWED: Mapping[str, tuple[str, ...]] = {
    "rulebook": ("draft", "clause", "source"),
    "result": ("rounded", "clause", "source"),
    "periods": ("clause", "source"),
    "applies": ("clause", "source"),
    "index": ("at_most", "clause", "source"),
    "fact": ("per", *_DOMAIN, "spread", "clause", "source"),
    "setting": (*_DOMAIN, "by", "settled", "clause", "source"),
    "judgement": ("wording", "by", "settled", "clause", "source"),
    "constant": ("clause", "source", "withheld"),
    "table": ("clause", "source"),
    "quantity": ("per", "error", "bias", "clause", "source"),
    "choice": ("by", "fixed", "open", "correlated"),
    "choice that follows another": (),
    "choice that takes one option": ("correlated",),
    "option": ("only_when", "error", "bias", "cost", "reference"),
}


def read_phrases(kind: str, phrases: tuple[tree.Phrase, ...], scope: Scope) -> dict[str, tree.Phrase]:
    """The phrases by their kind; reports those that do not belong here or stand there twice."""
    found: dict[str, tree.Phrase] = {}
    groups: dict[str, tree.Phrase] = {}
    allowed = ALLOWED[kind]
    for phrase in phrases:
        group = _GROUPS.get(phrase.kind, phrase.kind)
        article = "an" if kind[0] in "aeio" else "a"
        if phrase.kind not in allowed:
            remedy = _instead(phrase, kind, allowed)
            scope.report(phrase, f"{WRITTEN[phrase.kind]} does not belong to {article} {kind}", remedy)
        elif phrase.kind in found:
            scope.report(phrase, f"{WRITTEN[phrase.kind]} is said twice", "keep one of the two")
        elif group in groups:
            other = WRITTEN[groups[group].kind]
            scope.report(phrase, f"{other} and {WRITTEN[phrase.kind]} exclude each other", "keep one of the two")
        else:
            found[phrase.kind] = phrase
            groups[group] = phrase
    return found


def _instead(phrase: tree.Phrase, kind: str, allowed: tuple[str, ...]) -> str:
    if phrase.kind == "by" and kind == "fact":
        return "a fact is the same whoever reads it; declare a `setting` or a `judgement` if somebody decides it"
    if phrase.kind == "per" and kind in ("setting", "judgement", "constant", "table", "result"):
        return "only a fact or a quantity is per index"
    if (phrase.kind, kind) in (("settled", "choice"), ("by", "choice that takes one option")):
        return "either somebody chooses, `choice by …`, or the rulebook does, `choice takes …`"
    return f"it may have {listing([WRITTEN[each] for each in allowed], 'and')}" if allowed else "leave it out"


def text_of(phrases: Mapping[str, tree.Phrase], kind: str) -> str:
    phrase = phrases.get(kind)
    return phrase.words[0].text if phrase is not None else ""


def decider_of(phrases: Mapping[str, tree.Phrase], what: str, at: tree.Node, scope: Scope) -> Decider:
    """Who decides; reports when nobody is named, or somebody whom the language does not know."""
    phrase = phrases.get("by")
    if phrase is None:
        scope.report(at, f"{what} does not say who decides", f"write `by {listing(DECIDERS)}`")
        return "developer"
    who = phrase.words[0]
    for decider in DECIDERS:
        if who.text == decider:
            return decider
    close = nearest(who.text, DECIDERS)
    scope.report(who, f"`{who.text}` is nobody who decides",
                 f"did you mean `{close}`?" if close else f"write {listing(DECIDERS)}", "name")  # fmt: skip
    return "developer"


def in_unit(literal: tree.Literal, unit: Unit | None, scope: Scope) -> Fraction | None:
    """The number in ``unit``; a number without a unit of its own is in that unit already.

    A percent stands for a plain number. None, with a problem noted, when it does not fit.
    """
    value = scope.number(literal)
    if literal.unit is not None:
        own = scope.unit(literal.unit)
        if value is None or own is None or unit is None:
            return None
        if literal.percent:
            scope.report(literal.unit, "a number in % has no other unit", "leave out the % or the unit", "unit")
            return None
        if not same_dimension(own, unit):
            scope.report(literal, f"[{own.text}] does not fit here, where numbers are in "
                         + (f"[{unit.text}]" if unit.text else "no unit"), _instead_of(unit), "unit")  # fmt: skip
            return None
        return value * conversion(own, unit)
    if literal.percent and unit is not None and value is not None:
        if unit.dimension:
            says = f"a number in % does not fit here, where numbers are in [{unit.text}]"
            scope.report(literal, says, _instead_of(unit), "unit")
            return None
        return value / unit.factor
    return value


def _instead_of(unit: Unit) -> str:
    return f"write the number in [{unit.text}]" if unit.text else "write a number or a percentage, without a unit"


def plain_number(literal: tree.Literal, what: str, scope: Scope) -> Fraction | None:
    """A number that has no unit, such as an error in %."""
    if literal.unit is not None:
        scope.report(literal.unit, f"{what} has no unit", "write a number or a percentage", "unit")
        return None
    return scope.number(literal)


def whole_number(literal: tree.Literal, what: str, most: int, scope: Scope) -> int | None:
    """A whole number from 1 to ``most``."""
    if literal.unit is not None:
        scope.report(literal.unit, f"{what} has no unit", "leave the unit out", "unit")
        return None
    value = scope.number(literal)
    if value is None:
        return None
    if value.denominator != 1 or literal.percent or not 1 <= value <= most:
        scope.report(literal, f"{what} is a whole number from 1 to {most}", kind="value")
        return None
    return int(value)


def errors_of(phrases: Mapping[str, tree.Phrase], scope: Scope) -> tuple[Fraction | None, Fraction | None]:
    """The relative standard error and the mean relative error, where they are said."""
    error = bias = None
    if "error" in phrases:
        error = plain_number(phrases["error"].numbers[0], "an error", scope)
        if error is not None and error < 0:
            scope.report(phrases["error"], "an error is not negative", "write how much it scatters, as in `error 8 %`",
                         "value")  # fmt: skip
            error = None
        error = _share(error, "an error", phrases["error"], scope)
    if "bias" in phrases:
        bias = plain_number(phrases["bias"].numbers[0], "a bias", scope)
        bias = _share(bias, "a bias", phrases["bias"], scope)
    return error, bias


def _share(value: Fraction | None, what: str, phrase: tree.Phrase, scope: Scope) -> Fraction | None:
    """The value; None, with a problem noted, where its % was surely forgotten: 2 or more (200 %) without one."""
    literal = phrase.numbers[0]
    if value is None or literal.percent or abs(value) < 2:
        return value
    number = f"{'-' if literal.negative else ''}{literal.text}"
    hundred = value * 100
    percent = f"{hundred.numerator:,}" if hundred.denominator == 1 else as_written(hundred)
    scope.report(phrase, f"{what} of {number} is {percent} %", f"write `{phrase.kind} {number} %`", "value")
    return None
