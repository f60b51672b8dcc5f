"""Overlaps, gaps and dead branches: exact on boundaries, over one fact, several, and calculated quantities."""

from __future__ import annotations

from fractions import Fraction

import pytest

from samesum.evidence.evidence import Evidence
from support.asking import cases, choice, dead_of, evidence_of, gaps_of, overlaps_of, rulebook
from support.replay import check_witnesses

X = "fact x, 0 to 10, clause 2\n"
XY = X + "fact y, 0 to 10, clause 2\n"


def told(conditions: list[str], facts: str = XY, *blocks: str, words: str = "cases") -> Evidence:
    """The evidence of one quantity in cases, every witness replayed and nothing left undecided."""
    found = evidence_of(rulebook(facts, *blocks, cases("q", conditions, words), result="q"))
    assert not found.conditions.undecided
    assert found.counts.exact
    check_witnesses(found)
    return found


def only_gap(found: Evidence) -> dict[str, object]:
    assert len(found.conditions.gaps) == 1
    witness = found.conditions.gaps[0].witness
    assert witness is not None
    return dict(witness.inputs)


# --- boundaries ------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("first", "second", "gap", "overlap"),
    [
        ("<", ">=", False, False),
        ("<=", ">", False, False),
        ("<", ">", True, False),
        ("<=", ">=", False, True),
        ("=", "<>", False, False),
        ("<>", "<=", False, True),
        ("=", "=", True, True),
    ],
)
@pytest.mark.parametrize(
    "subject",
    [
        "x",
        "x + y",
        "x * y",
        "3 - x",
        "x - 2 * y",
        "max(x, y)",
        "6 - 2 * max(x, y)",
        "8 - min(x, y)",
        "abs(x - 4)",
        "5 - abs(x - 4)",
        "x ^ 2 - 2",
        "half",
    ],
)
def test_two_comparisons_with_one_number(first: str, second: str, gap: bool, overlap: bool, subject: str) -> None:
    half = "quantity half, clause 2\n    = x / 2 + y\n"
    found = told([f"{subject} {first} 2", f"{subject} {second} 2"], XY, half)
    assert bool(gaps_of(found)) == gap
    assert bool(overlaps_of(found)) == overlap


def test_the_end_of_a_domain_is_inside_it() -> None:
    assert only_gap(told(["x < 10"], X)) == {"x": 10}
    assert gaps_of(told(["x <= 10"], X)) == []
    assert gaps_of(told(["x > 0", "x < 0"], X)) == ["q"]
    assert dead_of(told(["x >= 0", "x < 0"], X)) == [("q", "2")]


def test_a_chained_comparison_is_both() -> None:
    assert gaps_of(told(["0 <= x < 5", "5 <= x <= 10"], X)) == []
    assert only_gap(told(["0 <= x < 5", "5 < x <= 10"], X)) == {"x": 5}


# --- what kinds of condition -------------------------------------------------------------------


def test_named_values_that_are_left_out_are_a_gap() -> None:
    soil = "fact soil, one of mineral, peaty or organic, clause 2\n"
    found = told(["soil is mineral", "soil is peaty"], soil)
    assert only_gap(found) == {"soil": "organic"}
    assert overlaps_of(told(["soil is one of mineral or peaty", "soil is one of peaty or organic"], soil)) == [
        ("q", "1", "2")
    ]
    assert gaps_of(told(["soil is one of mineral or peaty", "not (soil is one of mineral or peaty)"], soil)) == []


def test_a_yes_no_fact_has_both_values() -> None:
    wet = "fact wet, yes or no, clause 2\n"
    assert only_gap(told(["wet"], wet)) == {"wet": False}
    assert gaps_of(told(["wet", "not wet"], wet)) == []


