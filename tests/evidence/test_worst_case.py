"""The worst case over all projects: both ends of its bracket against values worked out by hand."""

from __future__ import annotations

import time
from fractions import Fraction

import numpy as np
import pytest

from samesum.evidence.trial.bracket import CLOSE, proved_worst
from samesum.evidence.trial.figures import figures_of
from samesum.evidence.trial.outcome import CaseTrial, TrialEvidence, try_out
from samesum.evidence.trial.plan import make_plan
from samesum.evidence.trial.proof import Proof
from samesum.evidence.trial.unbounded import AT_ZERO, THROUGH_ZERO
from samesum.graph import DecisionGraph, build
from samesum.reading.cases import Case
from samesum.reading.read import read
from samesum.spans import START
from samesum.written import of_reference

HEAD = 'rulebook "Brackets", draft "1"\nresult y\n'


def graph_of(text: str) -> DecisionGraph:
    reading = read(HEAD + text, "brackets.rulebook")
    assert reading.problems == () and reading.model is not None
    return build(reading.model)


def proof_of(text: str, tolerance: str = "0") -> Proof:
    return try_out(graph_of(text), [], 20.0, Fraction(tolerance)).proof


def choice(name: str, reference: str, other: str) -> str:
    return (
        f"quantity {name}\n    choice by developer\n        option a, reference\n            = {reference}\n"
        f"        option b\n            = {other}\n"
    )


def assert_closed(proof: Proof, exact: Fraction | float) -> None:
    """Both ends are near the exact worst case, and it lies between them (floats of the search may be a hair above)."""
    assert proof.low is not None and proof.high is not None
    assert proof.low <= float(exact) * (1 + 1e-12)
    assert float(exact) <= proof.high
    assert proof.high <= float(exact) * (1 + 2 * CLOSE)
    assert proof.low >= float(exact) * (1 - 2 * CLOSE)


def test_a_free_setting_with_its_optimum_inside() -> None:
    # d − d² is lowest at the ends (0) and highest half-way (1/4); the reference takes d half-way: k + 1/4.
    # 1/4 / (k + 1/4) is largest at k = 1: 1/5.
    proof = proof_of("fact k, 1 to 2\nsetting d, 0 to 1, by developer\nquantity y\n    = k + d - d ^ 2\n")
    assert_closed(proof, Fraction(1, 5))
    assert proof.witness is not None and proof.witness.values["k"] == 1


def test_a_free_setting_that_multiplies() -> None:
    # (1 − 1/20) − (1 − 1/5) over the reference at 1/8: (3/20) / (7/8) = 6/35, whatever k is
    proof = proof_of("fact k, 0 to 2\nsetting d, 5 % to 20 %, by developer\nquantity y\n    = k * (1 - d)\n")
    assert_closed(proof, Fraction(6, 35))


def test_a_free_setting_and_a_choice_together() -> None:
    # The highest is (x + 1)·(1 + 1/10), the lowest x·(1 − 1/10), the reference x: (x/5 + 11/10) / x, at x = 1: 13/10.
    text = "fact x, 1 to 2\nsetting s, -10 % to 10 %, by verifier\nquantity y\n    = stock * (1 + s)\n"
    assert_closed(proof_of(text + choice("stock", "x", "x + 1")), Fraction(13, 10))


def test_choices_that_move_the_result_opposite_ways_are_not_added_up() -> None:
    # (x/2 + z/2) / (x + z) = 1/2 everywhere; the deviations of the parts add up to 1
    text = "fact x, 50 to 100\nfact z, 50 to 100\nquantity y\n    = p + q\n"
    assert_closed(proof_of(text + choice("p", "x", "1.5 * x") + choice("q", "z", "0.5 * z")), Fraction(1, 2))


def test_a_factor_that_goes_to_zero_in_results_and_reference_alike_cancels() -> None:
    # area·(p + 1) − area·p over area·p: 1/p, at p = 1: 1, though the reference is 0 where area is
    text = "fact area, 0 to 100\nfact p, 1 to 2\n"
    assert_closed(proof_of(text + choice("y", "area * p", "area * (p + 1)")), 1)


