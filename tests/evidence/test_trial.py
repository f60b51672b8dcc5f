"""What is proved, who is to blame, and worked examples: on the samples and on drafts of them rewritten for it."""

from __future__ import annotations

import math
import time
from dataclasses import replace
from fractions import Fraction
from functools import cache
from itertools import pairwise
from pathlib import Path

import pytest

from samesum.evidence.evidence import Evidence
from samesum.evidence.gather import gather
from samesum.evidence.trial.apart import further_apart
from samesum.evidence.trial.outcome import Explained, TrialEvidence, explained, try_out
from samesum.evidence.trial.plan import make_plan
from samesum.evidence.trial.unbounded import AT_ZERO
from samesum.graph import DecisionGraph, build
from samesum.reading.cases import Case, Cases, read_cases
from samesum.reading.read import read, read_file
from samesum.spans import START

SAMPLES = Path(__file__).parents[2] / "sample_rulebooks"
NAMES = ("coastal_wetland", "waste_heat", "woodland")


@cache
def sample(name: str) -> tuple[DecisionGraph, Cases]:
    reading = read_file(SAMPLES / f"{name}.rulebook")
    assert reading.model is not None and reading.problems == ()
    cases, problems = read_cases(SAMPLES / f"{name}.cases.yaml", reading.model)
    assert problems == ()
    return build(reading.model), cases


@cache
def trial(name: str) -> TrialEvidence:
    graph, cases = sample(name)
    return try_out(graph, cases.cases, 60.0)


def rewritten(name: str, old: str, new: str, tolerance: str = "0") -> TrialEvidence:
    text = (SAMPLES / f"{name}.rulebook").read_text(encoding="utf-8")
    assert old in text
    reading = read(text.replace(old, new, 1), "rewritten.rulebook")
    assert reading.model is not None and reading.problems == ()
    cases, problems = read_cases(SAMPLES / f"{name}.cases.yaml", reading.model)
    assert problems == ()
    return try_out(build(reading.model), cases.cases, 30.0, Fraction(tolerance))


def two(one: str, other: str) -> str:
    options = "".join(
        f"        option {name}\n            = {body}\n" for name, body in (("plain", one), ("other", other))
    )
    return f"    choice by developer\n{options}"


REDUCTIONS = "(baseline - support_emissions - methane_slip) * (1 - common_practice)"
PULLED_APART = "baseline * (1 - common_practice) - (support_emissions + methane_slip) * (1 - common_practice)"
NET = "max(0, reductions) * (1 - buffer - reserve)"
BUFFER = "10 % + 1 % * rise_rate / 1.2 [mm/year] + 1 % * (8 [m] - tidal_range) / 4 [m]"


# --- verdicts ------------------------------------------------------------------------------


@pytest.mark.parametrize("name", NAMES)
def test_repaired_samples_are_proved_to_have_a_single_route(name: str) -> None:
    found = trial(f"{name}_repaired")
    assert found.proof.verdict == "single route"
    assert (found.proof.low, found.proof.high) == (0.0, 0.0)
    assert found.blame == ()
    assert all(found.case(place).routes in (0, 1) for place in range(len(found)))


@pytest.mark.parametrize("name", NAMES)
def test_the_drafts_before_them_differ(name: str) -> None:
    found = trial(name)
    assert found.proof.verdict == "differs"
    assert found.proof.low is not None and found.proof.low > 0.05
    assert found.proof.gaps


@pytest.mark.parametrize(
    ("name", "old", "new"),
    [
        ("waste_heat_repaired", f"    = {REDUCTIONS}\n", two(REDUCTIONS, PULLED_APART)),
        ("coastal_wetland_repaired", f"    = {NET}\n", two(NET, "max(0, reductions) * (1 - (buffer + reserve))")),
        (
            "coastal_wetland_repaired",
            "            = min(organic_loss(land_use, climate), subsidence_loss) * area * period_length\n",
            "            choice by developer\n                option plain\n"
            "                    = min(organic_loss(land_use, climate), subsidence_loss) * area * period_length\n"
            "                option other\n"
            "                    = min(organic_loss(land_use, climate) * area * period_length,"
            " subsidence_loss * area * period_length)\n",
        ),
    ],
)
def test_algebraically_equal_options_are_proved_to_give_the_same_number(name: str, old: str, new: str) -> None:
    found = rewritten(name, old, new)
    assert found.proof.verdict == "same number"
    assert found.proof.high == 0.0
    assert max(found.case(place).routes or 0 for place in range(len(found))) > 1


