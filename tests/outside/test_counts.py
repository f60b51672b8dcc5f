"""Counts that were published or follow from a formula, as rulebooks.

The counter never sees a formula: each rulebook is written out and its routes are counted.
"""

from __future__ import annotations

from math import comb, factorial, prod

import pytest

from support.asking import HEAD, cases, choice, counts_of, rulebook

# --- choices -------------------------------------------------------------------------------


def added(names: list[str]) -> str:
    return " + ".join(names) or "0 [t]"


@pytest.mark.parametrize("k", [0, 1, 2, 10, 200])
def test_independent_two_way_choices_double(k: int) -> None:
    """2^k (product rule; k=200 written out in full)."""
    names = [f"q{number}" for number in range(k)]
    counts = counts_of(rulebook(*(choice(name, "ab") for name in names), result=added(names)))
    assert counts.on_paper == counts.reachable == counts.per_project_most == counts.per_project_least == 2**k
    if k == 200:
        assert counts.reachable == 1606938044258990275541962092341162602522202993782792835301376


def nested(k: int) -> str:
    lines = ["quantity q [t], clause 2"]
    for depth in range(k):
        pad = "    " * (2 * depth + 1)
        lines += [f"{pad}choice by developer", f"{pad}    option stop", f"{pad}        = {depth} [t]"]
        lines += [f"{pad}    option go"]
    lines.append("    " * (2 * k + 1) + f"= {k} [t]")
    return "\n".join(lines) + "\n"


@pytest.mark.parametrize("k", [1, 2, 7, 60])
def test_nested_two_way_choices_add(k: int) -> None:
    """k+1 (sum rule)."""
    counts = counts_of(rulebook(nested(k), result="q"))
    assert counts.on_paper == counts.reachable == counts.per_project_most == k + 1


@pytest.mark.parametrize("k", [2, 7])
def test_the_cyclomatic_number_is_no_count_of_routes(k: int) -> None:
    """McCabe 1976 (IEEE Trans. Software Engineering 2:308): decisions + 1, for nested and independent alike."""
    names = [f"q{number}" for number in range(k)]
    side_by_side = counts_of(rulebook(*(choice(name, "ab") for name in names), result=added(names)))
    one_in_another = counts_of(rulebook(nested(k), result="q"))
    assert one_in_another.reachable == k + 1
    assert side_by_side.reachable == 2**k != k + 1


def test_mixed_arities_multiply() -> None:
    """Product rule: 2 · 3 · 5 · 7 · 11."""
    sizes = [2, 3, 5, 7, 11]
    names = [f"q{size}" for size in sizes]
    blocks = [choice(name, [f"o{k}" for k in range(size)]) for name, size in zip(names, sizes, strict=True)]
    assert counts_of(rulebook(*blocks, result=added(names))).reachable == prod(sizes) == 2310


def test_tied_choices_count_once() -> None:
    """100 three-way choices tied in pairs: 3^50 (product rule over the leaders)."""
    blocks = []
    for number in range(50):
        leader = choice(f"q{number}", ["a", "b", "c"])
        blocks += [leader, leader.replace(f"quantity q{number} ", f"quantity f{number} ")]
        blocks[-1] = blocks[-1].replace("choice by developer", f"choice follows q{number}")
    names = [f"{letter}{number}" for number in range(50) for letter in "qf"]
    counts = counts_of(rulebook(*blocks, result=added(names)))
    assert counts.on_paper == counts.reachable == counts.per_project_most == 3**50


def test_a_choice_per_stratum_is_made_in_each() -> None:
    """2^12: the choice of two over twelve strata."""
    text = rulebook(
        "index stratum, at most 12\n",
        choice("q", "ab").replace("quantity q [t]", "quantity q [t] per stratum"),
        result="sum(q over stratum)",
    )
    assert counts_of(text).reachable == 2**12


# --- constraints ---------------------------------------------------------------------------


