"""The condition of a lint rule."""

from __future__ import annotations

from fractions import Fraction

import pytest

from samesum.reading.read import Reader
from samesum.reading.where import (
    AllOf,
    AnyOf,
    AttributeKind,
    Compare,
    IsOneOf,
    IsYes,
    NotSo,
    Plain,
    WhereMistake,
    parse_where,
    unfit_names,
)

ATTRIBUTES: dict[str, AttributeKind] = {
    "kind": ("choice", "cases", "overlap"),
    "clause": (),
    "jump": "number",
    "steered": "yes or no",
}


def test_a_condition_in_the_languages_own_syntax(reader: Reader) -> None:
    where = parse_where("kind is one of choice or overlap and not (steered or jump > 5 %)", reader)
    assert isinstance(where, AllOf)
    first, second = where.parts
    assert isinstance(first, IsOneOf) and first.values == ("choice", "overlap")
    assert isinstance(second, NotSo) and isinstance(second.part, AnyOf)
    steered, jump = second.part.parts
    assert isinstance(steered, IsYes)
    assert isinstance(jump, Compare) and isinstance(jump.right, Plain) and jump.right.value == Fraction(1, 20)
    assert unfit_names(where, ATTRIBUTES) == ()


def test_a_condition_may_run_over_several_lines(reader: Reader) -> None:
    where = parse_where("kind is choice\nand jump > 0", reader)
    assert isinstance(where, AllOf)
    assert where.parts[1].span.line == 2 and where.parts[1].span.column == 5


@pytest.mark.parametrize(
    ("text", "column", "words"),
    [
        ("kind == choice", 6, "`==`"),
        ("jump > 5 [t]", 8, "no unit"),
        ("jump + 1 > 5", 1, "nothing is calculated"),
        ("q takes left", 1, "cannot stand in a rule"),
        ("(kind is choice", 1, "never closed"),
        ("", 1, "ends too early"),
        ("(" * 3000 + "jump" + ")" * 3000 + " > 3", 1, "nothing is calculated"),
        ("(" * 3000 + "jump > 3" + ")" * 3000, 62, "nested too deep"),
        ("kind is choice and", 19, "ends too early"),
        ("sum(jump over kind) > 1", 1, "nothing is calculated"),
        ("jump", 1, "not yes or no"),
        ("jmp > 5", 1, "did you mean `jump`?"),
        ("kind > 5", 1, "no number to compare"),
        ("kind is coice", 1, "did you mean `choice`?"),
        ("steered is choice", 1, "no named values"),
    ],
)
def test_a_mistake_says_where_and_what(text: str, column: int, words: str, reader: Reader) -> None:
    found = parse_where(text, reader)
    mistakes = (found,) if isinstance(found, WhereMistake) else unfit_names(found, ATTRIBUTES)
    (mistake,) = mistakes
    assert words in f"{mistake.says} {mistake.remedy}"
    assert mistake.span.column == column