def test_a_factor_of_every_element_cancels_in_sums() -> None:
    # Σ a·(p + 1)² − Σ a·p² over Σ a·p²: at most the largest of (2p + 1)/p², at p = 1: 3, reached where all p are 1.
    # No deviation is known of a sum to a power, and the reference is 0 where all areas are.
    text = "index s, at most 3\nfact a per s, 0 to 10\nfact p per s, 1 to 2\nsetting e, 0 to 2, by developer\n"
    proof = proof_of(text + "quantity y\n    = sum(a * (p + e) ^ 2 over s)\n")
    # the reference has e = 1: highest (p + 2)², lowest p²; (4p + 4) / (p + 1)² = 4 / (p + 1), at p = 1: 2
    assert_closed(proof, 2)


def test_a_part_of_the_reference_that_only_conditions_keep_from_zero() -> None:
    # The choice is open where x >= 5 alone: 10 / x, at x = 5: 2. At x = 1/10 it would be 100.
    body = (
        "fact x, 0.1 to 10\nquantity y\n    cases\n        when x < 5\n            = x\n        when x >= 5\n"
        "            choice by developer\n                option a, reference\n                    = x\n"
        "                option b\n                    = x + 10\n"
    )
    assert_closed(proof_of(body), 2)


def test_projects_with_fewer_elements_are_in_the_worst_case() -> None:
    # 10 / (100 + Σ a), Σ a at its least with one element of 1: 10/101; with three it is 10/103
    text = "index s, at most 3\nfact a per s, 1 to 10\n" + choice("y", "100 + sum(a over s)", "110 + sum(a over s)")
    assert_closed(proof_of(text), Fraction(10, 101))


def test_equal_for_the_largest_project_alone_is_not_the_same_number() -> None:
    # Σ x / 3 is the mean for three elements; for one it is a third of it
    text = "index s, at most 3\nfact x per s, 1 to 10\n" + choice("y", "mean(x over s)", "sum(x over s) / 3")
    proof = proof_of(text)
    assert proof.verdict != "same number"
    # one element: (x − x/3) / x
    assert_closed(proof, Fraction(2, 3))


def test_the_bound_is_the_bound_and_not_the_tolerance() -> None:
    # 1/x at x = 50: 2 %, well within 5 %
    proof = proof_of("fact x, 50 to 100\n" + choice("y", "x", "x + 1"), "0.05")
    assert proof.verdict == "within tolerance"
    assert_closed(proof, Fraction(1, 50))
    # (x − z)² / (x + z)² · 1/100, at x = 1, z = 2: 1/900. The solver proves it within 1 %; boxes prove more.
    text = "fact x, 1 to 2\nfact z, 1 to 2\n"
    other = "x ^ 2 + 2 * x * z + z ^ 2 + 0.01 * (x - z) ^ 2"
    assert_closed(proof_of(text + choice("y", "(x + z) ^ 2", other), "0.01"), Fraction(1, 900))


@pytest.mark.parametrize(
    ("reference", "why"),
    [
        ("x - 1", AT_ZERO),
        ("max(0, x - 1.5)", AT_ZERO),
        # a zero at a number of few digits, and one at none (√2, √3)
        ("x - 1.35", AT_ZERO),
        ("x * x - 2", THROUGH_ZERO),
        ("sqrt(x) - 3 ^ 0.25", THROUGH_ZERO),
        # zero where two facts drawn apart meet
        ("max(0, x - 1.99993)", AT_ZERO),
        # a zero that is touched, and not gone through
        ("(x - 1.35) ^ 2 / (1 + x)", AT_ZERO),
        ("abs(x - 1.37)", AT_ZERO),
    ],
)
def test_where_the_reference_can_be_zero_there_is_no_bound(reference: str, why: str) -> None:
    proof = proof_of("fact x, 1 to 2\n" + choice("y", reference, "x"))
    assert proof.high is None and proof.unbounded == why
    shown = at_witness(proof, choice("y", reference, "x"))
    assert shown.reference is not None and shown.lowest is not None and shown.highest is not None
    assert abs(shown.reference.value) <= 1e-9 and shown.highest.value - shown.lowest.value >= 1