@pytest.mark.parametrize(
    ("name", "old", "new"),
    [
        ("waste_heat_repaired", f"    = {REDUCTIONS}\n", two(REDUCTIONS, f"1.005 * {REDUCTIONS}")),
        ("waste_heat_repaired", f"    = {REDUCTIONS}\n", two(REDUCTIONS, f"0.995 * {REDUCTIONS}")),
        ("coastal_wetland_repaired", f"    = {BUFFER}\n", two(BUFFER, BUFFER.replace("10 %", "10.2 %"))),
    ],
)
def test_half_a_percent_is_within_one_percent_and_not_within_a_tenth(name: str, old: str, new: str) -> None:
    within = rewritten(name, old, new, "0.01")
    assert within.proof.verdict == "within tolerance"
    assert within.proof.high is not None and within.proof.high <= 0.01
    beyond = rewritten(name, old, new, "0.001")
    assert beyond.proof.verdict == "differs"
    assert beyond.proof.low is not None and beyond.proof.low > 0.001
    assert_shown(beyond)


def assert_shown(found: TrialEvidence) -> None:
    """The witness, replayed as a case, has the spread it claims, on the routes it names; or results that lie apart at
    a reference of zero."""
    witness = found.proof.witness
    assert witness is not None and found.proof.low is not None
    again = try_out(found.graph, [Case("again", witness.values, None, START)], 20.0).case(0)
    if found.proof.unbounded == AT_ZERO:
        assert again.lowest is not None and again.highest is not None and again.reference is not None
        assert witness.spread is None and again.reference.value == pytest.approx(0, abs=1e-9 * again.highest.value)
        assert again.lowest.value < again.highest.value
        return
    assert witness.spread is not None
    given = witness.case != ""
    if not given:
        assert again.spread == pytest.approx(witness.spread, rel=1e-9)
        assert again.lowest is not None and again.highest is not None
        assert (again.lowest.route, again.highest.route) == (witness.lowest, witness.highest)
    assert again.spread is not None and again.spread >= found.proof.low * (1 - 1e-9)


@pytest.mark.parametrize("name", NAMES)
def test_the_worst_case_is_reached_by_its_witness(name: str) -> None:
    assert_shown(trial(name))


def test_a_gap_alone_is_a_gap() -> None:
    text = (
        'rulebook "Gap", draft "1"\nresult r\nfact x, 0 to 10\nquantity r\n'
        "    cases\n        when x < 5\n            = 1\n        when x > 5\n            = 2\n"
    )
    reading = read(text, "gap")
    assert reading.model is not None
    found = try_out(build(reading.model), [Case("a", {"x": Fraction(3)}, None, START)])
    assert found.proof.verdict == "gap"
    assert try_out(build(reading.model), [Case("a", {"x": Fraction(5)}, None, START)]).proof.stuck_cases == ("a",)


def test_a_difference_that_no_case_shows_is_found() -> None:
    """The two options part only in a corner of the domains."""
    text = (
        'rulebook "Corner", draft "1"\nresult r\nfact x, 0 to 100\nfact y, 0 to 100\nquantity r\n'
        "    choice by developer\n        option plain\n            = 50 + x\n"
        "        option other\n            = 50 + x + max(0, x + y - 199)\n"
    )
    reading = read(text, "corner")
    assert reading.model is not None
    found = try_out(build(reading.model), [Case("a", {"x": Fraction(3), "y": Fraction(3)}, None, START)])
    assert found.case(0).spread == 0
    assert found.proof.verdict == "differs"
    assert_shown(found)
    assert found.proof.high is not None and found.proof.low is not None
    assert found.proof.low <= found.proof.high


def test_the_solver_proves_and_refutes() -> None:
    text = (
        'rulebook "Solver", draft "1"\nresult r\nfact x, 1 to 2\nfact y, 1 to 2\nquantity r\n'
        "    choice by developer\n        option plain\n            = (x + y) ^ 2\n"
        "        option other\n            = x ^ 2 + 2 * x * y + y ^ 2 + 0.01 * (x - y) ^ 2\n"
    )
    reading = read(text, "solver")
    assert reading.model is not None
    plan = make_plan(build(reading.model))
    limit = time.monotonic() + 20
    # 0.01 (x − y)² / (x + y)² is at most 0.01 / 9
    assert further_apart(plan, Fraction(12, 10_000), limit).answer == "no"
    refuted = further_apart(plan, Fraction(11, 10_000), limit)
    assert refuted.answer == "yes"
    x, y = refuted.point["x"], refuted.point["y"]
    assert Fraction(1, 100) * (x - y) ** 2 > Fraction(11, 10_000) * (x + y) ** 2


