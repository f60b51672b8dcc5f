"""Settings beside facts in one comparison: what a project is includes what a setting can still bring about."""

from __future__ import annotations

import pytest

from support.asking import SECONDS, cases, counts_of, evidence_of, gaps_of, overlaps_of, rulebook
from support.replay import check_witnesses

BOTH = "fact share, 0 to 1, clause 2\nsetting limit, 0.2 to 0.6, by developer, clause 3\n"


def figures(conditions: list[str], *blocks: str) -> tuple[int, int, int, int]:
    """reachable, per_project_most, per_project_least, developer_most"""
    counts = counts_of(rulebook(*blocks, cases("q", conditions), result="q"), SECONDS)
    return counts.reachable, counts.per_project_most, counts.per_project_least, counts.developer_most


def test_a_setting_can_be_put_on_either_side_of_a_fact_in_its_range() -> None:
    """Below 0.2 and from 0.6 on the fact alone decides; between, whoever sets the limit has both routes."""
    assert figures(["share < limit", "share >= limit"], BOTH) == (2, 2, 1, 2)


@pytest.mark.parametrize(
    ("applies", "routes"),
    [("share < 0.2", 1), ("share = 0.2", 2), ("0.2 < share < 0.6", 2), ("share = 0.6", 1), ("share > 0.6", 1)],
)
def test_the_kinds_of_project_meet_at_the_ends_of_the_settings_range(applies: str, routes: int) -> None:
    found = figures(["share < limit", "share >= limit"], BOTH, f"applies when {applies}, clause 1\n")
    assert found[1:] == (routes, routes, routes)


def test_the_same_setting_of_the_verifier_is_not_the_developers() -> None:
    assert figures(["share < limit", "share >= limit"], BOTH.replace("by developer", "by verifier")) == (2, 2, 1, 1)


def test_a_setting_below_every_fact_decides_nothing() -> None:
    facts = "fact share, 0.7 to 1, clause 2\nsetting limit, 0.2 to 0.6, by developer, clause 3\n"
    assert figures(["share < limit", "share >= limit"], facts) == (1, 1, 1, 1)


def test_three_ways_that_one_setting_brings_about() -> None:
    """Equality is a way of its own: less, equal, more."""
    conditions = ["share < limit", "share = limit", "share > limit"]
    assert figures(conditions, BOTH) == (3, 3, 1, 3)
    # at 0.2 the limit can be equal or more, never less
    assert figures(conditions, BOTH, "applies when share = 0.2, clause 1\n") == (2, 2, 2, 2)


def test_one_setting_moves_two_comparisons_together() -> None:
    """A limit cannot be below one fact and above a smaller one: of four combinations three occur."""
    facts = "fact a, 0 to 1, clause 2\nfact b, 0 to 1, clause 2\nsetting limit, 0 to 1, by developer, clause 3\n"
    text = rulebook(
        facts,
        "applies when a < b, clause 1\n",
        cases("q", ["limit < a", "limit >= a"]),
        cases("w", ["limit < b", "limit >= b"]),
        result="q + w",
    )
    counts = counts_of(text)
    assert (counts.reachable, counts.per_project_most) == (3, 3)
    # a = 0: the limit is never below it
    assert counts.per_project_least == 2


def test_two_settings_share_a_comparison() -> None:
    facts = "fact x, 0 to 4, clause 2\nsetting s, 0 to 1, by developer, clause 3\n"
    facts += "setting v, 0 to 1, by verifier, clause 3\n"
    # x < s + v: never from 2 on; for less than 2 both together can, the developer alone only with v given
    assert figures(["x < s + v", "x >= s + v"], facts) == (2, 2, 1, 2)
    beyond = "applies when x >= 1, clause 1\n"
    assert figures(["x < s + v", "x >= s + v"], facts, beyond) == (2, 2, 1, 2)


def test_a_setting_leaves_gaps_and_overlaps_to_whoever_sets_it() -> None:
    found = evidence_of(rulebook(BOTH, cases("q", ["share < limit", "share > limit + 0.1"]), result="q"))
    check_witnesses(found)
    assert gaps_of(found) == ["q"]
    assert overlaps_of(found) == []
    # a share of 0 or 1 has one route whatever is set; around a limit there may be none
    assert (found.counts.per_project_most, found.counts.per_project_least) == (2, 1)


def test_facts_that_hang_together_through_a_quantity() -> None:
    facts = "fact total, 1 to 10, clause 2\nfact part, 0 to 10, clause 2\napplies when part <= total, clause 1\n"
    text = rulebook(
        facts,
        "quantity fraction, clause 2\n    = part / total\n",
        cases("q", ["fraction <= 1", "fraction > 1"]),
        result="q",
    )
    found = evidence_of(text)
    assert found.counts.exact
    assert [(each.branch_point, each.branch) for each in found.conditions.dead_branches] == [("q", "2")]
    assert gaps_of(found) == []


def test_settings_alone_leave_every_project_the_same() -> None:
    settings = "setting s, 0 to 1, by developer, clause 3\nsetting v, 0 to 1, by verifier, clause 3\n"
    assert figures(["s < v", "s = v", "s > v"], settings) == (3, 3, 3, 3)


@pytest.mark.parametrize(
    ("subject", "routes"), [("sqrt(s) + x", (2, 2)), ("sqrt(s + x)", (2, 2)), ("sqrt(x) + s / 9", (1, 2))]
)
def test_a_root_moves_with_the_setting_in_it(subject: str, routes: tuple[int, int]) -> None:
    """Whoever sets ``s`` from 0 to 9 takes its root from 0 to 3. Where the solver cannot say which projects that leaves
    a choice, the figures say so."""
    facts = "fact x, 0 to 1.5, clause 2\nsetting s, 0 to 9, by developer, clause 3\n"
    text = rulebook(facts, cases("q", [f"{subject} < 1.6", f"{subject} >= 1.6"]), result="q")
    counts = evidence_of(text).counts
    least = counts.per_project_least if counts.exact else counts.at_least["per_project_least"]
    assert least <= routes[0] <= counts.per_project_least
    assert counts.per_project_most == routes[1]
