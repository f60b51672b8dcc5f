"""The solver's answers, point by point: yes with a point, no with none, and "cannot tell" rather than a guess."""

from __future__ import annotations

import time
from fractions import Fraction

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from samesum.evidence.routes import solver as s
from samesum.evidence.routes import symbols
from samesum.evidence.routes.ranges import Bounds
from samesum.evidence.routes.solver import NEGATIVE, POSITIVE, ZERO, Solver
from samesum.evidence.routes.symbols import Sum, call, multiply, name, number, subtract

BOX = {"x": Bounds(Fraction(-3), Fraction(3)), "y": Bounds(Fraction(-3), Fraction(3))}
X, Y = name("x"), name("y")


def solver(seconds: float = 60.0) -> Solver:
    return Solver(BOX, time.monotonic() + seconds)


def can(a: Sum, sign: int) -> str:
    made = solver()
    made.add(made.sign(a, sign))
    return made.check()


def made(function: str, *arguments: Sum) -> Sum:
    found = call(function, arguments)
    assert found is not None
    return found


@pytest.mark.parametrize(
    ("a", "signs"),
    [
        (multiply(X, X), {ZERO, POSITIVE}),
        (subtract(multiply(X, X), number(2)), {NEGATIVE, ZERO, POSITIVE}),
        (subtract(multiply(X, X), number(9)), {NEGATIVE, ZERO}),
        (subtract(made("floor", X), X), {NEGATIVE, ZERO}),
        (subtract(made("ceil", X), X), {ZERO, POSITIVE}),
        (subtract(made("abs", X), X), {ZERO, POSITIVE}),
        (subtract(made("min", X, Y), made("max", X, Y)), {NEGATIVE, ZERO}),
        (subtract(made("abs", subtract(made("round", X), X)), number(Fraction(1, 2))), {NEGATIVE, ZERO}),
        (subtract(multiply(made("sqrt", made("abs", X)), made("sqrt", made("abs", X))), made("abs", X)), {ZERO}),
    ],
)
def test_a_sum_has_exactly_the_signs_that_it_can_have(a: Sum, signs: set[int]) -> None:
    assert {sign for sign in (NEGATIVE, ZERO, POSITIVE) if can(a, sign) == "yes"} == signs
    assert {sign for sign in (NEGATIVE, ZERO, POSITIVE) if can(a, sign) == "no"} == {0, 1, 2} - signs


@pytest.mark.parametrize(
    ("function", "expected"), [("round", -3), ("floor", -3), ("ceil", -2), ("abs", Fraction(5, 2))]
)
def test_halves_and_negative_numbers_are_rounded_as_the_language_rounds(function: str, expected: Fraction) -> None:
    at = Solver({"x": Bounds(Fraction(-5, 2), Fraction(-5, 2))}, time.monotonic() + 60)
    at.add(at.sign(subtract(made(function, X), number(expected)), ZERO))
    assert at.check() == "yes"


@settings(max_examples=50, deadline=None)
@given(st.integers(-3, 3), st.integers(-3, 3), st.integers(-6, 6), st.sampled_from([NEGATIVE, ZERO, POSITIVE]))
def test_a_point_that_is_brought_back_has_the_sign_and_lies_in_the_box(p: int, q: int, c: int, sign: int) -> None:
    a = symbols.total([symbols.scale(X, Fraction(p)), symbols.scale(multiply(X, Y), Fraction(q)), number(c)])
    asked = solver()
    asked.add(asked.sign(a, sign))
    if asked.check() == "yes":
        point = asked.point()
        assert all(-3 <= value <= 3 for value in point.values())
        assert s.sign_at(a, point) == sign


def test_what_is_taken_back_no_longer_counts() -> None:
    asked = solver()
    asked.push([asked.sign(subtract(X, number(1)), POSITIVE)])
    asked.push([asked.sign(X, NEGATIVE)])
    assert asked.check() == "no"
    asked.pop()
    assert asked.check() == "yes"
    assert asked.check(asked.sign(X, NEGATIVE)) == "no"
    assert asked.check() == "yes"


def test_a_solver_without_time_cannot_tell() -> None:
    assert solver(-1.0).check() == "cannot tell"


def test_a_setting_is_eliminated() -> None:
    """Some s in [0, 1] is below x: exactly where x > 0."""
    asked = Solver({"s": Bounds(Fraction(0), Fraction(1))}, time.monotonic() + 60)
    x, free = asked.name("x"), asked.name("s")
    left = asked.without(["s"], [free < x])
    assert left is not None
    assert asked.check(left, x == asked.value(Fraction(1, 1000))) == "yes"
    assert asked.check(left, x == asked.value(Fraction(0))) == "no"
    assert asked.check(asked.negated(left), x == asked.value(Fraction(0))) == "yes"


@pytest.mark.parametrize("function", ["exp", "ln"])
def test_functions_beyond_the_solver_are_known_to_be(function: str) -> None:
    assert s.beyond(made(function, X))
    assert s.beyond(multiply(Y, made("abs", made(function, X))))
    assert not s.beyond(made("abs", X))


def test_what_the_solver_gives_up_on_is_no_refutation() -> None:
    """Whole x, y, z above 0 with x³ + y³ = z³ (there are none, by Euler 1770; no solver finds that out in a moment)."""
    box = {each: Bounds(Fraction(1), None) for each in "xyz"}
    asked = Solver(box, time.monotonic() + 60, patience=200)
    cubes = []
    for each in "xyz":
        whole = made("floor", name(each))
        cubes.append(multiply(multiply(whole, whole), whole))
    asked.add(asked.sign(subtract(symbols.add(cubes[0], cubes[1]), cubes[2]), ZERO))
    assert asked.check() == "cannot tell"