def at_witness(proof: Proof, body: str) -> CaseTrial:
    """The project that the proof names, tried out again."""
    assert proof.witness is not None
    case = Case("again", proof.witness.values, None, START)
    return try_out(graph_of("fact x, 1 to 2\n" + body), [case], 10.0).case(0)


def test_a_setting_whose_middle_gives_a_reference_of_zero() -> None:
    # the reference takes s half-way (5): (a − 5)² / 6, zero at a = 5, where s = 0 gives 25
    proof = proof_of("fact a, 1 to 10\nsetting s, 0 to 10, by developer\nquantity y\n    = (a - s) ^ 2 / (1 + s)\n")
    assert proof.unbounded == AT_ZERO
    assert proof.witness is not None and proof.witness.values["a"] == 5


@pytest.mark.parametrize(
    "other",
    [
        # √a·√a is a, give or take the rounding of floats: where the reference is zero the other is zero as well
        "1.1 * max(0, a - 5) + (sqrt(a) * sqrt(a) - a)",
        "1.1 * max(0, a - 5) + 1000000 * (sqrt(a) * sqrt(a) - a)",
        "1.1 * max(0, a - 5) + (exp(ln(a)) - a)",
    ],
)
def test_the_rounding_of_floats_is_no_difference_at_a_reference_of_zero(other: str) -> None:
    proof = proof_of("fact a, 1 to 10\n" + choice("y", "max(0, a - 5)", other))
    assert proof.unbounded == "" and proof.low == pytest.approx(0.1, rel=1e-5)


def test_a_reference_that_jumps_over_zero_from_near_to_near_has_a_bound() -> None:
    # 10⁻¹⁰ or −10⁻¹⁰, the other result 1 further: 10¹⁰, far, and no further
    body = (
        "fact x, 1 to 2\nquantity y\n    = step + extra\n"
        "quantity step\n    cases\n        when x < 1.5\n            = -0.0000000001\n        when x >= 1.5\n"
        "            = 0.0000000001\n"
    )
    proof = proof_of(body + choice("extra", "0 * x", "1"))
    assert proof.unbounded == "" and proof.low == pytest.approx(1e10)


def test_the_widest_spread_between_the_projects_drawn_is_climbed_to() -> None:
    # a / (a² + 1) is highest at 1: 1/2; the fact has no bounds
    proof = proof_of("fact a\n" + choice("y", "a * a + 1", "a * a + 1 + a"))
    assert proof.low == pytest.approx(0.5, rel=1e-9)
    assert proof.witness is not None and abs(Fraction(str(proof.witness.values["a"]))) == 1


def test_an_overlap_on_a_line_that_two_facts_make_is_tried() -> None:
    # Both branches are open where a + b = 2 alone: 1 and 1 + 9·a·b, which is most at a = b = 1.
    # The first is the reference: 9.
    body = (
        "fact a, 0 to 4\nfact b, -1 to 3\nsetting s, 0 to 1, by developer\nquantity y\n    cases\n"
        "        when a + b <= 2\n            = exp(0 * s)\n        when a + b >= 2\n"
        "            = exp(0 * s) + 9 * max(0, a * b)\n"
    )
    proof = proof_of(body)
    # away from the line a project has one result
    assert proof.low == pytest.approx(9, rel=1e-6)


def test_a_condition_that_keeps_the_reference_from_zero_is_gone_up_to() -> None:
    # 1 / (a − b), at most where a − b is 1/1000
    body = "fact a, 1 to 10\nfact b, 1 to 10\napplies when a >= b + 0.001\n"
    proof = proof_of(body + choice("y", "a - b", "a - b + 1"))
    assert proof.unbounded == "" and proof.low == pytest.approx(1000, rel=1e-6)


