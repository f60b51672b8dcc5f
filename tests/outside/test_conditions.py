"""Decision tables with gaps and overlaps that are known from elsewhere, as rulebooks.

The source stands beside each check; every witness that is given is replayed.
"""

from __future__ import annotations

from fractions import Fraction

import pytest

from samesum.evidence.evidence import Evidence
from samesum.evidence.routes.witness import Witness
from support.asking import cases, counts_of, dead_of, evidence_of, gaps_of, overlaps_of, rulebook
from support.replay import check_witnesses

# --- decision tables -------------------------------------------------------------------------
# dmn-tck/tck (Decision Model and Notation conformance tables, Apache-2.0), 0004-simpletable-U and
# 0005-simpletable-A, re-worded; the rows themselves are recalled.

APPLICANT = (
    "fact age, 0 to 120, clause 2\n",
    "fact risk, one of high, medium or low, clause 2\n",
    "fact affordable, yes or no, clause 2\n",
)
UNIQUE = [
    "age >= 18 and risk is one of medium or low and affordable",
    "age < 18 and risk is one of medium or low and affordable",
    "risk is high and affordable",
    "not affordable",
]
ANY = ["age >= 18 and risk is low and affordable", "age < 18", "risk is high", "not affordable"]
ANY_COMPLETE = ["age >= 18 and risk is one of medium or low and affordable", *ANY[1:]]


def table(conditions: list[str], *facts: str) -> str:
    return rulebook(*facts, cases("q", conditions), result="q")


def replayed(text: str) -> Evidence:
    found = evidence_of(text)
    assert not found.conditions.undecided
    assert found.counts.exact
    check_witnesses(found)
    return found


def given(witness: Witness | None) -> dict[str, object]:
    assert witness is not None
    return dict(witness.inputs)


def test_a_unique_table_is_clean() -> None:
    """0004-simpletable-U: age cut at 18; risk high, medium, low; affordable yes, no."""
    found = replayed(table(UNIQUE, *APPLICANT))
    assert (overlaps_of(found), gaps_of(found), dead_of(found)) == ([], [], [])
    assert found.counts.per_project_most == found.counts.per_project_least == 1
    assert found.counts.reachable == 4


def test_an_any_table_overlaps_in_three_pairs_and_has_no_gap() -> None:
    """0005-simpletable-A: overlaps exactly of rules {2,3}, {2,4}, {3,4} and {2,3,4}, no gap."""
    found = replayed(table(ANY_COMPLETE, *APPLICANT))
    assert overlaps_of(found) == [("q", "2", "3"), ("q", "2", "4"), ("q", "3", "4")]
    assert gaps_of(found) == []
    # {2,3,4}: one project has three rules at once, no project more
    assert found.counts.per_project_most == 3
    most = given(found.counts.most_at)
    assert most["risk"] == "high" and most["affordable"] is False
    assert isinstance(most["age"], Fraction) and most["age"] < 18
    # and none of the overlaps holds with rule 1
    alone = f"applies when {ANY_COMPLETE[0]}, clause 1\n"
    assert counts_of(table(ANY_COMPLETE, *APPLICANT, alone)).per_project_most == 1


def test_leaving_out_a_value_of_the_any_table_opens_a_gap_there() -> None:
    """The same table without `medium` in rule 1: exactly the affordable grown-ups of medium risk are left over."""
    found = replayed(table(ANY, *APPLICANT))
    assert gaps_of(found) == ["q"]
    witness = given(found.conditions.gaps[0].witness)
    assert witness["risk"] == "medium" and witness["affordable"] is True
    assert isinstance(witness["age"], Fraction) and witness["age"] >= 18


BANDS = ["18 <= age <= 21", "22 <= age <= 25", "26 <= age <= 35", "36 <= age <= 49", "age >= 50"]
HOLES = [(21, 22), (25, 26), (35, 36), (49, 50)]