def forbidden(pairs: list[tuple[str, str, str, str]]) -> list[str]:
    return [f"applies when not ({a} takes {x} and {b} takes {y}), clause 1\n" for a, x, b, y in pairs]


def constrained(names: list[str], options: list[str], pairs: list[tuple[str, str, str, str]]) -> str:
    return rulebook(*forbidden(pairs), *(choice(name, options) for name in names), result=added(names))


@pytest.mark.parametrize(("n", "solutions"), [(4, 2), (5, 10), (6, 4), (7, 40), (8, 92)])
def test_queens_on_a_board(n: int, solutions: int) -> None:
    """Queens that do not attack each other on an n × n board: OEIS A000170."""
    rows = [f"q{row}" for row in range(n)]
    pairs = [
        (rows[a], f"c{x}", rows[b], f"c{y}")
        for a in range(n)
        for b in range(a + 1, n)
        for x in range(n)
        for y in range(n)
        if x == y or abs(x - y) == b - a
    ]
    counts = counts_of(constrained(rows, [f"c{column}" for column in range(n)], pairs))
    assert counts.reachable == counts.per_project_most == solutions
    assert counts.on_paper == n**n


@pytest.mark.parametrize(("pigeons", "holes"), [(1, 1), (3, 5), (4, 4), (5, 6), (4, 3)])
def test_pigeons_into_holes_of_their_own(pigeons: int, holes: int) -> None:
    """Injective maps: h!/(h−p)!, none when there are more pigeons than holes (Dirichlet's principle)."""
    names = [f"p{number}" for number in range(pigeons)]
    pairs = [
        (names[a], f"h{hole}", names[b], f"h{hole}")
        for a in range(pigeons)
        for b in range(a + 1, pigeons)
        for hole in range(holes)
    ]
    counts = counts_of(constrained(names, [f"h{hole}" for hole in range(holes)], pairs))
    expected = factorial(holes) // factorial(holes - pigeons) if pigeons <= holes else 0
    assert counts.reachable == expected


def independent_sets(n: int, edges: list[tuple[int, int]]) -> int:
    pairs = [(f"v{a}", "inside", f"v{b}", "inside") for a, b in edges]
    return counts_of(constrained([f"v{number}" for number in range(n)], ["out", "inside"], pairs)).reachable


@pytest.mark.parametrize(("n", "expected"), [(1, 2), (2, 3), (3, 5), (4, 8), (20, 17711)])
def test_independent_sets_of_a_path(n: int, expected: int) -> None:
    """Fibonacci F(n+2): Prodinger and Tichy 1982, Fibonacci Quarterly 20:16 (recalled); n=20: 17711."""
    assert independent_sets(n, [(a, a + 1) for a in range(n - 1)]) == expected


@pytest.mark.parametrize(("n", "expected"), [(3, 4), (4, 7), (5, 11), (20, 15127)])
def test_independent_sets_of_a_cycle(n: int, expected: int) -> None:
    """Lucas L(n): Prodinger and Tichy 1982 (recalled); n=20: 15127."""
    assert independent_sets(n, [(a, (a + 1) % n) for a in range(n)]) == expected


@pytest.mark.parametrize(("n", "k"), [(3, 3), (5, 3), (6, 2), (5, 2), (7, 4)])
def test_colourings_of_a_cycle(n: int, k: int) -> None:
    """Chromatic polynomial of C_n: (k−1)^n + (−1)^n (k−1); (7, 4): 2184."""
    edges = [(a, (a + 1) % n) for a in range(n)]
    pairs = [(f"v{a}", f"c{colour}", f"v{b}", f"c{colour}") for a, b in edges for colour in range(k)]
    found = counts_of(constrained([f"v{a}" for a in range(n)], [f"c{colour}" for colour in range(k)], pairs)).reachable
    assert found == (k - 1) ** n + (-1) ** n * (k - 1)
    assert (n, k) != (7, 4) or found == 2184


