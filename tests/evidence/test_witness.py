"""Witnesses: a value for what matters, nothing for what does not, and the branches on the way."""

from __future__ import annotations

from fractions import Fraction

from samesum.evidence.evidence import Evidence
from samesum.evidence.routes.witness import Witness
from support.asking import SAMPLES, cases, choice, evidence_of, rulebook
from support.replay import check_witnesses

FACTS = """index stratum, at most 2
fact x, 0 to 10, clause 2
fact unused, 0 to 10, clause 2
fact soil, one of mineral, peaty or organic, clause 2
fact wet, yes or no, clause 2
fact depth per stratum, 0 to 10, clause 2
setting limit, 0 to 1, by developer, clause 3
judgement access, "where practicable", by verifier, clause 4
"""


def gap(*blocks: str, result: str = "q") -> Witness:
    found: Evidence = evidence_of(rulebook(FACTS, *blocks, result=result))
    check_witnesses(found)
    assert len(found.conditions.gaps) == 1
    witness = found.conditions.gaps[0].witness
    assert witness is not None
    return witness


def test_only_what_matters_is_given_in_the_order_declared() -> None:
    witness = gap(cases("q", ["soil is mineral", "x < 4", "not wet", "limit < 0.5", "not access"]))
    assert [name for name, _ in witness.facts] == ["x", "soil", "wet"]
    assert [name for name, _ in witness.settings] == ["limit"]
    assert [name for name, _ in witness.judgements] == ["access"]
    assert dict(witness.inputs)["wet"] is True and dict(witness.inputs)["access"] is True


def test_a_value_is_a_plain_number_inside_its_cell() -> None:
    assert dict(gap(cases("q", ["x < 3", "x > 7"])).inputs) == {"x": 5}
    assert dict(gap(cases("q", ["x < 3", "x > 3.01"])).inputs)["x"] in (3, Fraction("3.005"))


def test_a_fact_of_an_index_is_given_for_every_element() -> None:
    per_stratum = cases("q", ["depth < 3", "depth > 3"]).replace("[t],", "[t] per stratum,")
    found = evidence_of(rulebook(FACTS, per_stratum, result="sum(q over stratum)"))
    check_witnesses(found)
    for element, each in enumerate(found.conditions.gaps):
        assert each.witness is not None
        values = dict(each.witness.facts)["depth"]
        assert isinstance(values, tuple) and len(values) == 2
        assert values[element] == 3


def test_several_facts_in_one_comparison_get_values_that_fit() -> None:
    witness = gap(
        cases("q", ["x + depth_sum < 12", "x + depth_sum > 12"]),
        "quantity depth_sum, clause 2\n    = sum(depth over stratum)\n",
    )
    given = dict(witness.inputs)
    depth = given["depth"]
    assert isinstance(depth, tuple) and isinstance(given["x"], Fraction)
    assert given["x"] + sum(value for value in depth if isinstance(value, Fraction)) == 12


def test_the_route_names_the_branches_on_the_way() -> None:
    inner = """quantity q [t], clause 5
    cases
        when x < 5
            = c
        when x >= 5
            cases
                when c takes b and x < 7
                    = 1 [t]
                when x >= 7
                    = 2 [t]
                when c takes a and x < 6
                    = 3 [t]
                when c takes a and x > 6
                    = 4 [t]
"""
    witness = gap(choice("c", ["a", "b"]), inner)
    assert dict(witness.route) == {"c": "a", "q": "2"}
    assert dict(witness.inputs) == {"x": 6}


def test_the_project_with_most_and_with_fewest_routes_is_given() -> None:
    text = (
        choice("q", ["a", "b", "z"])
        .replace("option b", "option b, only when x > 3")
        .replace("option z", "option z, only when x > 7")
    )
    found = evidence_of(rulebook(FACTS, text, result="q")).counts
    assert (found.per_project_least, found.per_project_most) == (1, 3)
    assert found.most_at is not None and found.least_at is not None
    most, least = dict(found.most_at.inputs)["x"], dict(found.least_at.inputs)["x"]
    assert isinstance(most, Fraction) and most > 7
    assert isinstance(least, Fraction) and least <= 3


def test_every_witness_of_the_samples_shows_what_it_claims() -> None:
    seen = 0
    for path in sorted(SAMPLES.glob("*.rulebook")):
        if path.stem == "every_fault":  # a unit mismatch stands in it on purpose
            continue
        found = evidence_of(path.read_text("utf-8"))
        check_witnesses(found)
        seen += len(found.conditions.overlaps) + len(found.conditions.gaps)
    assert seen > 10
