"""The figures of ``count``, each on a rulebook small enough to count by hand."""

from __future__ import annotations

import pytest

from support.asking import SAMPLES, cases, choice, counts_of, rulebook

PERIODS = "periods 4\n"


def test_the_example_of_the_language() -> None:
    """The figures that ``answers`` gives for it."""
    counts = counts_of((SAMPLES / "marsh_example.rulebook").read_text("utf-8"))
    assert (counts.on_paper, counts.reachable) == (4, 4)
    assert (counts.per_project_most, counts.per_project_least, counts.developer_most) == (2, 0, 2)
    assert counts.over_periods_most == 256
    assert counts.free_values == ("discount",)


@pytest.mark.parametrize(
    ("first", "second", "expected"),
    [
        ("", "", 6**4),
        (", open each period", ", open each period", 6**4),
        (", fixed at validation", "", 2 * 3**4),
        ("", ", fixed at validation", 3 * 2**4),
        (", fixed at validation", ", fixed at validation", 6),
    ],
)
def test_what_is_fixed_at_validation_is_the_same_in_every_period(first: str, second: str, expected: int) -> None:
    text = rulebook(
        PERIODS, choice("q", "ab", f"by developer{first}"), choice("w", "abc", f"by developer{second}"), result="q + w"
    )
    assert counts_of(text).over_periods_most == expected


def test_a_fixed_choice_that_is_not_reached_is_not_reached_all_along() -> None:
    """q free each period; w, fixed, is asked under q's b alone. Never b: 1; always b: 2; mixed is no sequence."""
    inner = """quantity q [t], clause 2
    choice by developer
        option a
            = 1 [t]
        option b
            = w
"""
    text = rulebook(PERIODS, inner, choice("w", "xy", "by developer, fixed at validation"), result="q")
    assert counts_of(text).over_periods_most == 3


def test_the_most_over_periods_is_for_one_project() -> None:
    """A fact opens the second option; it is the same in all periods."""
    text = rulebook(
        PERIODS,
        "fact f, yes or no, clause 2\n",
        choice("q", "ab").replace("option b", "option b, only when f"),
        choice("w", "ab").replace("option b", "option b, only when not f"),
        result="q + w",
    )
    counts = counts_of(text)
    assert (counts.reachable, counts.per_project_most, counts.over_periods_most) == (3, 2, 2**4)


def test_what_others_decide_is_given_to_the_developer() -> None:
    blocks = [choice("q", "ab"), choice("w", "abc", "by verifier"), choice("z", "abcde", "by programme")]
    counts = counts_of(rulebook(*blocks, result="q + w + z"))
    assert (counts.per_project_most, counts.developer_most) == (30, 2)


def test_a_judgement_of_the_verifier_is_given_to_the_developer() -> None:
    judged = 'judgement sound, "where practicable", by verifier, clause 2\n'
    text = rulebook(judged, choice("q", "abc").replace("option c", "option c, only when sound"), result="q")
    assert (counts_of(text).developer_most, counts_of(text).per_project_most) == (3, 3)
    counts = counts_of(rulebook(judged, cases("q", ["sound", "not sound"]), result="q"))
    assert (counts.per_project_most, counts.developer_most) == (2, 1)
    counts = counts_of(
        rulebook(judged.replace("verifier", "developer"), cases("q", ["sound", "otherwise"]), result="q")
    )
    assert (counts.per_project_most, counts.developer_most) == (2, 2)


def test_conditions_are_neither_asked_nor_obeyed_on_paper() -> None:
    """What only a condition asks is not reached on paper; what no project can take is."""
    text = rulebook(
        "fact x, 0 to 10, clause 2\n", choice("c", "ab"), cases("q", ["c takes a and x > 20", "otherwise"]), result="q"
    )
    counts = counts_of(text)
    assert (counts.on_paper, counts.reachable) == (2, 2)
    assert counts.per_project_most == 2, "the choice is reached by the question"


def test_a_quantity_is_evaluated_once_and_only_when_needed() -> None:
    unused = choice("never", "ab")
    counts = counts_of(rulebook(choice("q", "ab"), unused, result="q + q"))
    assert (counts.on_paper, counts.reachable) == (2, 2)


def test_routes_that_end_in_a_gap_are_not_counted() -> None:
    text = rulebook(
        "fact x, 0 to 10, clause 2\n", choice("c", "ab"), cases("q", ["x < 5 and c takes a"]), result="q + c"
    )
    counts = counts_of(text)
    assert (counts.on_paper, counts.reachable, counts.per_project_most, counts.per_project_least) == (2, 1, 1, 0)


@pytest.mark.parametrize(
    ("formula", "free"),
    [
        ("1 [t] * s", ("s",)),
        ("q", ()),
        ("1 [t] * s + 1 [t] * v", ("s", "v")),
        ("1 [t] * inner", ("v",)),
    ],
)
def test_a_setting_is_free_when_its_number_reaches_the_result(formula: str, free: tuple[str, ...]) -> None:
    settings = "setting s, 0 to 1, by developer, clause 3\nsetting v, 0 to 1, by verifier, clause 3\n"
    inner = "quantity inner, clause 2\n    = 1 - v\n"
    text = rulebook(settings, inner, cases("q", ["s < 0.5", "s >= 0.5"]), result=formula)
    assert counts_of(text).free_values == free


def test_a_setting_in_a_branch_that_nobody_takes_is_not_free() -> None:
    text = rulebook(
        "fact x, 0 to 10, clause 2\nsetting s, 0 to 1, by developer, clause 3\n",
        cases("q", ["x > 11", "otherwise"]).replace("= 1 [t]", "= s * 1 [t]"),
        result="q",
    )
    assert counts_of(text).free_values == ()