def clauses(facts: range) -> str:
    """Clauses {1,2,3}, {3,20} over 20 variables; those in ``facts`` are the project's, the others are chosen."""

    def true(variable: int) -> str:
        return f"x{variable}" if variable in facts else f"x{variable} takes on"

    blocks = [f"fact x{variable}, yes or no, clause 2\n" for variable in facts]
    chosen = [f"x{variable}" for variable in range(1, 21) if variable not in facts]
    blocks += [choice(name, ["on", "off"]) for name in chosen]
    blocks.append(f"applies when ({true(1)} or {true(2)} or {true(3)}) and ({true(3)} or {true(20)}), clause 1\n")
    return rulebook(*blocks, result=added(chosen))


def test_routes_that_differ_only_in_facts_that_do_not_matter_count_once() -> None:
    """README of meelgroup/approxmc: 720896 models over 20 variables, 448 projected on 1..9."""
    assert counts_of(clauses(range(0))).reachable == 720896
    projected = counts_of(clauses(range(10, 21)))
    assert projected.reachable == 448
    assert projected.per_project_most == 448, "a project with the 20th takes any of them"
    assert projected.per_project_least == 256, "a project without it must take the third: 2^8"


@pytest.mark.parametrize(("n", "k"), [(5, 2), (7, 3), (9, 4)])
def test_subsets_of_one_size(n: int, k: int) -> None:
    """k out of n, by a calculated number in the rulebook's applicability: the binomial coefficient."""
    names = [f"v{number}" for number in range(n)]
    blocks = [
        f"quantity {name} [t], clause 2\n    choice by developer\n        option off\n            = 0 [t]\n"
        f"        option on\n            = 1 [t]\n"
        for name in names
    ]
    text = rulebook(f"applies when {added(names)} = {k} [t], clause 1\n", *blocks, result=added(names))
    assert counts_of(text).reachable == comb(n, k)


# --- a tool for whoever calculates ------------------------------------------------------------

STEPS = (
    HEAD
    + """
fact g, yes or no, clause 2
fact h, yes or no, clause 2

quantity step [t], clause 3
    choice by developer
        option skipped
            = 0 [t]
        option done, only when g
            = 1 [t]

quantity method [t], clause 4
    choice by developer
        option simple
            = 1 [t]
        option adjusted
            = 2 [t]
        option average
            = 3 [t]
        option hourly, only when h
            = 4 [t]

quantity vintage [t], clause 5
    choice by developer
        option before
            = 1 [t]
        option after
            = 2 [t]

quantity r [t], clause 6
    = step + method + vintage
"""
)


@pytest.mark.parametrize(
    ("g", "h", "routes"), [("not g", "not h", 6), ("not g", "h", 8), ("g", "not h", 12), ("g", "h", 16)]
)
def test_an_emission_factor_tool_in_four_situations(g: str, h: str, routes: int) -> None:
    """Steps like those of a CDM tool for the emission factor of an electricity system (recalled, re-worded)."""
    counts = counts_of(STEPS + f"\napplies when {g} and {h}, clause 1\n")
    assert counts.reachable == counts.per_project_most == counts.per_project_least == routes


def test_the_situations_together() -> None:
    """The same tool without a situation given: the most and the fewest of the four."""
    counts = counts_of(STEPS)
    assert (counts.per_project_least, counts.per_project_most) == (6, 16)
    assert counts.reachable == counts.on_paper == 16


def test_facts_alone_leave_one_route() -> None:
    """Three bands of one fact are three routes over all projects, one in each."""
    text = rulebook(
        "fact age, 0 to 100, clause 2\n", cases("q", ["age < 10", "10 <= age < 20", "age >= 20"]), result="q"
    )
    counts = counts_of(text)
    assert (counts.reachable, counts.per_project_most, counts.per_project_least) == (3, 1, 1)
