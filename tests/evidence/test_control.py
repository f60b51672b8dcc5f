"""Who can move what, and the chain of names it goes through."""

from __future__ import annotations

import pytest

from samesum.evidence.routes.control import Control, find_control
from samesum.graph import build
from support.asking import cases, choice, evidence_of, model_of, rulebook

FACTS = """fact area, 0 to 10, clause 2
setting discount, 0 to 1, by programme, clause 3
judgement access, "where practicable", by verifier, clause 4
"""


def control(*blocks: str, result: str = "q", overlapping: tuple[str, ...] = ()) -> dict[str, Control]:
    return dict(find_control(build(model_of(rulebook(FACTS, *blocks, result=result))), overlapping))


def moved(found: Control) -> list[tuple[str, str, str, tuple[str, ...]]]:
    return [(each.by, each.through, each.source, each.chain) for each in found.movers]


def test_a_fact_leaves_nobody_a_choice() -> None:
    found = control(cases("q", ["area < 3", "area >= 3"]))["q"]
    assert (found.decided_by, found.movers) == (None, ())


@pytest.mark.parametrize("who", ["developer", "verifier", "programme"])
def test_a_choice_belongs_to_whom_the_rulebook_names(who: str) -> None:
    assert control(choice("q", ["a", "b"], f"by {who}"))["q"].decided_by == who


def test_a_choice_of_one_option_is_nobodys() -> None:
    assert control(choice("q", ["a"]))["q"].decided_by is None


def test_whoever_follows_decides_nothing() -> None:
    follower = choice("q", ["a", "b"]).replace("choice by developer", "choice follows lead")
    found = control(choice("lead", ["a", "b"]), follower, result="q + lead")
    assert found["lead"].decided_by == "developer"
    assert (found["q"].decided_by, found["q"].movers) == (None, ())


def test_a_judgement_and_a_setting_steer_directly() -> None:
    found = control(cases("q", ["access and area < 3", "discount > 0.5", "otherwise"]))["q"]
    assert moved(found) == [
        ("verifier", "judgement", "access", ("access",)),
        ("programme", "setting", "discount", ("discount",)),
    ]


def test_a_quantity_passes_on_what_it_rests_on() -> None:
    """The shortest chain from the condition to the source, by name."""
    found = control(
        "quantity net, clause 5\n    = gross * 2\n",
        "quantity gross, clause 5\n    = area * (1 - discount)\n",
        cases("q", ["net < 3", "net >= 3"]),
    )["q"]
    assert moved(found) == [("programme", "setting", "discount", ("net", "gross", "discount"))]


def test_a_choice_in_a_quantity_is_passed_on() -> None:
    found = control(choice("stock", ["a", "b"], "by verifier"), cases("q", ["stock < 2 [t]", "otherwise"]))["q"]
    assert moved(found) == [("verifier", "choice", "stock", ("stock",))]


def test_who_asks_what_was_taken_is_steered_by_the_leader() -> None:
    follower = choice("middle", ["a", "b"]).replace("choice by developer", "choice follows lead")
    found = control(
        choice("lead", ["a", "b"], "by verifier"),
        follower,
        cases("q", ["middle takes a", "otherwise"]),
        result="q + middle",
    )["q"]
    assert moved(found) == [("verifier", "choice", "lead", ("middle", "lead"))]


def test_what_a_quantity_only_asks_steers_as_well() -> None:
    """The judgement stands in a condition inside the quantity that the condition compares."""
    found = control(
        cases("inner", ["access", "not access"]),
        cases("q", ["inner < 2 [t]", "inner >= 2 [t]"]),
    )["q"]
    assert moved(found) == [("verifier", "judgement", "access", ("inner", "access"))]


def test_a_table_passes_on_its_argument() -> None:
    table = "table t [t] by size, clause 5\n    up to 0.5 = 1\n    above 0.5 = 2\n"
    found = control(table, cases("q", ["t(discount) < 2 [t]", "otherwise"]))["q"]
    assert ("programme", "setting", "discount", ("discount",)) in moved(found)


def test_an_overlap_is_the_developers() -> None:
    overlapping = cases("q", ["area < 5", "area > 3"])
    assert control(overlapping, overlapping=("q",))["q"].decided_by == "developer"
    evidence = evidence_of(rulebook(FACTS, overlapping, cases("w", ["q < 2 [t]", "otherwise"]), result="q + w"))
    assert evidence.control["q"].decided_by == "developer"
    assert [(each.through, each.source) for each in evidence.control["w"].movers] == [("overlap", "q")]


def test_a_nested_choice_has_an_id_of_its_own() -> None:
    nested = """quantity q [t], clause 5
    cases
        when access
            choice by programme
                option a
                    = 1 [t]
                option b, only when discount > 0.5
                    = 2 [t]
        otherwise
            = 3 [t]
"""
    found = control(nested)
    assert found["q"].decided_by is None
    assert found["q/1"].decided_by == "programme"
    assert moved(found["q/1"]) == [("programme", "setting", "discount", ("discount",))]


def test_elements_of_an_index_are_one_in_control() -> None:
    text = choice("q", ["a", "b"]).replace("quantity q [t]", "quantity q [t] per stratum")
    found = control("index stratum, at most 3\n", text, result="sum(q over stratum)")
    assert list(found) == ["q"]
    assert found["q"].decided_by == "developer"
