"""The counts of the brute force, on examples small enough to work out by hand."""

from __future__ import annotations

from dataclasses import replace

import pytest

from brute.counts import Counts, count
from brute.examples import MARSH, X, cases, choice, f, less, more, n, result, to, total, yes
from brute.rulebooks import (
    And,
    Body,
    Cases,
    Chain,
    Choice,
    Compare,
    Fact,
    Follows,
    Holds,
    Index,
    Judgement,
    Not,
    Op,
    Option,
    Over,
    Quantity,
    Ref,
    Rulebook,
    Setting,
    Takes,
    When,
)

# --- the worked example of the language --------------------------------------------------------


def test_the_worked_example_of_the_language() -> None:
    """The figures that ``answers`` gives for the example in ``language``."""
    assert count(MARSH) == Counts(
        on_paper=4,
        reachable=4,
        per_project_most=2,
        per_project_least=0,
        developer_most=2,
        over_periods_most=256,
        overlaps=(),
        gaps=("methane",),
        dead_branches=(),
        free_values=("discount",),
    )


# --- counts ------------------------------------------------------------------------------------


@pytest.mark.parametrize("k", range(1, 8))
def test_independent_choices_multiply(k: int) -> None:
    """k independent two-way choices 2^k."""
    found = count(result(*[choice("a", "b")] * k))
    assert (found.on_paper, found.reachable, found.per_project_most, found.per_project_least) == (2**k,) * 4


def test_arities_multiply() -> None:
    found = count(result(choice("a", "b"), choice("a", "b", "c"), choice("a", "b", "c", "d")))
    assert found.reachable == 24


@pytest.mark.parametrize("k", range(1, 8))
def test_nested_choices_add(k: int) -> None:
    """k nested two-way choices k + 1."""
    body: Body = f()
    for _ in range(k):
        body = Choice("developer", (Option("a", f()), Option("b", body)))
    assert count(result(body)).reachable == k + 1


def test_follows_ties() -> None:
    tied = Follows("q1", (Option("b", f()), Option("a", f())))
    found = count(result(choice("a", "b"), tied, tied))
    assert (found.on_paper, found.reachable) == (2, 2)


def test_follows_reaches_its_leader() -> None:
    """The leader's own quantity is not needed, so nothing else would reach it."""
    found = count(
        Rulebook(
            "credits",
            (
                Quantity("q1", Choice("developer", (Option("a", choice("c", "d")), Option("b", f())), "validation")),
                Quantity("credits", Follows("q1", (Option("a", f()), Option("b", f())))),
            ),
            periods=3,
        )
    )
    assert (found.on_paper, found.reachable, found.over_periods_most) == (2, 2, 2)


@pytest.mark.parametrize(
    ("g", "h", "routes"), [(False, False, 6), (False, True, 8), (True, False, 12), (True, True, 16)]
)
def test_steps_of_a_tool(g: bool, h: bool, routes: int) -> None:
    """CDM TOOL07-like steps (recalled, re-worded): 6, 8, 12, 16 routes."""
    made = result(
        choice("skip", "take", take=Holds("g")),
        choice("simple", "adjusted", "dispatch", "average", average=Holds("h")),
        choice("before", "after"),
        facts=(yes("g"), yes("h")),
    )
    only = [Holds(name) if value else Not(Holds(name)) for name, value in (("g", g), ("h", h))]
    found = count(replace(made, applies=tuple(only)))
    assert (found.per_project_most, found.per_project_least, found.reachable) == (routes,) * 3
    whole = count(made)
    assert (whole.reachable, whole.per_project_most, whole.per_project_least, whole.on_paper) == (16, 16, 6, 16)


