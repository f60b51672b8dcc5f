"""Extremes without listing routes: parts that are shared, settings in the middle, ends that are not attained."""

from __future__ import annotations

import time
from fractions import Fraction

import numpy as np
import pytest

from samesum.evidence.choosing.batches import batches_of
from samesum.evidence.trial.extremes import plan_work
from samesum.evidence.trial.figures import Figures, figures_of
from samesum.reading.cases import Case, Value
from samesum.reading.read import read
from samesum.spans import START


def figures(body: str, head: str = "", seconds: float = 20.0, **values: Value | tuple[Value, ...]) -> Figures:
    reading = read(f'rulebook "Extremes", draft "1"\nresult r\n{head}{body}', "extremes")
    assert reading.problems == () and reading.model is not None
    [batch] = batches_of(reading.model, [Case("", values, None, START)])
    return figures_of(batch, time.monotonic() + seconds)


def ends(found: Figures) -> tuple[float, float]:
    return float(found.lowest.value[0]), float(found.highest.value[0])


def choice(name: str, *values: str) -> str:
    text = f"quantity {name}\n    choice by developer\n"
    for number, value in enumerate(values):
        text += f"        option o{number}\n            = {value}\n"
    return text


def test_a_shared_choice_is_made_once() -> None:
    """q − q is zero whatever is taken; folding the two uses apart would give −3 and 3."""
    found = figures(choice("q", "1", "4") + choice("s", "0", "10") + "quantity r\n    = (q + s) - q * 1\n")
    assert ends(found) == (0, 10)
    assert found.complete[0] and found.routes[0] == 4 and found.distinct[0] == 2


def test_a_shared_part_with_many_choices_of_its_own_stands_for_itself() -> None:
    """c is used twice and rests on sixty choices: listing 2^60 routes is out of the question."""
    parts = "".join(choice(f"q{number}", f"{number} + 1", f"{number} + 3") for number in range(60))
    total = " + ".join(f"q{number}" for number in range(60))
    found = figures(
        f"{parts}quantity c\n    = {total}\nquantity r\n    = 3 * c - max(0, c - 1000) * 0.5 + min(c, 5000)\n"
    )
    low, high = sum(n + 1 for n in range(60)), sum(n + 3 for n in range(60))

    def value(c: int) -> float:
        return 3 * c - max(0, c - 1000) * 0.5 + min(c, 5000)

    # rises all the way, but the plan cannot see that: honest, or exact
    assert found.routes[0] == 2**60
    if found.complete[0]:
        assert ends(found) == pytest.approx((value(low), value(high)))
    else:
        assert found.proved_low[0] <= value(low) and found.proved_high[0] >= value(high)
        assert found.lowest.value[0] >= value(low) and found.highest.value[0] <= value(high)


def test_a_shared_part_in_which_the_result_only_rises_is_exact() -> None:
    parts = "".join(choice(f"q{number}", f"{number} + 1", f"{number} + 3") for number in range(60))
    total = " + ".join(f"q{number}" for number in range(60))
    found = figures(f"{parts}quantity c\n    = {total}\nquantity d\n    = c * 0.2\nquantity r\n    = c - d * 2\n")
    low, high = sum(n + 1 for n in range(60)), sum(n + 3 for n in range(60))
    assert found.complete[0]
    assert ends(found) == pytest.approx((0.6 * low, 0.6 * high))


def test_a_condition_on_a_choice_elsewhere() -> None:
    body = choice("q", "1", "4") + (
        "quantity bonus\n    cases\n        when q takes o0\n            = 10\n        otherwise\n            = 0\n"
        "quantity r\n    = q + bonus\n"
    )
    found = figures(body)
    assert ends(found) == (4, 11)
    assert {id: int(codes[0]) for id, codes in found.highest.route.items()} == {"q": 0, "bonus": 0}


