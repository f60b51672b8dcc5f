"""Each kind of declaration: tree → model."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from fractions import Fraction
from typing import Literal

from samesum.reading import tree
from samesum.reading.bodies import resolve_body
from samesum.reading.conditions import resolve_condition
from samesum.reading.expressions import resolve_expression
from samesum.reading.model import (
    PLAIN,
    About,
    Applies,
    Constant,
    Domain,
    Fact,
    Formula,
    Index,
    Judgement,
    Number,
    OneOf,
    Quantity,
    Range,
    Result,
    Setting,
    Spread,
    Table,
    Unit,
    Unknown,
    YesNo,
)
from samesum.reading.names import Placed, head_unit
from samesum.reading.phrases import decider_of, errors_of, in_unit, read_phrases, text_of, whole_number
from samesum.reading.scope import Scope
from samesum.reading.tables import resolve_rows
from samesum.reading.typed import fit
from samesum.reading.units import same_dimension
from samesum.reading.words import RESERVED, listing, nearest

MOST_ELEMENTS = 10_000
MOST_PERIODS = 10_000
_ROUNDINGS: tuple[Literal["down", "up", "nearest"], ...] = ("down", "up", "nearest")


def about(block: Placed, phrases: Mapping[str, tree.Phrase], scope: Scope) -> About:
    """What every declaration may say of itself."""
    declaration = block.declaration
    name = declaration.name
    return About(
        clause=text_of(phrases, "clause"),
        source=text_of(phrases, "source"),
        note=" ".join(note.text for note in declaration.notes),
        span=scope.place.span(0, block.last),
        name_span=scope.span(name) if name is not None else scope.span(declaration),
    )


def _name(block: Placed) -> tree.Word:
    assert block.declaration.name is not None
    return block.declaration.name


def _unit(block: Placed, scope: Scope) -> Unit | None:
    """The unit of the name declared here, as found when the names were collected."""
    declared = scope.names.get(_name(block).text)
    return declared.unit if declared is not None else None


def resolve_result(block: Placed, scope: Scope) -> Result | None:
    """The result; None, with a problem noted, when there is no such quantity."""
    word = _name(block)
    phrases = read_phrases("result", block.declaration.phrases, scope)
    declared = scope.names.get(word.text)
    unit = head_unit(block.declaration, scope)
    step: Fraction | None = None
    rounding: Literal["down", "up", "nearest", ""] = ""
    if "rounded" in phrases:
        how = phrases["rounded"].words[0]
        rounding = next((each for each in _ROUNDINGS if each == how.text), "")
        if not rounding:
            close = nearest(how.text, _ROUNDINGS)
            scope.report(how, f"a result is rounded {listing(_ROUNDINGS)}, not `{how.text}`",
                         f"did you mean `{close}`?" if close else "")  # fmt: skip
        literal = phrases["rounded"].numbers[0]
        step = in_unit(literal, unit if block.declaration.units else _unit(block, scope), scope)
        if step is not None and step <= 0:
            remedy = "write for instance `rounded down to 1`"
            scope.report(literal, "a result is rounded to a number above zero", remedy, "value")
            step = None
        rounding = rounding if step is not None else ""
    if declared is None or declared.kind == "unreadable":
        scope.find(word, ("quantity",))
        return None
    scope.find(word)
    if declared.kind != "quantity":
        scope.report(word, f"`{word.text}` is a {declared.kind}; the result is a quantity",
                     f"declare `quantity {word.text}` and what it is made of")  # fmt: skip
        return None
    if declared.index:
        scope.report(word, f"the result cannot be per {declared.index}",
                     f"declare a quantity that sums it: `= sum({word.text} over {declared.index})`")  # fmt: skip
        return None
    if block.declaration.units and unit is not None and declared.unit is not None:
        if not same_dimension(unit, declared.unit):
            theirs = f"[{declared.unit.text}]" if declared.unit.text else "no unit"
            says = f"the quantity `{word.text}` is in {theirs}, the result in [{unit.text}]"
            scope.report(block.declaration.units[0], says, "give both the same unit", "unit")
        else:
            return Result(word.text, unit, rounding, step, about(block, phrases, scope))
    return Result(word.text, declared.unit or PLAIN, rounding, step, about(block, phrases, scope))


def resolve_periods(block: Placed, scope: Scope) -> int:
    """The number of periods."""
    read_phrases("periods", block.declaration.phrases, scope)
    number = block.declaration.expression
    assert isinstance(number, tree.Literal)
    return whole_number(number, "the number of periods", MOST_PERIODS, scope) or 1


def resolve_applies(block: Placed, scope: Scope) -> Applies:
    phrases = read_phrases("applies", block.declaration.phrases, scope)
    condition = block.declaration.expression
    assert condition is not None
    return Applies(resolve_condition(condition, scope), about(block, phrases, scope))


def resolve_index(block: Placed, scope: Scope) -> Index:
    phrases = read_phrases("index", block.declaration.phrases, scope)
    most = 1
    if "at_most" in phrases:
        most = whole_number(phrases["at_most"].numbers[0], "the most elements", MOST_ELEMENTS, scope) or 1
    else:
        word = _name(block)
        scope.report(word, f"the index `{word.text}` does not say how many elements there can be",
                     f"write `index {word.text}, at most 4`")  # fmt: skip
    return Index(_name(block).text, most, about(block, phrases, scope))


def resolve_fact(block: Placed, scope: Scope) -> Fact:
    phrases = read_phrases("fact", block.declaration.phrases, scope)
    declared = scope.names[_name(block).text]
    unit = _unit(block, scope)
    domain = _domain(block, phrases, unit, scope)
    spread = None
    if "spread" in phrases:
        mean, scatter = (in_unit(number, unit, scope) for number in phrases["spread"].numbers)
        if not isinstance(domain, Range):
            scope.report(phrases["spread"], "named values have no mean and spread", "leave it out")
        elif scatter is not None and scatter < 0:
            scope.report(phrases["spread"], "a spread is not negative", kind="value")
        elif mean is not None and scatter is not None:
            spread = Spread(mean, scatter)
    return Fact(declared.name, unit or PLAIN, declared.index, domain, about(block, phrases, scope), spread)


def resolve_setting(block: Placed, scope: Scope) -> Setting:
    phrases = read_phrases("setting", block.declaration.phrases, scope)
    word = _name(block)
    unit = _unit(block, scope)
    domain = _domain(block, phrases, unit, scope)
    nobody = "settled" in phrases and "by" not in phrases
    by = decider_of(phrases, f"the setting `{word.text}`", word, scope) if not nobody else "programme"
    takes = _taken(phrases["settled"], domain, unit, scope) if "settled" in phrases else None
    if takes is None and "settled" in phrases:
        takes = _some_value(domain)
    return Setting(word.text, unit or PLAIN, domain, by, about(block, phrases, scope), takes)


def _taken(phrase: tree.Phrase, domain: Domain, unit: Unit | None, scope: Scope) -> Fraction | str | bool | None:
    """The value that everybody takes; None, with a problem noted, when it is none of the domain's."""
    word = phrase.words[0] if phrase.words else None
    if isinstance(domain, Range):
        if word is not None:
            remedy = "write the value that everybody takes, as in `takes 12 %`"
            scope.report(word, f"`{word.text}` is no number", remedy)
            return None
        value = in_unit(phrase.numbers[0], unit, scope)
        if value is None:
            return None
        if (domain.low is not None and value < domain.low) or (domain.high is not None and value > domain.high):
            scope.report(phrase.numbers[0], "this value is outside the domain", "take one inside it", "value")
            return None
        return value
    known = ("yes", "no") if isinstance(domain, YesNo) else domain.values
    if word is None or word.text not in known:
        says = f"`{word.text}` is none of its values" if word is not None else "a number is none of its values"
        scope.report(word or phrase, says, f"write {listing(known)}", "value")
        return None
    return word.text == "yes" if isinstance(domain, YesNo) else word.text