def test_dead_wood_and_litter() -> None:
    """Defaults against plots, five cells of elevation and rain: 10 routes (recalled)."""
    x, rain = Ref("x"), Ref("rain")
    cells = (
        And((Compare("<", x, n(2)), Compare("<", rain, n(3)))),
        And((Compare("<", x, n(2)), Chain(n(3), "<=", rain, "<", n(5)))),
        And((Compare("<", x, n(2)), Compare(">=", rain, n(5)))),
        And((Compare(">=", x, n(2)), Compare("<", rain, n(3)))),
        And((Compare(">=", x, n(2)), Compare(">=", rain, n(3)))),
    )
    found = count(result(choice("default", "plots"), cases(*cells), facts=(X, Fact("rain", to(0, 10)))))
    assert (found.reachable, found.per_project_most, found.per_project_least) == (10, 2, 2)
    assert not found.overlaps and not found.gaps and not found.dead_branches


def test_elements_of_an_index_have_branch_points_of_their_own() -> None:
    per = Rulebook(
        "credits",
        (
            Quantity("stock", choice("a", "b"), "stratum"),
            Quantity("loss", Follows("stock", (Option("a", f()), Option("b", cases(less(2), more(1))))), "stratum"),
            Quantity("credits", f(Op("+", Over("sum", Ref("stock"), "stratum"), Over("max", Ref("loss"), "stratum")))),
        ),
        facts=(X,),
        indices=(Index("stratum", 3),),
    )
    found = count(per)
    assert found.on_paper == 3**3
    assert found.per_project_most == 3**3  # at 1 < x < 2 both branches of each loss@k/b
    assert found.per_project_least == 2**3
    assert found.overlaps == tuple((f"loss@{k}/b", "1", "2") for k in (1, 2, 3))


def test_routes_that_differ_in_facts_alone_count_once() -> None:
    found = count(result(cases(less(5), None), facts=(X, yes("g"))))
    assert (found.reachable, found.per_project_most) == (2, 1)


def test_what_somebody_else_decides() -> None:
    """A choice, a setting and a judgement of others count as facts for developer_most."""
    found = count(
        result(
            choice("a", "b"),
            choice("c", "d", by="verifier", d=Holds("access")),
            cases(Holds("access"), None),
            cases(Compare("<", Ref("limit"), n(1)), None),
            judgements=(Judgement("access", "programme"),),
            settings=(Setting("limit", to(0, 2), "verifier"),),
        )
    )
    assert found.per_project_most == 2 * 3 * 2
    assert found.developer_most == 2


def test_a_would_be_option_that_is_closed_leaves_no_route() -> None:
    """The verifier's option c is open only under the developer's a, d only under b."""
    both = result(choice("a", "b"), choice("c", "d", by="verifier", c=Takes("q1", "a"), d=Takes("q1", "b")))
    found = count(both)
    assert (found.per_project_most, found.developer_most) == (2, 1)


def test_fixed_at_validation() -> None:
    """Σ over the fixed states: 2 · (2 routes)^3, against (4 routes)^3 when all are free."""
    fixed = result(choice("a", "b", timing="validation"), choice("c", "d"), periods=3)
    assert count(fixed).over_periods_most == 2 * 2**3
    free = result(choice("a", "b", timing="period"), choice("c", "d"), periods=3)
    assert count(free).over_periods_most == 4**3


def test_not_reached_is_a_state_of_its_own() -> None:
    nested = Choice(
        "developer",
        (Option("a", f()), Option("b", choice("c", "d", timing="validation"))),
        "period",
    )
    # Sequences of three routes in which b/… is c whenever reached means: always reached with c, always with d, or
    # never reached. 1 + 1 + 1.
    assert count(result(nested, periods=3)).over_periods_most == 3


def test_settings_that_reach_the_result() -> None:
    used, asked, apart = (Setting(name, to(0, 2), "developer") for name in ("used", "asked", "apart"))
    condition = Compare("<", Ref("q3"), n(1))
    found = count(
        Rulebook(
            "credits",
            (
                Quantity("q1", Cases((When(Compare("<", Ref("asked"), n(1)), f(Ref("used"))), When(None, f())))),
                Quantity("q3", f(Ref("apart"))),
                Quantity("credits", Cases((When(condition, total("q1")), When(None, f())))),
            ),
            settings=(used, asked, apart),
        )
    )
    assert found.free_values == ("used",)