@pytest.mark.parametrize(
    ("formula", "low", "high"),
    [
        ("s * (1 - s)", 0.0, 0.25),
        ("(s - 0.3) ^ 2", 0.0, 0.49),
        ("abs(s - 0.7) - s", -0.7, 0.7),
        ("min(s, 1 - s)", 0.0, 0.5),
        ("exp(s) - 2 * s", np.exp(np.log(2)) - 2 * np.log(2), 1.0),
        ("(1 + s) / (2 - s)", 0.5, 2.0),
        ("s ^ 3 - s", -2 / (3 * np.sqrt(3)), 0.0),
    ],
)
def test_a_setting_is_tried_in_the_middle_where_the_result_turns(formula: str, low: float, high: float) -> None:
    found = figures(f"quantity r\n    = {formula}\n", "setting s, 0 to 1, by developer\n")
    assert ends(found) == pytest.approx((low, high), abs=1e-9)
    assert found.complete[0], (found.proved_low, found.proved_high)
    assert found.distinct[0] == -1  # a setting is free


def test_where_a_condition_turns_both_sides_are_tried() -> None:
    body = "quantity r\n    cases\n        when s < x\n            = s\n        when s >= x\n            = -s\n"
    found = figures(body, "fact x, 0 to 10\nsetting s, 0 to 10, by verifier\n", x=Fraction(4))
    low, high = ends(found)
    assert low == -10
    assert high == pytest.approx(4, abs=1e-7) and high < 4  # approached, not attained
    assert found.routes[0] == 2


def test_two_settings_that_meet() -> None:
    body = "quantity r\n    cases\n        when s < t\n            = s - t\n        when s >= t\n            = s + t\n"
    head = "setting s, 0 to 2, by verifier\nsetting t, 1 to 3, by developer\n"
    assert ends(figures(body, head)) == pytest.approx((-3, 4), abs=1e-7)


def test_a_setting_and_a_judgement_that_are_given_are_fixed() -> None:
    head = 'setting s, 0 to 1, by developer\njudgement j, "well", by verifier\n'
    body = "quantity r\n    cases\n        when j\n            = s\n        otherwise\n            = 2 + s\n"
    assert ends(figures(body, head)) == (0, 3)
    assert ends(figures(body, head, s=Fraction(1, 2))) == (0.5, 2.5)
    assert ends(figures(body, head, j=False)) == (2, 3)
    assert figures(body, head, j=False).routes[0] == 1


def test_a_calculation_without_a_value_is_no_route() -> None:
    found = figures(choice("q", "0", "2") + "quantity r\n    = 10 / q\n")
    assert found.routes[0] == 1 and ends(found) == (5, 5)
    assert np.isnan(found.reference.value[0])


def test_comparisons_of_decimals_are_not_upset_by_floats() -> None:
    """0.1 + 0.2 is 0.3 for whoever writes a rulebook."""
    body = (
        "quantity r\n    cases\n        when x + y <= 0.3\n            = 1\n        when x + y > 0.3\n            = 2\n"
    )
    found = figures(body, "fact x, 0 to 1\nfact y, 0 to 1\n", x=Fraction("0.1"), y=Fraction("0.2"))
    assert ends(found) == (1, 1)


def test_tables_stay_small_where_choices_are_independent() -> None:
    parts = "".join(choice(f"q{number}", "1", "2") for number in range(40))
    body = parts + "quantity r\n    = " + " + ".join(f"q{number}" for number in range(40)) + "\n"
    reading = read(f'rulebook "Extremes", draft "1"\nresult r\n{body}', "extremes")
    assert reading.model is not None
    [batch] = batches_of(reading.model, [Case("", {}, None, START)])
    assert plan_work(batch.plan, batch.rows, frozenset()).largest == 2


def test_what_hangs_together_too_closely_is_found_and_bounded() -> None:
    """A condition on the sum of forty choices: neither exact nor silent."""
    parts = "".join(choice(f"q{number}", f"{number * number} + 1", f"{3 * number} + 2") for number in range(40))
    total = " + ".join(f"q{number}" for number in range(40))
    body = (
        f"{parts}quantity t\n    = {total}\nquantity r\n    cases\n        when t <= 9000\n            = t\n"
        "        when t > 9000\n            = 5000 - t / 10\n"
    )
    found = figures(body, seconds=5)
    assert not found.complete[0]
    assert found.proved_low[0] <= found.lowest.value[0] <= found.highest.value[0] <= found.proved_high[0]
    assert found.routes[0] == -1
