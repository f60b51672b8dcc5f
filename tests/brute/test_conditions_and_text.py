"""Gaps, overlaps and dead branches by brute force, on examples worked out by hand; and the text of a rulebook."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

from brute.counts import Counts, count
from brute.examples import X, cases, choice, f, less, more, n, result, to, yes
from brute.rulebooks import (
    And,
    Band,
    Call,
    Cases,
    Chain,
    Choice,
    Compare,
    Condition,
    Fact,
    Holds,
    Is,
    Judgement,
    Lookup,
    Not,
    OneOf,
    Op,
    Option,
    Or,
    Quantity,
    Ref,
    Row,
    Rulebook,
    Setting,
    Table,
    Takes,
    When,
)
from brute.text import render

# --- conditions --------------------------------------------------------------------------------


def approval(*rules: Condition) -> Counts:
    risk = Fact("risk", OneOf(("high", "medium", "low")))
    return count(result(cases(*rules), facts=(Fact("age", to(0, 120)), risk, yes("affordable"))))


ADULT = Compare(">=", Ref("age"), n(18))
RISKY, AFFORDABLE = Is("risk", ("high",)), Holds("affordable")


def test_a_clean_decision_table() -> None:
    """0004-simpletable-U of dmn-tck/tck, re-worded: no gap, no overlap."""
    found = approval(
        And((ADULT, Not(RISKY), AFFORDABLE)),
        And((Not(ADULT), Not(RISKY), AFFORDABLE)),
        And((RISKY, AFFORDABLE)),
        Not(AFFORDABLE),
    )
    assert (found.gaps, found.overlaps, found.dead_branches) == ((), (), ())
    assert (found.per_project_most, found.per_project_least) == (1, 1)


def test_a_decision_table_with_overlaps() -> None:
    """0005-simpletable-A of dmn-tck/tck, re-worded: overlaps exactly of {2,3}, {2,4}, {3,4} (and all three)."""
    found = approval(And((ADULT, Not(RISKY), AFFORDABLE)), Not(ADULT), RISKY, Not(AFFORDABLE))
    assert found.gaps == ()
    assert found.overlaps == (("q1", "2", "3"), ("q1", "2", "4"), ("q1", "3", "4"))
    assert (found.per_project_most, found.per_project_least) == (3, 1)


BANDS = ((18, 21), (22, 25), (26, 35), (36, 49))


def test_bands_over_real_numbers() -> None:
    """Age bands [18..21], [22..25], [26..35], [36..49], ≥ 50 on [18, 120] have four gaps over real numbers."""
    bands = [Chain(n(low), "<=", Ref("age"), "<=", n(high)) for low, high in BANDS]
    body = cases(*bands, Compare(">=", Ref("age"), n(50)))

    def gap(low: int, high: int) -> bool:
        return bool(count(result(body, facts=(Fact("age", to(low, high)),))).gaps)

    assert gap(18, 120)
    assert [k for k in range(18, 60) if gap(k, k + 1)] == [21, 25, 35, 49]
    assert not any(gap(k, k) for k in range(18, 60))


def test_bands_that_all_hold() -> None:
    """`> 1`, `> 2`, `> 3`, `> 5` together: at 6 all four hold; at 1 none."""
    body = cases(*(more(k) for k in (1, 2, 3, 5)))
    six = count(result(body, facts=(Fact("x", to(6, 6)),)))
    assert (six.per_project_most, len(six.overlaps), six.gaps) == (4, 6, ())
    one = count(result(body, facts=(Fact("x", to(1, 1)),)))
    assert (one.per_project_most, one.gaps, one.overlaps) == (0, ("q1",), ())


def test_a_count_of_cases_is_no_proof() -> None:
    """Over three yes/no conditions "first yes" and "second yes" cover 4 + 4 = 2³ cases, with an overlap and a gap."""
    found = count(result(cases(Holds("a"), Holds("b")), facts=(yes("a"), yes("b"), yes("c"))))
    assert found.overlaps == (("q1", "1", "2"),)
    assert found.gaps == ("q1",)


def test_a_boundary_left_out() -> None:
    """Bands "< b" and "> b" leave exactly b uncovered; ">=" and "<=" overlap there alone."""
    found = count(result(cases(less(5), more(5)), facts=(X,)))
    assert (found.gaps, found.overlaps, found.per_project_least) == (("q1",), (), 0)
    body = cases(Compare("<=", Ref("x"), n(5)), Compare(">=", Ref("x"), n(5)))
    found = count(result(body, facts=(X,)))
    assert (found.gaps, found.overlaps, found.per_project_most) == ((), (("q1", "1", "2"),), 2)


def test_the_first_of_cases_in_order() -> None:
    found = count(result(cases(less(5), less(3), None, in_order=True), facts=(X,)))
    assert found.dead_branches == (("q1", "2"),)
    assert (found.overlaps, found.reachable, found.on_paper) == ((), 2, 3)


def test_a_branch_point_that_is_never_reached_has_no_dead_branches() -> None:
    inner = Cases((When(more(20), cases(less(5), more(30))), When(None, f())))
    assert count(result(inner, facts=(X,))).dead_branches == (("q1", "1"),)


def test_stuck_is_not_a_gap() -> None:
    """q2 asks q1, which has a gap at x >= 5: the gap is q1's, and q2's two branches overlap elsewhere."""
    found = count(
        result(cases(less(5)), cases(Compare("<", Ref("q1"), n(1)), Compare(">=", Ref("x"), n(0))), facts=(X,))
    )
    assert found.gaps == ("q1",)
    assert found.overlaps == (("q2", "1", "2"),)
    assert (found.per_project_least, found.per_project_most) == (0, 2)


def test_gaps_apart_from_each_other_are_both_told() -> None:
    found = count(result(cases(less(5)), cases(less(4)), facts=(X,)))
    assert found.gaps == ("q1", "q2")


def test_where_a_missing_row_is_a_gap() -> None:
    table = Table("t", ("soil",), (Row(("clay",), Fraction(1)),))
    look = Lookup("t", (Ref("soil"),))
    soil = Fact("soil", OneOf(("clay", "sand")))
    nested = Choice("developer", (Option("a", f()), Option("b", Cases((When(less(5), f(look)), When(None, f()))))))
    found = count(
        result(
            f(look),
            nested,
            cases(Compare("<", look, n(3)), None),
            facts=(soil, X),
            tables=(table,),
        )
    )
    assert found.gaps == ("q1", "q2/b", "q3")
    assert (found.per_project_least, found.per_project_most) == (0, 2)


def test_a_band_without_a_row() -> None:
    rows = (Row((Band(None, Fraction(2)),), Fraction(0)), Row((Band(Fraction(3), None),), Fraction(1)))
    made = result(f(Lookup("t", (Ref("x"),))), facts=(X,), tables=(Table("t", ("reach",), rows),))
    assert count(made).gaps == ("q1",)
    assert count(replace(made, facts=(Fact("x", to(0, 2)),))).gaps == ()
    assert count(replace(made, facts=(Fact("x", to(2, 3)),))).gaps == ("q1",)


def test_a_calculation_without_a_value() -> None:
    """Divided by zero at x = 0 alone; a root below zero; a logarithm at zero and below."""
    divided, root = Op("/", n(1), Ref("x")), Call("sqrt", (Op("-", Ref("x"), n(1)),))
    log = Call("ln", (Op("-", Ref("x"), n(2)),))
    for e, low in ((divided, 1), (root, 1), (log, 3)):
        assert count(result(f(e), facts=(X,))).gaps == ("q1",)
        assert count(result(f(e), facts=(Fact("x", to(low, 10)),))).gaps == ()
    assert count(result(f(root), facts=(Fact("x", to(0, 1)),))).per_project_most == 1
    assert count(result(f(log), facts=(Fact("x", to(0, 2)),))).per_project_most == 0


def test_outside_the_rulebook_is_not_counted() -> None:
    body = cases(less(5), more(8))
    found = count(result(body, facts=(X,), applies=(less(3),)))
    assert (found.gaps, found.dead_branches, found.reachable) == ((), (("q1", "2"),), 1)


def test_eligibility_on_a_judgement() -> None:
    """Without access the project is outside, so the branch for that is dead, not a second route."""
    found = count(
        result(cases(Holds("access"), None), judgements=(Judgement("access", "developer"),), applies=(Holds("access"),))
    )
    assert (found.reachable, found.per_project_most, found.dead_branches) == (1, 1, (("q1", "otherwise"),))


def test_a_branch_that_puts_the_project_outside_is_dead() -> None:
    found = count(result(choice("a", "b"), applies=(Takes("q1", "b"),)))
    assert (found.on_paper, found.reachable, found.dead_branches) == (2, 1, (("q1", "a"),))


def test_what_applies_asks_is_on_the_route() -> None:
    made = result(choice("a", "b"), facts=(X,))
    asked = Quantity("other", choice("c", "d", "e"))
    made = replace(made, quantities=(*made.quantities, asked), applies=(Not(Takes("other", "e")),))
    found = count(made)
    assert (found.on_paper, found.reachable) == (2, 4)


def test_takes_reaches_but_does_not_evaluate() -> None:
    made = Rulebook(
        "credits",
        (
            Quantity("q1", Choice("developer", (Option("a", choice("c", "d")), Option("b", f())))),
            Quantity("credits", cases(Takes("q1", "a"), Takes("q1", "b"))),
        ),
    )
    found = count(made)
    assert (found.on_paper, found.reachable, found.overlaps) == (2, 2, ())


def test_a_calculated_quantity_that_hangs_on_a_choice() -> None:
    """q1 is x or 2; q2 asks q1 < x: never under a, at x > 2 under b."""
    q1 = Choice("developer", (Option("a", f(Ref("x"))), Option("b", f(2))))
    found = count(result(q1, cases(Compare("<", Ref("q1"), Ref("x")), None), facts=(X,)))
    assert (found.on_paper, found.reachable, found.per_project_most) == (4, 3, 2)


def test_a_fact_against_a_setting() -> None:
    """At x = 10 no limit is above it; at any other x both branches are open."""
    limit = Setting("limit", to(0, 10), "developer")
    found = count(result(cases(Compare("<", Ref("x"), Ref("limit")), None), facts=(X,), settings=(limit,)))
    assert (found.per_project_most, found.per_project_least, found.developer_most) == (2, 1, 2)
    held = replace(limit, by="verifier")
    found = count(result(cases(Compare("<", Ref("x"), Ref("limit")), None), facts=(X,), settings=(held,)))
    assert (found.per_project_most, found.per_project_least, found.developer_most) == (2, 1, 1)


# --- text --------------------------------------------------------------------------------------


def test_text() -> None:
    made = result(
        Cases(
            (
                When(
                    Or((And((Holds("g"), less(2))), Not(Or((Holds("g"), more(3)))))),
                    f(Op("-", n(1), Op("-", n(2), n(3)))),
                ),
                When(None, f(Op("*", Op("+", n(1), n(-2)), Op("^", n(2), n(2))))),
            )
        ),
        facts=(X, yes("g")),
    )
    assert render(made).splitlines()[-9:] == [
        "quantity q1",
        "    cases",
        "        when g and x < 2 or not (g or x > 3)",
        "            = 1 - (2 - 3)",
        "        otherwise",
        "            = (1 + -2) * 2 ^ 2",
        "",
        "quantity credits",
        "    = q1",
    ]