def test_facts_of_every_element_are_cut_for_themselves() -> None:
    text = rulebook(
        "index stratum, at most 3\nfact depth per stratum, 0 to 10, clause 2\n",
        cases("q", ["depth < 3", "depth > 3"]).replace("[t],", "[t] per stratum,"),
        result="sum(q over stratum)",
    )
    found = evidence_of(text)
    check_witnesses(found)
    assert gaps_of(found) == ["q@1", "q@2", "q@3"]
    assert found.counts.reachable == 8


def test_a_sum_over_an_index_is_one_number() -> None:
    facts = "index stratum, at most 5\nfact area per stratum, 1 to 10, clause 2\n"
    found = told(["sum(area over stratum) < 20", "sum(area over stratum) > 20"], facts)
    assert gaps_of(found) == ["q"]
    assert gaps_of(told(["sum(area over stratum) >= 5"], facts)) == []
    assert dead_of(told(["mean(area over stratum) < 1", "otherwise"], facts)) == [("q", "1")]


def test_the_same_number_written_in_two_ways_is_the_same() -> None:
    found = told(["(x + y)^2 < 9", "x^2 + 2*x*y + y^2 >= 9"])
    assert (gaps_of(found), overlaps_of(found)) == ([], [])


def test_a_condition_on_a_calculated_quantity_sees_through_it() -> None:
    density = "quantity density, clause 2\n    = (x + 1) / (y + 1)\n"
    found = told(["density < 1", "x > y"], XY, density)
    assert (gaps_of(found), overlaps_of(found)) == (["q"], [])
    gap = only_gap(found)
    assert gap["x"] == gap["y"]


def test_a_condition_on_a_choice_sees_both_options() -> None:
    text = rulebook(choice("c", ["low", "high"]), cases("q", ["c < 2 [t]", "c > 2 [t]"]), result="q + c")
    found = evidence_of(text)
    check_witnesses(found)
    assert gaps_of(found) == ["q"]
    assert found.conditions.gaps[0].witness is not None
    assert ("c", "high") in found.conditions.gaps[0].witness.route


def test_whoever_asks_what_was_taken_is_told() -> None:
    text = rulebook(choice("c", ["a", "b", "z"]), cases("q", ["c takes a", "c takes b"]), result="q + c")
    found = evidence_of(text)
    check_witnesses(found)
    assert gaps_of(found) == ["q"]
    assert (found.counts.on_paper, found.counts.reachable) == (6, 2)


def test_minimum_maximum_and_absolute_value_are_exact() -> None:
    assert gaps_of(told(["min(x, y) < 3", "x >= 3 and y >= 3"])) == []
    assert overlaps_of(told(["max(x, y) <= 3", "x > 3 or y > 3"])) == []
    found = told(["abs(x - y) < 2", "x - y >= 2", "y - x > 2"])
    assert only_gap(found)
    assert overlaps_of(found) == []


def test_rounded_numbers_are_exact() -> None:
    found = told(["round(x) = 3", "2.5 <= x < 3.5"], X)
    assert overlaps_of(found) == [("q", "1", "2")]
    assert gaps_of(told(["round(x) = 3", "x < 2.5", "x >= 3.5"], X)) == []
    assert gaps_of(told(["floor(x) <= 3", "x > 4"], X)) == ["q"]
    assert only_gap(told(["floor(x) <= 3", "x > 4"], X)) == {"x": 4}


def test_an_overlap_that_needs_a_root_is_found_without_a_made_up_witness() -> None:
    found = evidence_of(rulebook(X, cases("q", ["x^2 <= 2", "x^2 >= 2"]), result="q"))
    assert overlaps_of(found) == [("q", "1", "2")]
    assert found.counts.exact and found.counts.per_project_most == 2
    assert found.conditions.overlaps[0].witness is None, "no fraction has the square 2"


# --- order, otherwise, nesting -----------------------------------------------------------------


def test_otherwise_leaves_no_gap_and_may_be_dead() -> None:
    assert gaps_of(told(["x < 5", "otherwise"], X)) == []
    assert dead_of(told(["x < 5", "x >= 5", "otherwise"], X)) == [("q", "otherwise")]