def test_age_bands_have_four_gaps_over_real_numbers() -> None:
    """dmn-tck/tck, age bands [18..21], [22..25], [26..35], [36..49], >= 50 on [18, 120]: (21,22), (25,26), (35,36),
    (49,50). One gap is shown at a time: close what is shown, and the next appears, four times."""
    bands = list(BANDS)
    seen = []
    for _ in HOLES:
        found = replayed(table(bands, "fact age, 18 to 120, clause 2\n"))
        assert overlaps_of(found) == []
        age = given(found.conditions.gaps[0].witness)["age"]
        assert isinstance(age, Fraction)
        hole = next((low, high) for low, high in HOLES if low < age < high)
        seen.append(hole)
        bands.insert(0, f"{hole[0]} < age < {hole[1]}")
    assert sorted(seen) == HOLES
    closed = replayed(table(bands, "fact age, 18 to 120, clause 2\n"))
    assert (overlaps_of(closed), gaps_of(closed)) == ([], [])
    assert closed.counts.per_project_least == 1


@pytest.mark.parametrize(("low", "high"), HOLES)
def test_each_hole_between_age_bands_is_open_at_both_ends(low: int, high: int) -> None:
    """dmn-tck/tck, the same bands: the bounds themselves are covered, everything between is not."""
    for condition, has_gap, least in (
        (f"age = {low} or age = {high}", [], 1),
        (f"{low} < age < {high}", ["q"], 0),
        (f"{low} <= age <= {high}", ["q"], 0),
    ):
        text = table(BANDS, "fact age, 18 to 120, clause 2\n", f"applies when {condition}, clause 1\n")
        found = replayed(text)
        assert gaps_of(found) == has_gap
        assert found.counts.per_project_least == least


def test_age_bands_have_no_gap_over_whole_numbers() -> None:
    """dmn-tck/tck, the same bands: no gap over whole numbers, whether applicability says so or the bands do."""
    found = replayed(table(BANDS, "fact age, 18 to 120, clause 2\n", "applies when age = floor(age), clause 1\n"))
    assert (overlaps_of(found), gaps_of(found)) == ([], [])
    whole = [band.replace("age", "floor(age)") for band in BANDS]
    found = replayed(table(whole, "fact age, 18 to 120, clause 2\n"))
    assert (overlaps_of(found), gaps_of(found)) == ([], [])
    assert found.counts.per_project_least == found.counts.per_project_most == 1
    assert found.counts.reachable == 5


ABOVE = ["x > 1", "x > 2", "x > 3", "x > 5"]


def test_bands_that_are_open_above_all_hold_together() -> None:
    """dmn-tck/tck, bands > 1, > 2, > 3, > 5 together: at 6 all four hold; at 1 none."""
    found = replayed(table(ABOVE, "fact x, 0 to 10, clause 2\n"))
    assert overlaps_of(found) == [("q", str(a), str(b)) for a in range(1, 5) for b in range(a + 1, 5)]
    assert gaps_of(found) == ["q"]
    assert (found.counts.per_project_most, found.counts.per_project_least) == (4, 0)
    for at, routes in ((0, 0), (1, 0), (2, 1), (3, 2), (5, 3), (6, 4)):
        text = table(ABOVE, "fact x, 0 to 10, clause 2\n", f"applies when x = {at}, clause 1\n")
        assert counts_of(text).per_project_most == routes, at


def test_bands_in_order_hold_one_at_a_time() -> None:
    """The same bands in order of writing: the first takes all that is above 1, the rest is never taken."""
    found = replayed(rulebook("fact x, 0 to 10, clause 2\n", cases("q", ABOVE, "cases in order"), result="q"))
    assert overlaps_of(found) == []
    assert dead_of(found) == [("q", "2"), ("q", "3"), ("q", "4")]
    assert gaps_of(found) == ["q"]