def _some_value(domain: Domain) -> Fraction | str | bool:
    """A value in the place of one that could not be read: that was told, and nobody sets the value all the same."""
    match domain:
        case YesNo():
            return True
        case OneOf(values=values):
            return values[0]
        case Range(low=low, high=high):
            ends = [end for end in (low, high) if end is not None]
            return sum(ends, Fraction(0)) / len(ends) if ends else Fraction(1)


def _domain(block: Placed, phrases: Mapping[str, tree.Phrase], unit: Unit | None, scope: Scope) -> Domain:
    units = block.declaration.units
    if "range" in phrases:
        phrase = phrases["range"]
        low, high = (in_unit(number, unit, scope) for number in phrase.numbers)
        share = any(number.percent for number in phrase.numbers)
        if low is not None and high is not None and low > high:
            remedy = _unit_at_both_ends(phrase, unit, scope) or "write the smaller number first"
            scope.report(phrase, "the domain ends below its start", remedy, "value")
            return Range(None, None)
        return Range(low, high, share)
    if "yes_no" in phrases or "one_of" in phrases:
        for word in units:
            scope.report(word, "only numbers have a unit", "leave the unit out", "unit")
    if "yes_no" in phrases:
        return YesNo()
    if "one_of" in phrases:
        values: dict[str, None] = {}
        for word in phrases["one_of"].words:
            if word.text in RESERVED:
                scope.report(word, f"`{word.text}` is a word of the language and cannot be a name",
                             f"call it something else, such as `{word.text}_1`", "name")  # fmt: skip
            if word.text in values:
                scope.report(word, f"`{word.text}` is listed twice", "leave one of the two out", "name")
            values[word.text] = None
        return OneOf(tuple(values))
    return Range(None, None)