def test_cases_in_order_never_overlap() -> None:
    found = told(["x < 5", "x < 7", "otherwise"], X, words="cases in order")
    assert (overlaps_of(found), gaps_of(found), dead_of(found)) == ([], [], [])
    assert dead_of(told(["x < 7", "x < 5", "otherwise"], X, words="cases in order")) == [("q", "2")]


NESTED = """quantity q [t], clause 2
    cases
        when x < 5
            cases
                when x > 7
                    = 1 [t]
                when y < 3
                    = 2 [t]
                when y > 3
                    = 3 [t]
        when x >= 5
            = 4 [t]
"""


def test_what_stands_under_a_branch_knows_the_branch() -> None:
    found = evidence_of(rulebook(XY, NESTED, result="q"))
    check_witnesses(found)
    assert dead_of(found) == [("q/1", "1")]
    assert gaps_of(found) == ["q/1"]
    assert overlaps_of(found) == []


def test_a_branch_point_that_is_never_reached_is_not_examined() -> None:
    never = NESTED.replace("when x < 5", "when x < 0").replace("when x >= 5", "when x >= 0")
    found = evidence_of(rulebook(XY, never, result="q"))
    assert dead_of(found) == [("q", "1")]
    assert gaps_of(found) == []


def test_no_option_open_is_a_gap() -> None:
    narrow = {"option a": "option a, only when x < 3", "option b": "option b, only when x > 3"}
    text = choice("c", ["a", "b"])
    for option, phrase in narrow.items():
        text = text.replace(option, phrase)
    text = rulebook(X, text, result="c")
    found = evidence_of(text)
    check_witnesses(found)
    assert only_gap(found) == {"x": 3}


# --- applicability -----------------------------------------------------------------------------


def test_projects_outside_the_rulebook_have_no_gaps() -> None:
    assert gaps_of(told(["x < 3", "x > 3"], X, "applies when x <> 3, clause 1\n")) == []
    assert overlaps_of(told(["x < 5", "y < 5"], XY, "applies when x + y > 12 or x < 1 and y > 8, clause 1\n")) == []
    assert dead_of(told(["x < 3", "otherwise"], X, "applies when x > 3, clause 1\n")) == [("q", "1")]


def test_a_rulebook_that_applies_to_nobody_has_no_findings() -> None:
    found = told(["x < 3", "x > 3", "x < 4"], X, "applies when x > 11, clause 1\n")
    assert (overlaps_of(found), gaps_of(found), dead_of(found)) == ([], [], [])
    assert (found.counts.reachable, found.counts.per_project_most, found.counts.per_project_least) == (0, 0, 0)


def test_eligibility_that_somebody_judges_still_narrows() -> None:
    judged = 'judgement sound, "where practicable", by verifier, clause 1\napplies when x > 3 or sound, clause 1\n'
    assert gaps_of(told(["x > 3", "sound"], X, judged)) == []


# --- no value ----------------------------------------------------------------------------------

NAMED = "fact s, one of a, b or c, clause 2\ntable u [t] by s, clause 3\n    a = 1\n    c = 2\n"
TABLE = "table t [t] by size, clause 3\n    up to 2 = 1\n    above 3 up to 10 = 2\n"


def kinds(found: Evidence) -> list[tuple[str, str]]:
    return [(gap.branch_point, gap.kind) for gap in found.conditions.gaps]


