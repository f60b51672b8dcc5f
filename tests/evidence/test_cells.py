"""Cells of facts, and the combinations of cells that can occur in a group."""

from __future__ import annotations

import time
from fractions import Fraction
from itertools import product

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from samesum.evidence.routes import solver as s
from samesum.evidence.routes import symbols
from samesum.evidence.routes.cells import Group, cells_at, cut, list_group, representative, sign_over
from samesum.evidence.routes.ranges import Bounds
from samesum.evidence.routes.symbols import Sum

BORDERS = ("above", "below", "apart")
whole = st.integers(-6, 6).map(Fraction)


def domain(one: Fraction | None, other: Fraction | None) -> Bounds:
    if one is not None and other is not None and one > other:
        one, other = other, one
    return Bounds(one, other)


domains = st.builds(domain, st.none() | whole, st.none() | whole)
cuts = st.dictionaries(whole, st.sampled_from(BORDERS), max_size=4)
GRID = [Fraction(k, 2) for k in range(-16, 17)]


def inside(value: Fraction, cell: Bounds) -> bool:
    low = cell.low is None or value > cell.low or (value == cell.low and not cell.low_open)
    high = cell.high is None or value < cell.high or (value == cell.high and not cell.high_open)
    return low and high


@settings(max_examples=300)
@given(domains, cuts)
def test_every_value_of_the_domain_is_in_exactly_one_cell(domain: Bounds, thresholds: dict[Fraction, str]) -> None:
    cells = cut(domain, thresholds)
    for value in GRID:
        assert sum(inside(value, cell) for cell in cells) == inside(value, domain), value


@settings(max_examples=300)
@given(domains, cuts)
def test_a_comparison_has_one_answer_all_over_a_cell(domain: Bounds, thresholds: dict[Fraction, str]) -> None:
    """And no two neighbours have the same answers to all of them."""
    cells = cut(domain, thresholds)
    told = []
    for cell in cells:
        signs = []
        for threshold, border in sorted(thresholds.items()):
            sign = sign_over(cell, threshold, border)
            signs.append(sign)
            for value in GRID:
                if inside(value, cell):
                    true = (value > threshold) - (value < threshold)
                    if true == 0 and border != "apart":
                        true = 1 if border == "above" else -1
                    assert sign == true + 1, (cell, threshold, border, value)
        told.append(tuple(signs))
    assert len(set(told)) == len(told)


@given(domains, cuts)
def test_a_cells_representative_lies_in_it(domain: Bounds, thresholds: dict[Fraction, str]) -> None:
    assert all(inside(representative(cell), cell) for cell in cut(domain, thresholds))


def test_a_narrow_cell_has_a_representative_all_the_same() -> None:
    cell = Bounds(Fraction(1, 3), Fraction(1, 3) + Fraction(1, 10**30), True, True)
    assert inside(representative(cell), cell)


def test_a_representative_is_a_plain_number_where_there_is_one() -> None:
    assert representative(Bounds(Fraction(18), Fraction(40), True, False)) == 30
    assert representative(Bounds(Fraction(0), Fraction(18), False, True)) == 10
    assert representative(Bounds(Fraction(18), Fraction(18))) == 18


# --- groups ----------------------------------------------------------------------------------

BOX = Bounds(Fraction(0), Fraction(4))


def group(sums: list[tuple[Sum, dict[Fraction, str]]], name_cuts: dict[str, dict[Fraction, str]]) -> Group:
    names = ("x", "y")
    return Group(
        names,
        (BOX, BOX),
        tuple(cut(BOX, name_cuts.get(name, {})) for name in names),
        tuple(a for a, _ in sums),
        tuple(cut(Bounds(None, None), thresholds) for _, thresholds in sums),
    )


def listed(made: Group) -> set[tuple[int, ...]]:
    found = list_group(made, time.monotonic() + 60)
    assert found.complete and not found.open
    return set(found.shown)


X, Y = symbols.name("x"), symbols.name("y")
FINE = [Fraction(k, 8) for k in range(33)]


def by_grid(made: Group) -> set[tuple[int, ...]]:
    """The combinations at the points of a fine grid, worked out without the solver."""
    found = set()
    for x, y in product(FINE, FINE):
        at = {"x": x, "y": y}
        cells = tuple(
            next(number for number, cell in enumerate(cells) if inside(at[name], cell))
            for name, cells in zip(made.names, made.name_cells, strict=True)
        )
        told = cells_at(made, at)
        assert told is not None
        found.add((*cells, *told))
    return found


