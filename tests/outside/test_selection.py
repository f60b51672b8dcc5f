"""The simulation of choice against published values: a million projects each, within four standard errors, and the
closed form that stands beside it to every digit given. Sources and values as in ``test_closed_forms``."""

from __future__ import annotations

import pytest

from samesum.evidence.choosing.selection import Figure
from support.choosing import either_or, figure, found, simulate

MILLION = 10**6
# b_d, s_d, b_m, s_m, rho, c, pick of all, second look: computed by quadrature and 6e7 draws.
EITHER_OR = [
    (0, 0.30, 0, 0.10, 0, 0, 0.126156626, 0.119682684),
    (0, 0.30, 0, 0.10, 0, 0.05, 0.124589483, 0.118031915),
    (-0.10, 0.25, 0, 0.10, 0, 0.02, 0.064461348, 0.057309215),
    (0, 0.20, 0, 0.20, 0.5, 0, 0.079788456, 0.039894228),
]


def holds(row: Figure, published: float) -> None:
    assert row.closed_form == pytest.approx(published, abs=6e-10)
    assert abs(row.simulated - published) < 4 * row.simulated_error
    assert 0 < row.simulated_error < 0.001


@pytest.mark.parametrize(("b_d", "s_d", "b_m", "s_m", "rho", "c", "pick", "look"), EITHER_OR)
def test_either_or(
    b_d: float, s_d: float, b_m: float, s_m: float, rho: float, c: float, pick: float, look: float
) -> None:
    text = either_or([(b_d, s_d, 0.0), (b_m, s_m, c)], rho)
    selection = simulate(text, MILLION, price=1.0 if c else None, jobs=2)
    for figures in (selection.figures, found(selection, "stock").figures):
        holds(figure(figures, "pick of all"), pick)
        holds(figure(figures, "second look"), look)
    mandated = figure(found(selection, "stock").figures, "mandated", "way_1")
    assert mandated.closed_form == pytest.approx(b_d, abs=1e-12)
    assert abs(mandated.simulated - b_d) < 4 * mandated.simulated_error


# Teichroew 1956: n equally noisy unbiased options with a common correlation; computed.
@pytest.mark.parametrize(("n", "s", "rho", "value"), [(3, 0.2, 0, 0.169256875), (4, 0.1, 0.5, 0.072787831)])
def test_equally_noisy_options(n: int, s: float, rho: float, value: float) -> None:
    selection = simulate(either_or([(0, s, 0)] * n, rho), MILLION, jobs=2)
    holds(figure(selection.figures, "pick of all"), value)


def test_a_conservative_default_does_not_cure() -> None:
    selection = simulate(either_or([(-0.3, 0.3, 0), (0, 0.1, 0)]), MILLION, jobs=2)
    holds(figure(selection.figures, "second look"), 0.024994641)


# Enrolment: s, k, over-issuance, share that joins; computed.
ENROLMENT = [(0.3, 1, 0.239365368, 0.5), (0.3, 1.1, 0.306449106, 0.369441), (0.2, 1.05, 0.192710796, 0.401294)]


@pytest.mark.parametrize(("s", "k", "over", "share"), ENROLMENT)
def test_enrolment_when_the_estimate_errs(s: float, k: float, over: float, share: float) -> None:
    selection = simulate(either_or([(0, 0.1, 0), (0, s, 0)]), MILLION, join=k, jobs=2)
    joined = figure(found(selection, "stock").figures, "mandated", "way_2").joined
    assert joined is not None and joined.closed_form is not None
    assert joined.closed_form == pytest.approx(over, abs=6e-10)
    assert joined.closed_share == pytest.approx(share, abs=6e-7)
    assert abs(joined.over_issuance - over) < 4 * joined.standard_error
    assert abs(joined.share - share) < 4 * 0.0005


def test_enrolment_when_the_truth_scatters_around_a_fixed_average() -> None:
    selection = simulate(either_or([(0, 0.1, 0), (0, 0.3, 0)]), MILLION, join=1.0, jobs=2)
    joined = found(selection, "stock").truth_scatters["way_2"]
    assert joined.closed_form == pytest.approx(0.314691651, abs=6e-10)
    assert abs(joined.over_issuance - 0.314691651) < 4 * joined.standard_error
