"""Extremes over a free setting that lie inside its domain: to the rounding of floats, or not called complete."""

from __future__ import annotations

import math
from fractions import Fraction

import pytest

from samesum.evidence.trial.outcome import CaseTrial, try_out
from samesum.graph import build
from samesum.reading.cases import Case
from samesum.reading.read import read
from samesum.spans import START


def trial_of(body: str, k: int) -> CaseTrial:
    text = (
        'rulebook "Inside", draft "1"\nresult y\nfact k, 0 to 100\nsetting d, 0 to 1, by developer\n'
        f"quantity y\n{body}\n"
    )
    reading = read(text, "inside.rulebook")
    assert reading.problems == () and reading.model is not None
    return try_out(build(reading.model), [Case("one", {"k": Fraction(k)}, None, START)], 10.0).case(0)


@pytest.mark.parametrize(
    ("formula", "k", "lowest", "highest"),
    [
        # d − d² = 1/4 − (d − 1/2)²
        ("k + d - d ^ 2", 1, 1, 5 / 4),
        # d·(0.3 − d) is highest at 0.15: 0.0225; at 1 it is −0.7
        ("k + 1000 * d * (0.3 - d)", 1, -699, 23.5),
        # d·exp(−3d) has its slope zero at 1/3: 1 / (3e)
        ("k * d * exp(-3 * d)", 7, 0, 7 / (3 * math.e)),
        # 30d and 11 − 50d meet at 11/80
        ("k + max(30 * d, 11 - 50 * d)", 1, 1 + 330 / 80, 31),
        # zero at 1/3, which is no float and on no grid of halves
        ("0.001 + k * abs(d - 1 / 3)", 97, 0.001, 0.001 + 97 * 2 / 3),
        # d / (1 + d²) has its slope zero at 1: 1/2
        ("d / (k + d ^ 2)", 1, 0, 0.5),
    ],
)
def test_an_extreme_inside_the_domain_is_found_to_the_last_digits(
    formula: str, k: int, lowest: float, highest: float
) -> None:
    found = trial_of(f"    = {formula}", k)
    assert found.complete and found.lowest is not None and found.highest is not None
    assert found.lowest.value == pytest.approx(lowest, rel=1e-12, abs=1e-14)
    assert found.highest.value == pytest.approx(highest, rel=1e-12, abs=1e-14)


def test_what_was_not_found_to_the_last_digits_is_not_called_complete() -> None:
    # open where d² < 1/2, a bend that no straight line finds: the highest is 10·√½, not reached
    body = "    cases\n        when d ^ 2 < 0.5\n            = k * d\n        when d ^ 2 >= 0.5\n            = 0.1"
    found = trial_of(body, 10)
    assert found.highest is not None
    assert not found.complete or found.highest.value == pytest.approx(10 * math.sqrt(0.5), rel=1e-12)
    assert found.complete or (found.proved is not None and found.proved[1] is not None)
    assert found.complete or (found.proved is not None and (found.proved[1] or 0) >= 10 * math.sqrt(0.5))


def test_an_extreme_that_is_only_approached_is_told_as_near_as_comparisons_tell_values_apart() -> None:
    # 10·d where d < 7/10: below 7, and nowhere 7
    found = trial_of(
        "    cases\n        when d < 0.7\n            = k * d\n        when d >= 0.7\n            = 0.1", 10
    )
    assert found.complete and found.highest is not None
    assert 7 * (1 - 1e-11) < found.highest.value < 7
    # the same where the setting is small beside what is compared
    body = (
        "    cases\n        when 1000 + d / 1000 < 1000.0005\n            = k * d\n"
        "        when 1000 + d / 1000 >= 1000.0005\n            = 0.1"
    )
    found = trial_of(body, 10)
    assert found.highest is not None
    # 2·10⁻¹² × 2000 / (1/1000) is 4·10⁻⁶ of d beside 1/2, and up to twice that
    assert 5 - 1e-4 < found.highest.value < 5