def test_where_no_project_has_a_result_that_is_what_is_said() -> None:
    body = "fact a, 1 to 10\ntable rate by x\n    up to 0.5 = 1\nquantity y\n    = rate(a) * a\n"
    proof = proof_of(body)
    assert proof.verdict == "gap" and proof.says == "no project has a result"
    assert (proof.low, proof.high, proof.unbounded, proof.witness) == (None, None, "", None)
    # one that has: 0.5 itself
    proof = proof_of(body.replace("1 to 10", "0.5 to 10"))
    assert proof.says != "no project has a result"


def test_a_reference_that_jumps_over_zero_has_a_bound() -> None:
    # the reference is 1 or −1, the other result 1 further: 1/1
    body = (
        "fact x, 1 to 2\nquantity y\n    = step + extra\n"
        "quantity step\n    cases\n        when x < 1.5\n            = -1\n        when x >= 1.5\n            = 1\n"
    )
    proof = proof_of(body + choice("extra", "0 * x", "1"))
    assert proof.unbounded == ""
    assert_closed(proof, 1)


def test_no_time_gives_a_wider_bracket_and_no_wrong_one() -> None:
    graph = graph_of("fact k, 1 to 2\nsetting d, 0 to 1, by developer\nquantity y\n    = k + d - d ^ 2\n")
    high, _ = proved_worst([make_plan(graph)], 0.0, time.monotonic())
    assert high is None or high >= 0.2


def test_no_project_lies_outside_the_bracket() -> None:
    """Projects drawn from the domains of the samples' kind: conditions, tables, an index, two settings."""
    text = (
        "index s, at most 2\nfact a per s, 1 to 9\nfact soil, one of clay, sand or peat\nfact w, 0 to 30\n"
        "setting d, 0 to 30 %, by developer\nsetting f, 1 to 2, by verifier\n"
        "table rate by soil\n    clay = 3\n    sand = 4\n    peat = 6\n"
        "quantity y\n    = (stock * f - loss) * (1 - d)\n"
        + choice("stock", "sum(rate(soil) * a over s)", "sum(4.5 * a over s)")
        + "quantity loss\n    cases\n        when w < 10\n            = 0\n        when w >= 10\n"
        "            = max(0, w - 20) / 10 * sum(a over s)\n"
    )
    graph = graph_of(text)
    found: TrialEvidence = try_out(graph, [], 20.0)
    draw = np.random.default_rng(5)
    cases = []
    for number in range(300):
        size = 1 + number % 2
        a = tuple(Fraction(int(each), 10) for each in draw.integers(10, 91, size))
        soil = ("clay", "sand", "peat")[int(draw.integers(3))]
        cases.append(Case(str(number), {"a": a, "soil": soil, "w": Fraction(int(draw.integers(31)))}, None, START))
    from samesum.evidence.choosing.batches import batches_of

    high = found.proof.high
    assert high is not None
    for batch in batches_of(graph.model, cases):
        assert np.nanmax(figures_of(batch, time.monotonic() + 10.0).spread) <= high


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (0.325, "32.5 % of the reference"),
        (5.69, "569 % of the reference"),
        (11.0, "11 times the reference"),
        (153_000.0, "153,000 times the reference"),
    ],
)
def test_how_far_apart_is_told_in_shares_or_in_times(value: float, text: str) -> None:
    assert of_reference(value) == text


def test_a_difference_at_a_reference_of_zero_is_a_difference() -> None:
    # every project's reference is 0, so that no spread is a number
    proof = proof_of("fact x, 1 to 2\n" + choice("y", "0 * x", "x"))
    assert proof.verdict == "differs" and proof.unbounded == AT_ZERO
    assert proof.witness is not None and "x" in proof.witness.values