@pytest.mark.parametrize(
    ("facts", "formula", "expected"),
    [
        (X + TABLE, "t(x)", [("r", "row")]),
        (X + TABLE, "t(x / 5)", []),
        (X + TABLE, "t(x + 3)", [("r", "row")]),
        (NAMED, "u(s)", [("r", "row")]),
        (X, "1 [t] / x", [("r", "value")]),
        (X, "1 [t] / (x + 1)", []),
        (X, "1 [t] * ln(x)", [("r", "value")]),
        (X, "1 [t] * ln(x + 1)", []),
        (X, "1 [t] * sqrt(x - 1)", [("r", "value")]),
        (X, "1 [t] * sqrt(x)", []),
        (X, "1 [t] * x ^ -1", [("r", "value")]),
        (X, "1 [t] * x ^ 2", []),
        (X, "1 [t] * (x - 5) ^ 2", []),
        (X, "1 [t] * (x - 5) ^ 0.5", [("r", "value")]),
        (X, "1 [t] * x ^ 0.5", []),
        (X, "1 [t] * x ^ -0.5", [("r", "value")]),
        (XY, "1 [t] * (x - 5) ^ (y + 1)", [("r", "value")]),
        (XY, "1 [t] * x ^ y", []),
        (XY, "1 [t] * x ^ (y - 5)", [("r", "value")]),
    ],
)  # fmt: skip
def test_a_formula_without_a_value_is_a_gap(facts: str, formula: str, expected: list[tuple[str, str]]) -> None:
    found = evidence_of(rulebook(facts, result=formula))
    assert kinds(found) == expected
    assert found.counts.per_project_least == (0 if expected else 1)
    check_witnesses(found)


def test_a_condition_without_a_value_is_a_gap_of_its_branch_point() -> None:
    found = told(["1 / x < 1", "1 / x >= 1"], X)
    assert kinds(found) == [("q", "value")]
    assert only_gap(found) == {"x": 0}
    found = told(["t(x) < 2 [t]", "t(x) >= 2 [t]"], X + TABLE)
    assert kinds(found) == [("q", "row")]


def test_what_a_condition_asks_must_have_a_value_too() -> None:
    inner = "quantity share, clause 2\n    = y / x\n"
    found = evidence_of(rulebook(XY, inner, cases("q", ["share < 1", "share >= 1"]), result="q"))
    assert [gap.branch_point for gap in found.conditions.gaps] == ["share"]
    assert found.counts.per_project_least == 0


def test_a_number_that_is_missing_is_blamed_where_it_is_missing() -> None:
    """At x = 0 the share has no value; wherever it has one, the table has a row for it."""
    facts = XY + "applies when y + 1 <= 5 * x or x = 0, clause 1\n"
    facts += "table t [t] by size, clause 3\n    up to 2 = 1\n    above 2 up to 5 = 2\n"
    share = "quantity share, clause 2\n    = (y + 1) / x\n"
    found = evidence_of(rulebook(facts, share, cases("q", ["t(share) < 2 [t]", "t(share) >= 2 [t]"]), result="q"))
    assert kinds(found) == [("share", "value")]


CURVE = "table curve [t] by reach, clause 3\n    above 2 = 4\n"
CARBON = "quantity carbon, clause 2\n    = curve(0) / 1 [t]\n"  # has no value: the curve has no row for 0


@pytest.mark.parametrize("formula", ["curve(0) + curve(carbon)", "curve(carbon) + curve(0)", "curve(0) / carbon"])
def test_each_lookup_of_a_formula_answers_for_its_own_argument(formula: str) -> None:
    """``curve(0)`` has no row, whatever else the formula asks."""
    found = evidence_of(rulebook(CURVE, CARBON, result=formula))
    assert kinds(found) == [("carbon", "row"), ("r", "row")]
    check_witnesses(found)


@pytest.mark.parametrize(
    "formula",
    [
        "(1 [t] + curve(carbon)) / 2",
        "curve(carbon) * carbon ^ -1",
        "-curve(carbon / 2)",
        "1 [t] / carbon",
        "curve(curve(carbon) / 1 [t])",
        "1 [t] * 2 ^ carbon",
        "1 [t] * ln(carbon)",
    ],
)
def test_a_formula_that_only_inherits_a_gap_has_none_of_its_own(formula: str) -> None:
    found = evidence_of(rulebook(CURVE, CARBON, f"quantity buffer [t], clause 2\n    = {formula}\n", result="buffer"))
    assert kinds(found) == [("carbon", "row")]
    check_witnesses(found)