def test_a_short_time_gives_an_honest_wider_bracket() -> None:
    graph, cases = sample("woodland")
    found = try_out(graph, cases.cases, 0.2)
    assert found.proof.verdict in ("differs", "agrees on these cases")
    assert found.proof.low is None or found.proof.high is None or found.proof.low <= found.proof.high


# --- worked examples ------------------------------------------------------------------------


@pytest.mark.parametrize("name", [*NAMES, *(f"{name}_repaired" for name in NAMES)])
def test_the_samples_own_worked_examples_come_out(name: str) -> None:
    examples = trial(name).examples
    assert examples
    for example in examples:
        assert example.agrees, (example.case, example.value, example.expected)


def test_a_worked_example_that_does_not_come_out() -> None:
    graph, cases = sample("waste_heat")
    case = cases.cases[0]
    assert case.expected is not None
    wrong = replace(case, expected=replace(case.expected, value=Fraction(49372)))
    [example] = try_out(graph, [wrong], 5.0).examples
    assert not example.agrees and example.issued == 49371
    astray = replace(case, expected=replace(case.expected, route=(("grid_factor", "hourly"),)))
    [example] = try_out(graph, [astray], 5.0).examples
    assert not example.agrees and example.astray == (("grid_factor", "hourly"),)


@pytest.mark.parametrize("route", ["reference", "lowest", "highest"])
@pytest.mark.parametrize("name", NAMES)
def test_a_calculation_step_by_step_ends_at_the_figure(name: str, route: str) -> None:
    graph, cases = sample(name)
    for place, case in enumerate(cases.cases):
        figures = trial(name).case(place)
        end = {"reference": figures.reference, "lowest": figures.lowest, "highest": figures.highest}[route]
        found = explained(graph, case, route)
        if end is None:
            assert isinstance(found, str) or found.says.startswith("There is no result")
            continue
        assert isinstance(found, Explained)
        assert found.lines[-1].value is not None
        assert float(found.lines[-1].value) == pytest.approx(end.value, rel=1e-9)


def test_steps_name_the_formula_its_numbers_and_the_clause() -> None:
    graph, cases = sample("waste_heat")
    found = explained(graph, cases.cases[0], "efficiency@1=tested,efficiency@2=tested")
    assert isinstance(found, Explained)
    lines = {line.id: line for line in found.lines}
    loss = lines["boiler_loss@1"]
    assert loss.clause == "5.2" and loss.branches == ("boiler_loss@1: 2 (efficiency@1 <= 85 %)",)
    baseline = lines["heat_baseline@1"]
    assert baseline.formula.startswith("steam@1 * (1 - meter_drift) / (efficiency@1 * (1 - boiler_loss@1))")
    assert "180,000 [GJ] * (1 - 1 %)" in baseline.numbers
    assert lines["past_mean"].numbers == "mean(310,000 [t], 325,000 [t], 340,000 [t])"


def test_a_route_that_cannot_be_understood() -> None:
    graph, cases = sample("waste_heat")
    assert explained(graph, cases.cases[0], "grid_facto=margin") == (
        "`grid_facto` is no branch point of Kiln Street Works; did you mean `grid_factor`?"
    )
    found = explained(graph, cases.cases[0], "grid_factor=margn")
    assert isinstance(found, str) and "its branches are margin, average, hourly" in found


# --- blame -----------------------------------------------------------------------------------


@pytest.mark.parametrize("name", NAMES)
def test_closing_never_widens(name: str) -> None:
    found = trial(name)
    widest = max(each for each in found.spreads() if math.isfinite(each))
    for blame in found.blame:
        assert blame.left is not None and blame.left <= widest + 1e-9
        assert blame.swing is not None and blame.swing >= 0
    left = [widest, *(each.left for each in found.closing)]
    assert all(later <= earlier + 1e-9 for earlier, later in pairwise(left))
    assert found.closing_complete and found.closing[-1].left == 0.0


@cache
def gathered(name: str) -> Evidence:
    return gather(sample(name)[0], 20.0)


@pytest.mark.parametrize("name", NAMES)
def test_no_project_has_more_routes_than_were_counted(name: str) -> None:
    found = trial(name)
    counts = gathered(name).counts
    assert max(found.case(place).routes or 0 for place in range(len(found))) <= counts.per_project_most
