"""Choices that nobody makes, by brute force, worked out by hand."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import pytest

from brute.examples import X, f, n, result
from brute.rulebooks import (
    HIGHEST,
    LOWEST,
    Cases,
    Choice,
    Compare,
    Follows,
    Formula,
    Holds,
    Judgement,
    Option,
    Quantity,
    Ref,
    Rulebook,
    Takes,
    When,
)
from brute.text import render
from brute.trial import Case, trial

NEVER = Compare("<", n(1), n(0))
A, B, C = Option("a", f(4)), Option("b", f(2), error=Fraction(1, 4)), Option("c", f(2), error=Fraction(1, 2))


def only(made: Rulebook, given: Case | None = None) -> float:
    found = trial(made, given or {})
    assert found.routes == 1
    return found.results[0]


@pytest.mark.parametrize(
    ("takes", "options", "number"),
    [
        ("a", (A, B), 4),
        ("a", (replace(A, only_when=NEVER), replace(B, body=f(1)), C), 1),
        ("a", (replace(A, only_when=NEVER), B, replace(C, body=f(9), reference=True)), 9),
        (LOWEST, (A, B), 2),
        (LOWEST, (A, replace(B, only_when=NEVER)), 4),
        (HIGHEST, (A, B), 4),
    ],
)
def test_what_is_taken(takes: str, options: tuple[Option, ...], number: int) -> None:
    assert only(result(Choice("developer", options, takes=takes))) == number


def test_none_open_is_a_gap() -> None:
    options = (replace(A, only_when=NEVER), replace(B, only_when=NEVER))
    for takes in ("a", LOWEST):
        assert trial(result(Choice("developer", options, takes=takes)), {}).routes == 0


def follower(choice: Choice, *conditions: str) -> Rulebook:
    """What asks a follower of a follower of the choice: 1 for the first of ``conditions`` that it takes, and so on."""
    follows = [Option(option.name, f(0)) for option in choice.options]
    whens = [When(Takes("q3", option), f(k)) for k, option in enumerate(conditions, start=1)]
    asking = Cases((*whens, When(None, f(0))), in_order=True)
    others = [("q1", choice), ("q2", Follows("q1", tuple(follows))), ("q3", Follows("q2", tuple(reversed(follows))))]
    return Rulebook("credits", (Quantity("credits", asking), *(Quantity(name, body) for name, body in others)))


def test_of_several_alike_the_one_most_fit_for_the_truth() -> None:
    """``a`` is higher, ``b`` and ``c`` are as low as each other and ``b`` errs less, unless ``c`` is the reference."""
    assert only(follower(Choice("developer", (A, C, B), takes=LOWEST), "a", "c", "b")) == 3
    assert only(follower(Choice("developer", (A, replace(C, reference=True), B), takes=LOWEST), "a", "c", "b")) == 2
    assert only(follower(Choice("developer", (A, C, B), takes=HIGHEST), "b", "c", "a")) == 3
    assert only(follower(Choice("developer", (A, C, replace(B, only_when=NEVER)), takes=LOWEST), "b", "c")) == 2
    assert only(follower(Choice("developer", (A, C, B), takes="c"), "a", "b", "c")) == 3


def test_a_choice_inside_the_lowest_stays_one() -> None:
    """1 or 5 by the developer, against 4: the lowest is 1 or 4."""
    inner = Choice("developer", (Option("low", f(1)), Option("high", f(5))))
    found = trial(result(Choice("developer", (A, Option("b", inner)), takes=LOWEST)), {})
    assert (found.routes, found.results) == (2, (1, 4))


def test_what_is_prescribed_is_no_freedom() -> None:
    body = Cases((When(Holds("read"), Formula(Ref("x"))), When(None, f(0))))
    made = replace(result(body, facts=(X,)), judgements=(Judgement("read", "verifier", True),))
    assert only(made, {"x": Fraction(3)}) == 3
    assert "by verifier, takes yes\n" in render(made)
