"""Outward-rounded intervals hold the exact result of every operation (property tests against exact fractions)."""

from __future__ import annotations

import math
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from samesum.evidence.trial import intervals as iv
from samesum.evidence.trial.intervals import Interval

NUMBERS = st.floats(-1e6, 1e6, allow_nan=False)


@st.composite
def boxes(draw: st.DrawFn) -> tuple[Interval, Fraction]:
    """An interval and an exact number inside it."""
    ends = sorted((draw(NUMBERS), draw(NUMBERS)))
    share = draw(st.fractions(0, 1))
    inside = Fraction(ends[0]) + share * (Fraction(ends[1]) - Fraction(ends[0]))
    return Interval(np.array([ends[0]]), np.array([ends[1]])), inside


def holds(found: Interval, value: Fraction) -> bool:
    low, high = float(found.low[0]), float(found.high[0])
    return (math.isinf(low) or Fraction(low) <= value) and (math.isinf(high) or value <= Fraction(high))


@given(boxes(), boxes())
def test_sums_products_and_quotients(one: tuple[Interval, Fraction], other: tuple[Interval, Fraction]) -> None:
    (a, x), (b, y) = one, other
    assert holds(iv.added(a, b), x + y)
    assert holds(iv.multiplied(a, b), x * y)
    if y:
        with np.errstate(all="ignore"):
            assert holds(iv.divided(a, b), x / y)
    assert holds(iv.smallest([a, b]), min(x, y))
    assert holds(iv.largest([a, b]), max(x, y))
    assert holds(iv.around([a, b]), x) and holds(iv.around([a, b]), y)


@given(boxes(), st.integers(1, 7))
def test_whole_powers(one: tuple[Interval, Fraction], exponent: int) -> None:
    a, x = one
    assert holds(iv.whole_power(a, exponent), x**exponent)


@given(boxes(), st.sampled_from(["abs", "floor", "ceil", "round"]))
def test_exact_functions(one: tuple[Interval, Fraction], name: str) -> None:
    a, x = one
    half_up = math.floor(abs(x) + Fraction(1, 2)) * (1 if x >= 0 else -1)
    exact = {"abs": abs(x), "floor": math.floor(x), "ceil": math.ceil(x), "round": half_up}[name]
    assert holds(iv.called(name, a), Fraction(exact))


@pytest.mark.parametrize("value", ["0.1", "1/3", "44/12", "-2.7", "1e-12"])
def test_a_number_that_is_no_float_lies_between_two(value: str) -> None:
    exact = Fraction(value)
    found = iv.exactly(exact)
    assert Fraction(float(found.low[0])) <= exact <= Fraction(float(found.high[0]))
    assert found.high[0] - found.low[0] <= 2 * abs(np.spacing(float(exact)))


def test_nothing_comes_of_zero_times_infinity_and_of_infinity_less_infinity() -> None:
    zero, whole = Interval(np.zeros(1), np.zeros(1)), Interval(np.array([-np.inf]), np.array([np.inf]))
    assert iv.multiplied(zero, whole).low[0] == 0 == iv.multiplied(zero, whole).high[0]
    with np.errstate(all="ignore"):
        both = iv.added(whole, Interval(-whole.high, -whole.low))
    assert (both.low[0], both.high[0]) == (-np.inf, np.inf)
