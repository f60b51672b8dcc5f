"""Bodies: formulas, cases and choices, as deep as they nest."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from typing import Literal

from samesum.reading import tree
from samesum.reading.conditions import resolve_condition
from samesum.reading.expressions import resolve_expression
from samesum.reading.model import (
    HIGHEST,
    LOWEST,
    Body,
    Cases,
    Choice,
    Expression,
    Follows,
    Formula,
    Option,
    Unit,
    Unknown,
    When,
)
from samesum.reading.phrases import decider_of, errors_of, plain_number, read_phrases
from samesum.reading.scope import Scope
from samesum.reading.typed import fit, index_is_known, say_unit
from samesum.reading.units import MONEY, money_of
from samesum.reading.words import RESERVED, listing, nearest

DEEPEST_BODY = 100


def resolve_body(body: tree.BodyTree, unit: Unit | None, scope: Scope, level: int = 0) -> Body:
    """The body, its formulas in ``unit`` (None when the quantity's unit is unknown)."""
    if level > DEEPEST_BODY:
        remedy = "give a part of it a quantity of its own"
        scope.report(body, f"bodies are nested more than {DEEPEST_BODY} deep", remedy)
        return Unknown(scope.span(body))
    match body:
        case tree.FormulaTree():
            typed = resolve_expression(body.expression, scope)
            expression = fit(typed, unit, body.expression, scope, "the quantity is in")
            return Formula(expression, scope.span(body))
        case tree.CasesTree():
            return _cases(body, unit, scope, level)
        case tree.ChoiceTree():
            return _choice(body, unit, scope, level) if body.follows is None else _follows(body, unit, scope, level)


def _cases(body: tree.CasesTree, unit: Unit | None, scope: Scope, level: int) -> Cases:
    branches: list[When] = []
    closed = False
    for number, branch in enumerate(body.branches, 1):
        inner = resolve_body(branch.body, unit, scope, level + 1)
        span = scope.span(branch)
        if branch.condition is None:
            if closed:
                scope.report(branch, "`otherwise` stands here a second time", "keep one of the two")
                continue
            if number < len(body.branches) and any(later.condition for later in body.branches[number:]):
                scope.report(branch, "`otherwise` comes last", "move it below the last `when`")
            closed = True
            branches.append(When("otherwise", None, inner, span))
        else:
            name = str(sum(1 for earlier in branches if earlier.condition is not None) + 1)
            branches.append(When(name, resolve_condition(branch.condition, scope), inner, span))
    branches.sort(key=lambda branch: branch.condition is None)
    return Cases(body.in_order, tuple(branches), scope.span(body))


def _choice(body: tree.ChoiceTree, unit: Unit | None, scope: Scope, level: int) -> Choice:
    phrases = read_phrases("choice that takes one option" if body.takes else "choice", body.phrases, scope)
    by = decider_of(phrases, "this choice", body, scope) if not body.takes else "programme"
    timing: Literal["validation", "period", ""] = (
        "validation" if "fixed" in phrases else "period" if "open" in phrases else ""
    )
    options = _options(body, unit, scope, level)
    correlated = None
    if "correlated" in phrases:
        literal = phrases["correlated"].numbers[0]
        correlated = plain_number(literal, "a correlation", scope)
        if correlated is not None and not _possible(correlated, len(options)):
            low = "-1" if len(options) < 3 else f"-1/{len(options) - 1}"
            scope.report(literal, f"{len(options)} errors cannot be correlated this much",
                         f"write a number from {low} to 1", "value")  # fmt: skip
            correlated = None
    return Choice(by, options, scope.span(body), timing, correlated, _taken(body, options, scope))


def _taken(body: tree.ChoiceTree, options: tuple[Option, ...], scope: Scope) -> str:
    """What a choice takes that nobody makes."""
    if not body.takes:
        return ""
    names = [option.name for option in options]
    said = " ".join(word.text for word in body.takes)
    if said in (LOWEST, HIGHEST) or said in names:
        return said
    word = body.takes[0]
    if len(body.takes) > 1:
        says = f"`{said}` is nothing that a choice can take"
        scope.report(body.takes[1], says, f"write one of its options, `{LOWEST}` or `{HIGHEST}`")
    else:
        close = nearest(word.text, names)
        ours = f"its options are {listing(names, 'and')}"
        remedy = f"did you mean `{close}`?" if close else ours
        if word.text in ("lowest", "highest"):
            remedy = f"write `choice takes {word.text} value`"
        scope.report(word, f"`{word.text}` is no option of this choice", remedy, "name")
    return names[0] if names else ""


def _possible(correlation: Fraction, count: int) -> bool:
    """Whether ``count`` numbers can all have this correlation with each other."""
    return Fraction(-1, max(1, count - 1)) <= correlation <= 1


def _follows(body: tree.ChoiceTree, unit: Unit | None, scope: Scope, level: int) -> Body:
    word = body.follows
    assert word is not None
    read_phrases("choice that follows another", body.phrases, scope)
    options = _options(body, unit, scope, level)
    declared = scope.find(word, ("quantity",))
    if declared is None or declared.kind == "unreadable":
        return Unknown(scope.span(body))
    if declared.options is None:
        what = "its body is no choice" if declared.kind == "quantity" else f"it is a {declared.kind}"
        choices = [other.name for other in scope.names.values() if other.options]
        scope.report(word, f"`{word.text}` has no choice to follow: {what}",
                     f"the choices are those of {listing(choices, 'and')}" if choices else "")  # fmt: skip
        return Unknown(scope.span(body))
    if not index_is_known(word, declared, scope, number=False):
        return Unknown(scope.span(body))
    ours = {option.name for option in options}
    missing = [name for name in declared.options if name not in ours]
    strange = [option for option in body.options if option.name.text not in declared.options]
    for option in strange:
        close = nearest(option.name.text, missing)
        remedy = f"did you mean `{close}`?" if close else f"its options are {listing(declared.options, 'and')}"
        says = f"`{option.name.text}` is no option of `{word.text}`, which this choice follows"
        scope.absent(option.name, says, remedy)
    if missing and not strange:
        scope.report(body, f"this choice follows `{word.text}` and lacks its option{'s' if len(missing) > 1 else ''} "
                     f"{listing(missing, 'and')}", "write one option for each of them")  # fmt: skip
    if missing or strange:
        return Unknown(scope.span(body))
    return Follows(word.text, declared.index, options, scope.span(body))


# --- options ---------------------------------------------------------------------------------


def _options(body: tree.ChoiceTree, unit: Unit | None, scope: Scope, level: int) -> tuple[Option, ...]:
    options: dict[str, Option] = {}
    reference: str = ""
    for option in body.options:
        found = _option(option, unit, scope, level)
        if found.name in RESERVED:
            scope.report(option.name, f"`{found.name}` is a word of the language and cannot be a name", kind="name")
        if found.name in options:
            says = f"`{found.name}` is an option of this choice already"
            scope.report(option.name, says, "give it another name", "name")
            continue
        if found.reference and reference:
            scope.report(option, f"`{reference}` is the reference already; a choice has at most one",
                         "keep one of the two")  # fmt: skip
            found = replace(found, reference=False)
        reference = found.name if found.reference else reference
        options[found.name] = found
    return tuple(options.values())


def _option(option: tree.OptionTree, unit: Unit | None, scope: Scope, level: int) -> Option:
    phrases = read_phrases("option", option.phrases, scope)
    only_when = None
    if "only_when" in phrases and (condition := phrases["only_when"].expression) is not None:
        only_when = resolve_condition(condition, scope)
    error, bias = errors_of(phrases, scope)
    cost = _cost(phrases["cost"], scope) if "cost" in phrases else None
    body = resolve_body(option.body, unit, scope, level + 1)
    return Option(
        option.name.text, body, scope.span(option), only_when, error, bias, cost, reference="reference" in phrases
    )


def _cost(phrase: tree.Phrase, scope: Scope) -> Expression:
    """The cost, in its currency (not in thousands of it)."""
    node = phrase.expression
    assert node is not None
    typed = resolve_expression(node, scope)
    if typed.unit is None or typed.zero:
        return typed.expression
    currency = money_of(typed.unit)
    if not currency:
        scope.report(node, f"a cost is an amount of money, but this is {say_unit(typed.unit)}",
                     "write a currency behind the number, as in 40 [USD/ha]", "unit")  # fmt: skip
        return typed.expression
    scope.notebook.currencies.append((currency, scope.span(node)))
    unit = Unit(currency, Fraction(1), ((MONEY + currency, Fraction(1)),))
    return fit(typed, unit, node, scope, "a cost is in")