TWO_TABLES = X + TABLE + "table v by size, clause 3\n    up to 5 = 1\n    above 6 up to 10 = 2\n"
MISSING_ROWS = [
    ("t(x) + v(x) * 1 [t]", "t", 2, 3),
    ("v(x) * 1 [t] + t(x)", "v", 5, 6),
    ("t(x / 5) + v(x) * 1 [t]", "v", 5, 6),
    ("t(x / 5) + v(x) * 1 [t] + t(x)", "v", 5, 6),
    ("t(v(x) + 1.5)", "v", 5, 6),
    ("t(v(x / 2) + 1.5)", "t", -1, 10),
    ("1 [t] * v(x) / (x - 1)", "v", 5, 6),
    ("t(x / 5) / x", "", -1, 0),
]


@pytest.mark.parametrize(("formula", "table", "above", "up_to"), MISSING_ROWS)
def test_a_gap_names_the_table_that_lacks_the_row_for_its_witness(
    formula: str, table: str, above: Fraction, up_to: Fraction
) -> None:
    """The table's own missing band holds the witness, where another table or a divisor is wanting elsewhere."""
    in_a_formula = evidence_of(rulebook(TWO_TABLES, result=formula))
    conditions = [f"{formula} < 2 [t]", f"{formula} >= 2 [t]"]
    in_a_condition = evidence_of(rulebook(TWO_TABLES, cases("q", conditions), result="q"))
    for found in (in_a_formula, in_a_condition):
        (gap,) = found.conditions.gaps
        assert (gap.kind, gap.names) == (("row", (table,)) if table else ("value", ()))
        x = only_gap(found).get("x", Fraction(0))
        assert isinstance(x, Fraction)
        assert above < x <= up_to
        check_witnesses(found)


@pytest.mark.parametrize(
    "subject",
    ["1 / x", "1 / x + y", "2 / (x - 1)", "y / (x - y)", "sqrt(x)", "sqrt(x) + y", "sqrt(x - y)", "sqrt(1 / x)",
     "ln(x)", "ln(x) + y", "x ^ 0.5", "1 / sqrt(x + y)"],
)  # fmt: skip
def test_a_comparison_with_something_that_has_no_value_is_a_gap_with_a_witness(subject: str) -> None:
    facts = "fact x, -1 to 10, clause 2\nfact y, 0 to 10, clause 2\n"
    found = told([f"{subject} < 2", f"{subject} >= 2"], facts)
    assert kinds(found) == [("q", "value")]
    assert found.counts.per_project_least == 0
    assert found.conditions.gaps[0].witness is not None


# --- many conditions ---------------------------------------------------------------------------


@pytest.mark.parametrize("subject", ["x", "x + y", "x / (y + 1)"])
def test_many_bands_of_one_number_are_no_burden(subject: str) -> None:
    bands = [f"{k / 10} <= {subject} < {(k + 1) / 10}" for k in range(60)]
    found = told([*bands, f"{subject} > 6", f"{subject} < 0"])
    assert overlaps_of(found) == []
    assert gaps_of(found) == ["q"]
    assert found.counts.reachable == 61
    assert found.counts.per_project_most == 1
    assert dead_of(found) == [("q", "62")]


def test_a_threshold_is_exact_however_long() -> None:
    tiny = "0.000000000000000000001"
    found = told([f"x < 5 + {tiny}", "x > 5"], X)
    assert overlaps_of(found) == [("q", "1", "2")]
    witness = found.conditions.overlaps[0].witness
    assert witness is not None
    value = dict(witness.facts)["x"]
    assert isinstance(value, Fraction) and 5 < value < 5 + Fraction(tiny)