def three_conditions(applies: str = "") -> str:
    """Rules `first yes` and `second yes` over three yes/no conditions; the conditions also leave a route each, so
    that routes tell the eight cases apart."""
    names = ("first", "second", "third")
    facts = [f"fact {name}, yes or no, clause 2\n" for name in names]
    told = [cases(f"told_{name}", [name, f"not {name}"]) for name in names]
    return rulebook(
        *facts,
        *told,
        f"applies when {applies}, clause 1\n" if applies else "",
        cases("q", ["first", "second"]) if not applies else "",
        result=" + ".join(f"told_{name}" for name in names) + ("" if applies else " + q"),
    )


def test_a_count_of_cases_is_no_proof_that_a_table_is_complete() -> None:
    """CODASYL 1982 tradition (recalled): two rules cover 4 + 4 = 8 = 2^3 cases, yet both hold in 2, none in 2."""
    cases_of = {
        condition: counts_of(three_conditions(condition)).reachable
        for condition in ("first", "second", "first and second", "not first and not second", "third or not third")
    }
    assert cases_of == {
        "first": 4,
        "second": 4,
        "first and second": 2,
        "not first and not second": 2,
        "third or not third": 8,
    }
    found = replayed(three_conditions())
    assert overlaps_of(found) == [("q", "1", "2")]
    assert gaps_of(found) == ["q"]
    assert given(found.conditions.overlaps[0].witness) == {"first": True, "second": True}
    assert given(found.conditions.gaps[0].witness) == {"first": False, "second": False}
    # two cases are without a route and two have two: four with one, and twice two
    assert found.counts.reachable == 8
    assert (found.counts.per_project_most, found.counts.per_project_least) == (2, 0)


# --- root-to-shoot ratios -----------------------------------------------------------------------
# 2006 IPCC Guidelines Vol 4 Table 4.4: bands of above-ground biomass written "< b" and "> b".

RATIOS = {"conifers": (50, ".40", ".29"), "broadleaf": (75, ".46", ".23"), "dry": (20, ".56", ".28")}


def roots(kind: str, above: str) -> str:
    border, low, high = RATIOS[kind]
    return rulebook(
        "fact biomass [t d.m./ha], 0 to 500, clause 2\n",
        f"""quantity roots [t d.m./ha], clause 3
    cases
        when biomass < {border} [t d.m./ha]
            = 0{low} * biomass
        when biomass {above} {border} [t d.m./ha]
            = 0{high} * biomass
""",
        result="roots * 1 [ha]",
    ).replace("r [t]", "r [t d.m.]")


@pytest.mark.parametrize("kind", sorted(RATIOS))
def test_root_ratios_leave_exactly_the_border_uncovered(kind: str) -> None:
    """2006 GL Vol 4 Table 4.4: "< b" and "> b" leave b itself without a ratio, and nothing else."""
    border = RATIOS[kind][0]
    found = replayed(roots(kind, ">"))
    assert gaps_of(found) == ["roots"]
    assert given(found.conditions.gaps[0].witness) == {"biomass": border}
    elsewhere = roots(kind, ">") + f"\napplies when biomass <> {border} [t d.m./ha], clause 1\n"
    assert gaps_of(replayed(elsewhere)) == []
    closed = replayed(roots(kind, ">="))
    assert (gaps_of(closed), overlaps_of(closed)) == ([], [])


def test_bounds_that_both_include_the_border_overlap_there_alone() -> None:
    """The language's own page: `>= 18` and `<= 18` overlap, at 18 alone."""
    text = table(["salinity >= 18", "salinity <= 18"], "fact salinity, 0 to 40, clause 2\n")
    found = replayed(text)
    assert overlaps_of(found) == [("q", "1", "2")]
    assert given(found.conditions.overlaps[0].witness) == {"salinity": 18}
    elsewhere = table(
        ["salinity >= 18", "salinity <= 18"], "fact salinity, 0 to 40, clause 2\n", "applies when salinity <> 18\n"
    )
    assert overlaps_of(replayed(elsewhere)) == []