def _unit_at_both_ends(phrase: tree.Phrase, unit: Unit | None, scope: Scope) -> str:
    """What to write for ``5 to 10 %``, where the % or the unit is meant of both ends; "" for any other range."""
    first, second = phrase.numbers
    if first.percent or first.unit is not None or not (second.percent or second.unit is not None):
        return ""
    meant = in_unit(replace(first, percent=second.percent, unit=second.unit), unit, scope)
    high = in_unit(second, unit, scope)
    if meant is None or high is None or meant > high:
        return ""
    behind = "%" if second.unit is None else f"[{second.unit.text}]"
    ends = [f"{'-' if each.negative else ''}{each.text} {behind}" for each in (first, second)]
    return f"write `{' to '.join(ends)}`"


def resolve_judgement(block: Placed, scope: Scope) -> Judgement:
    phrases = read_phrases("judgement", block.declaration.phrases, scope)
    word = _name(block)
    for unit in block.declaration.units:
        scope.report(unit, "a judgement is yes or no and has no unit", "leave the unit out", "unit")
    if "wording" not in phrases:
        scope.report(word, f"the judgement `{word.text}` does not give the wording that is read",
                     f"write `judgement {word.text}, \"where …\", by developer`")  # fmt: skip
    nobody = "settled" in phrases and "by" not in phrases
    by = decider_of(phrases, f"the judgement `{word.text}`", word, scope) if not nobody else "programme"
    taken = _taken(phrases["settled"], YesNo(), None, scope) if "settled" in phrases else None
    takes = (taken if isinstance(taken, bool) else True) if "settled" in phrases else None
    return Judgement(word.text, text_of(phrases, "wording"), by, about(block, phrases, scope), takes)


def resolve_constant(block: Placed, scope: Scope) -> Constant:
    """A constant. A plain number is in the constant's own unit already."""
    phrases = read_phrases("constant", block.declaration.phrases, scope)
    node = block.declaration.expression
    assert node is not None
    unit = _unit(block, scope)
    typed = resolve_expression(node, replace(scope, only_constants=True))
    if typed.unit is None or (typed.unit == PLAIN and not _is_percentage(node)):
        expression = typed.expression
    else:
        expression = fit(typed, unit, node, scope, "the constant is in")
    withheld = "withheld" in phrases
    if withheld and not (isinstance(expression, Number) and unit == PLAIN):
        scope.report(phrases["withheld"], "only a plain number can be left out of the reference",
                     "write it as in `constant deduction = 12 %, not in reference`", "value")  # fmt: skip
        withheld = False
    return Constant(_name(block).text, unit or PLAIN, expression, about(block, phrases, scope), withheld)


def _is_percentage(node: tree.Tree) -> bool:
    number = node.operand if isinstance(node, tree.Minus) else node
    return isinstance(number, tree.Literal) and number.percent


def resolve_table(block: Placed, scope: Scope) -> Table:
    phrases = read_phrases("table", block.declaration.phrases, scope)
    word = _name(block)
    unit = _unit(block, scope)
    keys = scope.keys.get(word.text)
    rows = resolve_rows(block.declaration, keys, unit, scope) if keys is not None else ()
    if not block.declaration.rows:
        scope.report(word, f"the table `{word.text}` has no rows", "write them below it, as in `mineral = 62`")
    return Table(word.text, unit or PLAIN, keys or (), rows, about(block, phrases, scope))


def resolve_quantity(block: Placed, scope: Scope) -> Quantity:
    phrases = read_phrases("quantity", block.declaration.phrases, scope)
    declared = scope.names[_name(block).text]
    unit = declared.unit
    body = block.declaration.body
    assert body is not None
    inside = scope.over(declared.index) if declared.index else scope
    resolved = resolve_body(body, unit, inside)
    error, bias = errors_of(phrases, scope)
    if (error is not None or bias is not None) and not isinstance(resolved, Formula | Unknown):
        said = phrases.get("error", phrases.get("bias"))
        assert said is not None
        scope.report(said, f"`{declared.name}` is no single formula, so that it has no single error",
                     "state the error at each option, or of a quantity that is a formula", "value")  # fmt: skip
        error = bias = None
    return Quantity(declared.name, unit or PLAIN, declared.index, resolved, about(block, phrases, scope), error, bias)


def resolve_quietly(block: Placed, scope: Scope) -> None:
    """Looks a declaration through that is left out of the model, so that its own mistakes are told."""
    body = block.declaration.body
    if body is not None:
        per = next((phrase.words[0].text for phrase in block.declaration.phrases if phrase.kind == "per"), "")
        resolve_body(body, None, replace(scope.over(per), notebook=scope.notebook))
