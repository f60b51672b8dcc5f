"""The brute force itself, on examples small enough to work out by hand."""

from __future__ import annotations

import random
from dataclasses import replace
from fractions import Fraction
from itertools import product

import numpy as np
import pytest

from brute.counts import Counts, count, gaps, overlapping
from brute.evaluate import Evaluator
from brute.generate import rulebook
from brute.linear import TooLarge
from brute.points import FACT, FIXED, FREE, Points, columns, representative, variables
from brute.rulebooks import (
    And,
    Band,
    Body,
    Cases,
    Chain,
    Choice,
    Compare,
    Condition,
    Constant,
    Expression,
    Fact,
    Follows,
    Formula,
    Holds,
    Index,
    Is,
    Judgement,
    Lookup,
    Not,
    Num,
    OneOf,
    Op,
    Option,
    Or,
    Over,
    Quantity,
    Range,
    Ref,
    Row,
    Rulebook,
    Setting,
    Table,
    Takes,
    When,
    YesNo,
)
from brute.text import render


def n(value: int | str) -> Num:
    return Num(Fraction(value))


def f(value: Expression | int = 0) -> Formula:
    return Formula(n(value) if isinstance(value, int) else value)


def to(low: int, high: int) -> Range:
    return Range(Fraction(low), Fraction(high))


def total(*names: str) -> Formula:
    e: Expression = Ref(names[0])
    for name in names[1:]:
        e = Op("+", e, Ref(name))
    return Formula(e)


def choice(*names: str, by: str = "developer", timing: str = "", **only: Condition) -> Choice:
    return Choice(by, tuple(Option(name, f(), only.get(name)) for name in names), timing)


def cases(*conditions: Condition | None, in_order: bool = False) -> Cases:
    return Cases(tuple(When(c, f()) for c in conditions), in_order)


def result(*bodies: Body, **declared: object) -> Rulebook:
    """Quantities q1, q2, … and their sum as the result."""
    names = [f"q{k}" for k in range(1, len(bodies) + 1)]
    quantities = tuple(Quantity(name, body) for name, body in zip(names, bodies, strict=True))
    return replace(Rulebook("credits", (*quantities, Quantity("credits", total(*names)))), **declared)


def yes(name: str) -> Fact:
    return Fact(name, YesNo())


X = Fact("x", to(0, 10))


def less(value: int, name: str = "x") -> Compare:
    return Compare("<", Ref(name), n(value))


def more(value: int, name: str = "x") -> Compare:
    return Compare(">", Ref(name), n(value))


# --- the worked example of the language ----------------------------------------------------

MARSH = Rulebook(
    "net_removals",
    (
        Quantity(
            "soil_carbon",
            Choice(
                "developer",
                (
                    Option(
                        "regional", f(Over("sum", Op("*", Lookup("stock", (Ref("soil"),)), Ref("area")), "stratum"))
                    ),
                    Option("plots", f(Over("sum", Op("*", Ref("plot_mean"), Ref("area")), "stratum")), reference=True),
                ),
                "period",
            ),
        ),
        Quantity(
            "methane",
            Cases(
                (
                    When(Compare(">=", Ref("salinity"), n(18)), f()),
                    When(
                        And((less(18, "salinity"), Is("soil", ("peaty", "organic")))),
                        Follows("soil_carbon", (Option("regional", f(5)), Option("plots", f(3)))),
                    ),
                )
            ),
        ),
        Quantity(
            "net_removals",
            f(
                Op(
                    "*",
                    Op("-", Op("*", Ref("soil_carbon"), Ref("c_to_co2")), Ref("methane")),
                    Op("-", n(1), Ref("discount")),
                )
            ),
        ),
    ),
    facts=(
        Fact("area", to(1, 5000), "stratum"),
        Fact("soil", OneOf(("mineral", "peaty", "organic"))),
        Fact("salinity", to(0, 40)),
        Fact("plot_mean", to(20, 400), "stratum"),
    ),
    settings=(Setting("discount", Range(Fraction(1, 20), Fraction(1, 5)), "developer"),),
    judgements=(Judgement("access", "developer"),),
    constants=(Constant("c_to_co2", Fraction(44, 12)),),
    tables=(
        Table(
            "stock",
            ("soil",),
            tuple(Row((soil,), Fraction(v)) for soil, v in (("mineral", 62), ("peaty", 90), ("organic", 118))),
        ),
    ),
    indices=(Index("stratum", 4),),
    periods=8,
)


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


# --- counts ------------------------------------------------------------------------------


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


# --- conditions ----------------------------------------------------------------------------


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


# --- points ------------------------------------------------------------------------------


