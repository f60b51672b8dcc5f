"""Closed forms of what choosing does, against published values, and their laws over random parameters.

Values "computed" were worked out by two independent methods (quadrature and 6e7 draws) from the published formula
that the test names; they are held to every digit given.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from samesum.evidence.choosing.closed_forms import (
    Noise,
    Outcome,
    enrolment_by_estimate,
    enrolment_by_truth,
    expected_maximum,
    half_normal,
    hazard,
    indifferent,
    larger_of_two,
    largest_of_equals,
    looks_in_order,
    lowest_of_all,
    pick_of_all,
    pick_of_two,
    second_look,
)

# Teichroew 1956, Ann. Math. Statist. 27:410; Harter 1961, Biometrika 48:151; computed to 14 digits.
EXPECTED_MAXIMUM = {
    2: 0.564189583547756,
    3: 0.846284375321634,
    4: 1.029375373003964,
    5: 1.162964473640520,
    6: 1.267206360611472,
    8: 1.423600306045278,
    10: 1.538752730835173,
}


@pytest.mark.parametrize(("n", "value"), sorted(EXPECTED_MAXIMUM.items()))
def test_expected_maximum(n: int, value: float) -> None:
    assert expected_maximum(n) == pytest.approx(value, abs=1e-12)


def test_largest_of_equals() -> None:
    # Teichroew 1956 with a common correlation; computed, nine digits.
    assert largest_of_equals(3, 0.2) == pytest.approx(0.169256875, abs=5.1e-10)
    assert largest_of_equals(4, 0.1, 0.5) == pytest.approx(0.072787831, abs=5.1e-10)


# Clark 1961, Operations Research 9:145; computed, nine digits.
CLARK = [
    ((0, 1, 0, 1, 0), 0.564189584, 0.681690114),
    ((0, 1, 0, 1, 0.5), 0.398942280, 0.840845057),
    ((0, 1, 0, 1, -1), 0.797884561, 0.363380228),
    ((0, 1, 0, 2, 0), 0.892062058, 1.704225285),
]


@pytest.mark.parametrize(("parameters", "mean", "variance"), CLARK)
def test_clark(parameters: tuple[float, float, float, float, float], mean: float, variance: float) -> None:
    found = larger_of_two(*parameters)
    assert found[0] == pytest.approx(mean, abs=5.1e-10)
    assert found[1] == pytest.approx(variance, abs=5.1e-10)


# Over-issuance of one either/or choice: b_d, s_d, b_m, s_m, rho, c, pick of all, second look; computed, nine digits.
EITHER_OR = [
    (0, 0.30, 0, 0.10, 0, 0, 0.126156626, 0.119682684),
    (0, 0.30, 0, 0.10, 0, 0.05, 0.124589483, 0.118031915),
    (-0.10, 0.25, 0, 0.10, 0, 0.02, 0.064461348, 0.057309215),
    (0, 0.20, 0, 0.20, 0.5, 0, 0.079788456, 0.039894228),
]


@pytest.mark.parametrize(("b_d", "s_d", "b_m", "s_m", "rho", "c", "pick", "look"), EITHER_OR)
def test_either_or(
    b_d: float, s_d: float, b_m: float, s_m: float, rho: float, c: float, pick: float, look: float
) -> None:
    options = Noise(b_d, s_d), Noise(b_m, s_m, c)
    assert pick_of_two(*options, rho).over_issuance == pytest.approx(pick, abs=5.1e-10)
    assert pick_of_all(options, rho) == pytest.approx(pick, abs=5.1e-10)
    assert second_look(*options, rho).over_issuance == pytest.approx(look, abs=5.1e-10)
    assert looks_in_order(options, rho) == pytest.approx(look, abs=5.1e-10)


def test_a_conservative_default_does_not_cure() -> None:
    # Computed, nine digits.
    assert second_look(Noise(-0.3, 0.3), Noise(0, 0.1)).over_issuance == pytest.approx(0.024994641, abs=5.1e-10)


# Enrolment: s, k, over-issuance, share that joins; computed, nine and six digits.
ENROLMENT = [(0.3, 1.0, 0.239365368, 0.5), (0.3, 1.1, 0.306449106, 0.369441), (0.2, 1.05, 0.192710796, 0.401294)]


@pytest.mark.parametrize(("s", "k", "over", "share"), ENROLMENT)
def test_enrolment_by_estimate(s: float, k: float, over: float, share: float) -> None:
    found = enrolment_by_estimate(s, k)
    assert found.over_issuance == pytest.approx(over, abs=5.1e-10)
    assert found.share == pytest.approx(share, abs=5.1e-7)


def test_enrolment_by_truth() -> None:
    # Computed, nine digits; half of the projects lie below a fixed average.
    assert enrolment_by_truth(0.3, 1.0) == Outcome(pytest.approx(0.314691651, abs=5.1e-10), 0.5)


# --- laws ----------------------------------------------------------------------------------------

errors = st.floats(0.01, 0.6)
biases = st.floats(-0.4, 0.4)
costs = st.floats(0.0, 0.5)
correlations = st.floats(-0.95, 0.95)
positive_correlations = st.floats(0.0, 0.9)


@given(errors, errors)
def test_law_half_normal(s_d: float, s_m: float) -> None:
    """b = c = rho = 0 gives s_d/sqrt(2 pi), whatever the measured option's error (half-normal mean)."""
    assert second_look(Noise(0, s_d), Noise(0, s_m)).over_issuance == pytest.approx(half_normal(s_d), rel=1e-12)
    assert half_normal(0.3) == pytest.approx(0.119682684, abs=5.1e-10)


