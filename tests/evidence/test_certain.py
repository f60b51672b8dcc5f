"""Numbers with certainty: fractions where they are fractions, two ends around the others, and nothing where unclear."""

from __future__ import annotations

import math
from fractions import Fraction

import pytest

from samesum.evidence.trial.certain import Between, Unclear, ends_of, result_of
from samesum.evidence.trial.plan import Plan, make_plan
from samesum.graph import build
from samesum.reading.read import read


def plan_of(formula: str) -> Plan:
    text = f'rulebook "Certain", draft "1"\nresult y\nfact a, -10 to 10\nquantity y\n{formula}\n'
    reading = read(text, "certain.rulebook")
    assert reading.problems == () and reading.model is not None
    return make_plan(build(reading.model))


def at(formula: str, a: str) -> Between:
    return result_of(plan_of(formula), {"a": Fraction(a)})


@pytest.mark.parametrize(
    ("formula", "a", "exact"),
    [
        ("0.1 + 0.2 - a", "0.3", "0"),
        ("a / 3 + a / 3 + a / 3 - a", "7.7", "0"),
        ("sqrt(a) - 1.5", "2.25", "0"),
        ("a ^ 1.5", "4", "8"),
        ("a ^ -2", "-0.5", "4"),
        ("exp(a - 1) + ln(a)", "1", "1"),
        ("round(a) + floor(a) + ceil(a)", "-2.5", "-8"),
        ("max(abs(a), 2) - min(a, 0)", "-3", "6"),
    ],
)
def test_what_is_a_fraction_is_worked_out_exactly(formula: str, a: str, exact: str) -> None:
    assert at(f"    = {formula}", a) == Between(Fraction(exact), Fraction(exact))


@pytest.mark.parametrize(
    ("formula", "a"), [("sqrt(a) * sqrt(a) - a", "5"), ("exp(ln(a)) - a", "7"), ("(a ^ 0.3) ^ 10 - a * a * a", "3")]
)
def test_what_is_none_lies_between_two_near_ends(formula: str, a: str) -> None:
    # each is zero
    found = at(f"    = {formula}", a)
    assert found.low < 0 < found.high and found.high - found.low < Fraction(1, 10**10)


def test_a_root_lies_where_it_is() -> None:
    found = at("    = sqrt(a)", "2")
    assert found.low**2 < 2 < found.high**2
    assert math.isclose(float(found.low), float(found.high), rel_tol=1e-14)


@pytest.mark.parametrize(
    ("formula", "a"),
    [
        ("    = 1 / (sqrt(a) * sqrt(a) - a)", "5"),
        ("    = ln(a)", "-1"),
        ("    = sqrt(a)", "-1"),
        # whether the case is open is the rounding of floats
        ("    cases\n        when sqrt(a) * sqrt(a) < a\n            = 1\n        otherwise\n            = 2", "5"),
        ("    cases\n        when a < 5\n            = 1", "5"),
    ],
)
def test_what_cannot_be_told_is_not_told(formula: str, a: str) -> None:
    with pytest.raises(Unclear):
        at(formula, a)


def test_a_branch_that_is_not_open_for_certain_is_no_result() -> None:
    cases = "    cases\n        when a <= 5\n            = 1\n        when a >= 5\n            = 2"
    plan = plan_of(cases)
    point = next(iter(plan.points))
    assert result_of(plan, {"a": Fraction(5)}, {point: 1}).low == 2
    with pytest.raises(Unclear):
        # floats take the two for one; they are not
        result_of(plan, {"a": Fraction(5) - Fraction(1, 10**15)}, {point: 1})
    ends = ends_of(plan, {"a": Fraction(5)})
    assert ends is not None and ends.apart == 1 and ends.spread == 1
