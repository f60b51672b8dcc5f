"""One project by brute force, worked out by hand."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

import pytest

from brute.examples import MARSH, X, cases, f, less, more, n, result, yes
from brute.rulebooks import (
    Choice,
    Compare,
    Holds,
    Option,
)
from brute.trial import Case, trial

# --- trial -------------------------------------------------------------------------------------


def test_trial_of_the_worked_example() -> None:
    """Two strata of 120 and 80 ha on peat, salinity 12, plots at 105.5 and 98 t C/ha: the regional stock of 90 gives
    90 · 200 = 18000 t C, plots 105.5 · 120 + 98 · 80 = 20500 t C; methane 5 or 3; discount 5 to 20 %."""
    area, plots = [Fraction(120), Fraction(80)], [Fraction("105.5"), Fraction(98)]
    given: Case = {"area": area, "plot_mean": plots, "soil": "peaty", "salinity": Fraction(12)}
    found = trial(MARSH, given)
    low, high = 18000 * 44 / 12 - 5, 20500 * 44 / 12 - 3
    assert found.routes == 2
    assert found.lowest is not None and found.highest is not None and found.reference is not None
    assert found.lowest.value == pytest.approx(low * 0.8)
    assert found.highest.value == pytest.approx(high * 0.95)
    assert found.reference.value == pytest.approx(high * 0.875)
    assert found.spread == pytest.approx((high * 0.95 - low * 0.8) / (high * 0.875))
    assert dict(found.swing)["soil_carbon"] == pytest.approx(1 - low / high)
    assert dict(found.swing)["discount"] == pytest.approx(0.075 / 0.875)
    assert dict(found.left_if_closed)["soil_carbon"] == pytest.approx(0.15 / 0.875)
    held = trial(MARSH, {**given, "discount": Fraction("0.125"), "access": False})
    assert held.results == pytest.approx((low * 0.875, high * 0.875))
    assert dict(held.left_if_closed)["soil_carbon"] == 0


def test_trial_outside_and_in_a_gap() -> None:
    made = result(cases(less(5), more(8)), facts=(X, yes("g")), applies=(Holds("g"),))
    assert trial(made, {"x": Fraction(1), "g": False}).outside
    stuck = trial(made, {"x": Fraction(6), "g": True})
    assert (stuck.outside, stuck.routes, stuck.lowest) == (False, 0, None)


@pytest.mark.parametrize(
    ("rounding", "value", "issued"),
    [("down", "7.9", 7), ("down", "-7.1", -8), ("up", "7.1", 8), ("nearest", "7.5", 8), ("nearest", "-7.5", -8)],
)
def test_rounding(rounding: str, value: str, issued: int) -> None:
    made = result(f(n(value)), rounding=rounding)
    assert trial(made, {}).results == (issued,)


def test_the_reference_takes_what_is_marked_then_the_smallest_error() -> None:
    def reference(*options: Option) -> str:
        found = trial(result(Choice("developer", options)), {}).reference
        assert found is not None
        return found.route["q1"]

    a, b = Option("a", f(1), error=Fraction(1, 2)), Option("b", f(2), error=Fraction(1, 4))
    c = Option("c", f(3))
    assert reference(c, a, b) == "b"
    assert reference(a, b, replace(c, reference=True)) == "c"
    assert reference(c, replace(a, error=None)) == "c"
    assert reference(a, replace(b, only_when=Compare("<", n(1), n(0)))) == "a"