@pytest.mark.parametrize("seed", range(60))
def test_points_show_every_sign_pattern_of_a_fine_grid(seed: int) -> None:
    """Nothing that a grid of twelfths sees, over all variables and over the inner ones for each outer value, is missing
    from the points; and every point lies in the box."""
    dice = random.Random(seed)
    size = dice.randint(1, 3)
    groups = sorted(dice.choice((FACT, FIXED, FREE)) for _ in range(size))
    box = tuple((Fraction(0), Fraction(dice.randint(1, 2)), group) for group in groups)
    few = 3 if size == 3 else 4
    forms = {
        (*(Fraction(dice.choice((-1, 0, 1, 1, 2))) for _ in range(size)), Fraction(dice.randint(-6, 4), 2))
        for _ in range(dice.randint(1, few))
    }
    forms = {form for form in forms if any(form[:-1])}
    steps = {1: 24, 2: 12, 3: 6}[size]
    values = [[Fraction(k, steps) for k in range(int(high * steps) + 1)] for _, high, _ in box]
    vectors = np.array([[float(a) for a in form] for form in forms]).reshape(-1, size + 1)

    def patterns(points: list[tuple[float, ...]]) -> set[frozenset[frozenset[tuple[int, ...]]]]:
        """For each value of the facts what is seen over it, by value of the fixed settings."""
        array = np.array(points)
        shown = array @ vectors[:, :-1].T + vectors[:, -1]
        signs = np.where(np.abs(shown) < 1e-9, 0, np.sign(shown)).astype(int)
        ends = [groups.count(FACT), groups.count(FACT) + groups.count(FIXED)]
        seen: dict[tuple[float, ...], dict[tuple[float, ...], set[tuple[int, ...]]]] = {}
        for point, sign in zip(points, signs, strict=True):
            seen.setdefault(point[: ends[0]], {}).setdefault(point[: ends[1]], set()).add(tuple(sign))
        return {frozenset(frozenset(free) for free in fixed.values()) for fixed in seen.values()}

    points = [p for _, _, p in columns(box, frozenset(forms))]
    assert all(0 <= value <= high for point in points for value, (_, high, _) in zip(point, box, strict=True))
    grid = patterns([tuple(float(v) for v in point) for point in product(*values)])
    found = patterns(points)
    # The grid may be too coarse to see all over one value, never finer than the points.
    for seen in grid:
        assert any(_covers(whole, seen) for whole in found)


def _covers(whole: frozenset[frozenset[tuple[int, ...]]], seen: frozenset[frozenset[tuple[int, ...]]]) -> bool:
    return all(any(part <= other for other in whole) for part in seen)


@pytest.mark.parametrize("seed", range(150))
def test_any_project_is_like_one_of_the_points(seed: int) -> None:
    """Evaluated at projects and human inputs anywhere in their domains, a rulebook shows nothing that its
    points do not."""
    made = rulebook(seed)
    found = count(made)
    dice = random.Random(seed)
    for _ in range(4):
        facts = {name: _anywhere(domain, dice) for name, domain, group in variables(made) if group == FACT}
        at_one = [dict(facts) for _ in range(6)]
        for row in at_one:
            row |= {name: _anywhere(domain, dice) for name, domain, group in variables(made) if group != FACT}
        table = {name: np.array([row[name] for row in at_one]) for name in at_one[0]}
        points = Points(table, len(at_one), np.array([0]), np.arange(len(at_one)))
        evaluator = Evaluator(made, points)
        passes = list(evaluator.passes())
        assert sum(bool(one.complete.any()) for one in passes) <= found.per_project_most
        for one in passes:
            inside = one.mask & one.inside
            assert set(gaps(one, inside)) <= set(found.gaps)
            for id, (has, open_) in one.asked.items():
                where = inside if has is None else inside & has
                for a, b in overlapping(evaluator.written[id], open_, where):
                    assert (id, a, b) in found.overlaps
                assert not where.any() or (id, one.states[id]) not in found.dead_branches


def _anywhere(domain: object, dice: random.Random) -> float | int | bool:
    if isinstance(domain, Range):
        low = -3 if domain.low is None else domain.low
        high = 8 if domain.high is None else domain.high
        return float(low + (high - low) * Fraction(dice.randint(0, 720), 720))
    if isinstance(domain, OneOf):
        return dice.randrange(len(domain.values))
    return dice.random() < 0.5


def test_too_much_is_refused() -> None:
    many = tuple(Fact(f"x{k}", to(0, 1)) for k in range(4))
    e: Expression = Ref("x0")
    for k in range(1, 4):
        e = Op("+", e, Ref(f"x{k}"))
    with pytest.raises(TooLarge):
        representative(result(cases(Compare("<", e, n(2)), None), facts=many))
    with pytest.raises(TooLarge):
        representative(result(cases(Compare("<", Op("*", Ref("x"), Ref("x")), n(2)), None), facts=(X,)))


# --- text --------------------------------------------------------------------------------


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