@given(biases, errors, biases, errors, correlations)
def test_law_a_dear_option_is_never_taken(b_d: float, s_d: float, b_m: float, s_m: float, rho: float) -> None:
    """c to infinity gives b_d."""
    options = Noise(b_d, s_d), Noise(b_m, s_m, 40.0)
    assert second_look(*options, rho).over_issuance == pytest.approx(b_d, abs=1e-12)
    assert pick_of_two(*options, rho).over_issuance == pytest.approx(b_d, abs=1e-12)


@given(st.floats(-30.0, 30.0), st.floats(0.05, 0.6), errors, st.floats(-1.0, 0.0))
def test_law_conservative_default(spreads: float, s_d: float, s_m: float, rho: float) -> None:
    """With b_m = 0, c = 0 and rho at most 0 a second look is above 0 for every b_d. Beyond 37 spreads of the default
    below zero what is left is smaller than any double (phi(38) = 1e-314), so it is asked up to 30."""
    assert second_look(Noise(spreads * s_d, s_d), Noise(0, s_m), rho).over_issuance > 0.0


@given(biases, errors, biases, errors, correlations, costs)
def test_law_pick_beats_each_option(b_d: float, s_d: float, b_m: float, s_m: float, rho: float, c: float) -> None:
    """Picking after seeing everything is worth at least as much as either option taken blindly."""
    found = pick_of_two(Noise(b_d, s_d), Noise(b_m, s_m, c), rho)
    assert found.over_issuance - c * found.share >= max(b_d, b_m - c) - 1e-12


@given(biases, errors, biases, errors, correlations)
def test_law_clark_and_pick_agree(b_d: float, s_d: float, b_m: float, s_m: float, rho: float) -> None:
    """Without costs, picking is Clark's mean of the larger of two."""
    picked = pick_of_two(Noise(b_d, s_d), Noise(b_m, s_m), rho).over_issuance
    assert picked == pytest.approx(larger_of_two(b_d, s_d, b_m, s_m, rho)[0], abs=1e-12)


@settings(max_examples=25, deadline=None)
@given(st.integers(2, 5), errors, positive_correlations)
def test_law_quadrature_meets_order_statistics(n: int, s: float, rho: float) -> None:
    """The general quadrature, told options that are equal but for their last digits, meets the order statistics."""
    options = [Noise(0, s * (1 + k * 1e-12)) for k in range(n)]
    assert pick_of_all(options, rho) == pytest.approx(largest_of_equals(n, s, rho), abs=1e-9)


@settings(max_examples=25, deadline=None)
@given(biases, errors, biases, errors, costs, positive_correlations)
def test_law_an_option_too_dear_changes_nothing(
    b_d: float, s_d: float, b_m: float, s_m: float, c: float, rho: float
) -> None:
    """A third option that nobody can afford leaves the two-option formula."""
    two = [Noise(b_d, s_d), Noise(b_m, s_m, c)]
    three = [*two, Noise(0, 0.1, 60.0)]
    assert pick_of_all(three, rho) == pytest.approx(pick_of_all(two, rho), abs=1e-9)
    assert looks_in_order(three, rho) == pytest.approx(looks_in_order(two, rho), abs=1e-9)


@settings(max_examples=25, deadline=None)
@given(st.lists(st.tuples(biases, errors), min_size=2, max_size=4))
def test_law_lowest_never_over_issues_more_than_any_option(options: list[tuple[float, float]]) -> None:
    """The lowest of the options is, on average, at most each of them; indifference lies between it and the pick."""
    noises = [Noise(b, s) for b, s in options]
    lowest, picked = lowest_of_all(noises), pick_of_all(noises)
    assert lowest <= min(b for b, _ in options) + 1e-10
    assert lowest - 1e-10 <= indifferent(noises) <= picked + 1e-10


@given(st.floats(-5.0, 200.0))
def test_law_hazard(x: float) -> None:
    """A normal's mean above x lies above x, and by less than 1/x (Gordon 1941, recalled)."""
    found = hazard(x)
    assert found > x
    if x > 0:
        assert found < x + 1 / x


@given(st.floats(0.02, 0.25), st.floats(0.8, 1.2))
def test_law_enrolment_over_issues(s: float, k: float) -> None:
    """Selection by estimate never lowers the mean, and by more the higher the bar."""
    assert enrolment_by_estimate(s, k).over_issuance >= 0.0
    assert enrolment_by_estimate(s, k + 0.05).over_issuance > enrolment_by_estimate(s, k).over_issuance
    assert enrolment_by_truth(s, k).over_issuance >= 0.0


def test_errors_that_cannot_all_be_correlated() -> None:
    with pytest.raises(ValueError, match=r"between -0.5 and 1"):
        largest_of_equals(3, 0.1, -0.6)
    assert largest_of_equals(3, 0.1, -0.5) == pytest.approx(0.1 * math.sqrt(1.5) * expected_maximum(3), rel=1e-12)


def test_three_unequal_options_against_draws() -> None:
    """Costs, biases and a common correlation at once, against a million draws of our own."""
    options = [Noise(0, 0.3), Noise(0.1, 0.2, 0.01), Noise(0, 0.1, 0.02)]
    generator = np.random.Generator(np.random.PCG64(4))
    shared = generator.standard_normal(10**6) * math.sqrt(0.3)
    drawn = [o.bias + o.error * (shared + math.sqrt(0.7) * generator.standard_normal(10**6)) for o in options]
    best = np.argmax([value - option.cost for value, option in zip(drawn, options, strict=True)], axis=0)
    picked = np.choose(best, drawn)
    looked = np.where(drawn[0] >= -0.01, drawn[0], np.where(drawn[1] >= -0.02, drawn[1], drawn[2]))
    for values, formula in ((picked, pick_of_all(options, 0.3)), (looked, looks_in_order(options, 0.3))):
        assert abs(values.mean() - formula) < 4 * values.std() / 1000
