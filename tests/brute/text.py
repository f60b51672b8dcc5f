"""The text of a small rulebook in the rulebook language."""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction

from brute.rulebooks import (
    And,
    Band,
    Body,
    Call,
    Cases,
    Chain,
    Choice,
    Compare,
    Condition,
    Domain,
    Expression,
    Formula,
    Holds,
    Is,
    Lookup,
    Neg,
    Not,
    Num,
    OneOf,
    Option,
    Over,
    Position,
    Ref,
    Rulebook,
    Takes,
    YesNo,
)

_RANK = {"+": 1, "-": 1, "*": 2, "/": 2, "^": 4}


def number(value: Fraction) -> str:
    """A decimal number where it ends within six places, else a quotient in parentheses."""
    if value.denominator == 1:
        return str(value.numerator)
    if 10**6 % value.denominator == 0:
        return f"{float(value):.6f}".rstrip("0")
    return f"({value.numerator} / {value.denominator})"


def expression(e: Expression, rank: int = 0) -> str:
    """``e`` as text, in parentheses where something of ``rank`` (0 nothing, 1 sums, 2 products,
    3 a sign, 4 powers) around it would tear it apart."""
    if isinstance(e, Num):
        text, own = number(e.value), 3 if e.value < 0 else 9
    elif isinstance(e, Ref):
        text, own = e.name, 9
    elif isinstance(e, Lookup):
        text, own = f"{e.table}({', '.join(expression(a) for a in e.arguments)})", 9
    elif isinstance(e, Call):
        text, own = f"{e.name}({', '.join(expression(a) for a in e.arguments)})", 9
    elif isinstance(e, Over):
        text, own = f"{e.name}({expression(e.body)} over {e.index})", 9
    elif isinstance(e, Position):
        text, own = f"position({e.index})", 9
    elif isinstance(e, Neg):
        text, own = "-" + expression(e.operand, 4), 3
    else:
        own = _RANK[e.operator]
        # Left to right, but for powers, whose two sides are always set apart.
        left = expression(e.left, 5 if own == 4 else own)
        text = f"{left} {e.operator} {expression(e.right, own + 1)}"
    return f"({text})" if own < rank else text


def _one_of(values: tuple[str, ...]) -> str:
    if len(values) == 1:
        return values[0]
    return f"one of {', '.join(values[:-1])} or {values[-1]}"


def condition(c: Condition, inside: str = "") -> str:
    """``c`` as text; ``inside`` names what stands around it: "", ``and``, ``or`` or ``not``."""
    if isinstance(c, Compare):
        text, loose = f"{expression(c.left)} {c.operator} {expression(c.right)}", inside == "not"
    elif isinstance(c, Chain):
        text = f"{expression(c.low)} {c.first} {expression(c.middle)} {c.second} {expression(c.high)}"
        loose = inside == "not"
    elif isinstance(c, Is):
        text, loose = f"{c.name} is {_one_of(c.values)}", inside in ("or", "not")
    elif isinstance(c, Holds):
        text, loose = c.name, False
    elif isinstance(c, Takes):
        text, loose = f"{c.quantity} takes {c.option}", inside == "not"
    elif isinstance(c, Not):
        text, loose = "not " + condition(c.part, "not"), inside == "not"
    else:
        word = "and" if isinstance(c, And) else "or"
        text = f" {word} ".join(condition(part, word) for part in c.parts)
        # `and` binds more tightly than `or`, so it needs no parentheses there.
        loose = inside not in ("", "or") if word == "and" else inside != ""
    return f"({text})" if loose else text


def _body(body: Body, indent: int) -> Iterator[str]:
    pad = "    " * indent
    if isinstance(body, Formula):
        yield f"{pad}= {expression(body.expression)}"
    elif isinstance(body, Cases):
        yield pad + ("cases in order" if body.in_order else "cases")
        for branch in body.branches:
            yield pad + "    " + ("otherwise" if branch.condition is None else f"when {condition(branch.condition)}")
            yield from _body(branch.body, indent + 2)
    else:
        if isinstance(body, Choice):
            timing = {"": "", "validation": ", fixed at validation", "period": ", open each period"}[body.timing]
            yield f"{pad}choice takes {body.takes}" if body.takes else f"{pad}choice by {body.by}{timing}"
        else:
            yield f"{pad}choice follows {body.quantity}"
        for option in body.options:
            yield f"{pad}    option {option.name}{_attributes(option)}"
            yield from _body(option.body, indent + 2)


def _attributes(option: Option) -> str:
    text = ""
    if option.only_when is not None:
        text += f", only when {condition(option.only_when)}"
    if option.error is not None:
        text += f", error {number(option.error * 100)} %"
    if option.cost is not None:
        text += f", cost {expression(option.cost)} [USD]"
    return text + (", reference" if option.reference else "")


def _domain(domain: Domain) -> str:
    if isinstance(domain, YesNo):
        return ", yes or no"
    if isinstance(domain, OneOf):
        return f", {_one_of(domain.values)}"
    if domain.low is None or domain.high is None:
        return ""
    return f", {number(domain.low)} to {number(domain.high)}"


def _taken(value: Fraction | str | bool | None) -> str:
    if value is None:
        return ""
    if isinstance(value, bool):
        return f", takes {'yes' if value else 'no'}"
    return f", takes {value if isinstance(value, str) else number(value)}"


def _label(label: str | Band) -> str:
    if isinstance(label, str):
        return label
    above = "" if label.low is None else f"above {number(label.low)}"
    upto = "" if label.high is None else f"up to {number(label.high)}"
    return " ".join(part for part in (above, upto) if part)


def render(rulebook: Rulebook) -> str:
    """The rulebook as text in the rulebook language."""
    lines = ['rulebook "Generated", draft "1"', ""]
    rounding = f", rounded {rulebook.rounding} to {number(rulebook.step)}" if rulebook.rounding else ""
    lines.append(f"result {rulebook.result}{rounding}")
    if rulebook.periods != 1:
        lines.append(f"periods {rulebook.periods}")
    lines += [f"index {i.name}, at most {i.most}" for i in rulebook.indices]
    for fact in rulebook.facts:
        per = f" per {fact.index}" if fact.index else ""
        lines.append(f"fact {fact.name}{per}{_domain(fact.domain)}")
    lines += [f"setting {s.name}{_domain(s.domain)}, by {s.by}{_taken(s.takes)}" for s in rulebook.settings]
    lines += [f'judgement {j.name}, "{j.name} is practicable", by {j.by}{_taken(j.takes)}' for j in rulebook.judgements]
    lines += [f"constant {c.name} = {number(c.value)}" for c in rulebook.constants]
    for table in rulebook.tables:
        lines += ["", f"table {table.name} by {', '.join(table.keys)}"]
        lines += [f"    {', '.join(_label(x) for x in row.labels)} = {number(row.value)}" for row in table.rows]
    if rulebook.applies:
        lines.append("")
    lines += [f"applies when {condition(c)}" for c in rulebook.applies]
    for quantity in rulebook.quantities:
        per = f" per {quantity.index}" if quantity.index else ""
        lines += ["", f"quantity {quantity.name}{per}", *_body(quantity.body, 1)]
    return "\n".join(lines) + "\n"