@settings(max_examples=40, deadline=None)
@given(
    st.lists(
        st.tuples(st.integers(-2, 2), st.integers(-2, 2).filter(bool), st.integers(-4, 8)), min_size=1, max_size=3
    ),
    st.dictionaries(st.integers(0, 4).map(Fraction), st.sampled_from(BORDERS), max_size=2),
    st.sampled_from(BORDERS),
)
def test_linear_sums_meet_what_a_fine_grid_meets(
    lines: list[tuple[int, int, int]], x_cuts: dict[Fraction, str], border: str
) -> None:
    """Borders of the lines and cells cross at points with denominators up to 8, so that the grid misses nothing but
    open slivers; whatever it meets is listed, and whatever is listed the solver finds a point for."""
    sums = {}
    for p, q, c in lines:
        a = symbols.add(symbols.scale(X, Fraction(p)), symbols.scale(Y, Fraction(q)))
        sums.setdefault(a, {})[Fraction(c)] = border
    made = group(list(sums.items()), {"x": x_cuts})
    found = listed(made)
    assert by_grid(made) <= found
    check = s.Solver({"x": BOX, "y": BOX}, time.monotonic() + 60)
    for vector in found:
        constraints = [
            part
            for term, cell in zip(
                [check.name("x"), check.name("y"), *map(check.term, made.sums)],
                [cells[number] for cells, number in zip(made.cells, vector, strict=True)],
                strict=True,
            )
            for part in check.within(term, cell)
        ]
        check.push(constraints)
        assert check.check() == "yes", vector
        check.pop()


def test_polynomials_meet_what_a_fine_grid_meets() -> None:
    circle = symbols.add(symbols.multiply(X, X), symbols.multiply(Y, Y))
    made = group(
        [(circle, {Fraction(4): "apart", Fraction(9): "above"}), (symbols.multiply(X, Y), {Fraction(1): "below"})], {}
    )
    found = listed(made)
    assert by_grid(made) <= found
    # x² + y² = 4 with xy > 1 and with xy <= 1; below 4 both; 4..9 both; from 9 on both
    assert len(found) == 8


def test_sums_that_cannot_meet_are_not_listed() -> None:
    """x + y > 6 with x < 2 needs y > 4."""
    made = group([(symbols.add(X, Y), {Fraction(6): "below"})], {"x": {Fraction(2): "above"}})
    assert listed(made) == {(0, 0, 0), (1, 0, 0), (1, 0, 1)}


def test_what_touches_at_one_point_is_listed() -> None:
    """x + y = 8 on [0, 4] × [0, 4]: at (4, 4) alone."""
    made = group([(symbols.add(X, Y), {Fraction(8): "apart"})], {"x": {Fraction(4): "apart"}})
    assert listed(made) == {(0, 0, 0), (1, 0, 0), (1, 0, 1)}


def test_a_root_between_two_fractions_is_found() -> None:
    """x² = 2 has no fraction, and a solution."""
    made = group([(symbols.multiply(X, X), {Fraction(2): "apart"})], {})
    assert listed(made) == {(0, 0, 0), (0, 0, 1), (0, 0, 2)}


@pytest.mark.parametrize("seconds", [-1.0, 0.0])
def test_without_time_nothing_is_claimed_to_be_complete(seconds: float) -> None:
    cubes = symbols.add(symbols.multiply(symbols.multiply(X, X), X), symbols.multiply(symbols.multiply(Y, Y), Y))
    made = group([(cubes, {Fraction(k): "apart" for k in range(9)})], {"x": {Fraction(1): "apart"}})
    found = list_group(made, time.monotonic() + seconds)
    assert not found.complete or found.open


def test_what_the_solver_does_not_know_is_open_unless_a_point_shows_it() -> None:
    """exp(x) against 10 on [0, 4]: less and more are seen at points, equal is neither shown nor refuted."""
    exp = symbols.call("exp", (X,))
    assert exp is not None
    found = list_group(group([(exp, {Fraction(10): "apart"})], {}), time.monotonic() + 60)
    assert found.complete
    assert {vector[2] for vector in found.shown} == {0, 2}
    assert {vector[2] for vector in found.open} == {1}


def test_a_group_under_other_names_is_the_same_group() -> None:
    one = Group(
        ("b", "a"), (BOX, BOX), ((BOX,), (BOX,)), (symbols.add(symbols.name("a"), symbols.name("b")),), ((BOX,),)
    )
    other = Group(
        ("q", "p"), (BOX, BOX), ((BOX,), (BOX,)), (symbols.add(symbols.name("p"), symbols.name("q")),), ((BOX,),)
    )
    assert one.renamed() == other.renamed()
