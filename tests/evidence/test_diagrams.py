"""Diagrams and elimination, against oxidd (an independent counter in Rust) and against plain listing."""

from __future__ import annotations

import time
from collections.abc import Callable, Sequence
from itertools import product
from math import prod
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from oxidd.bdd import BDDManager

from samesum.evidence.routes.diagrams import OUTSIDE, Diagrams, Limits, OutOfLimits
from samesum.evidence.routes.eliminating import (
    Eliminated,
    eliminate,
    evaluate,
    number,
    possible_values,
    read_back,
    taken_apart,
)

WIDTH = 7
"""So many two-way variables stand in the random conditions."""

Term = Any
"""("var", number), ("not", term), ("and" | "or", term, term)."""

terms: st.SearchStrategy[Term] = st.recursive(
    st.tuples(st.just("var"), st.integers(0, WIDTH - 1)),
    lambda inner: st.one_of(st.tuples(st.just("not"), inner), st.tuples(st.sampled_from(["and", "or"]), inner, inner)),
    max_leaves=14,
)


def diagrams(sizes: Sequence[int], nodes: int = 1_000_000) -> Diagrams:
    """A workshop whose variable k (level 10 k) has ``sizes[k]`` values."""
    return Diagrams(Limits(time.monotonic() + 600, nodes), {10 * k: size for k, size in enumerate(sizes)})


def ours(d: Diagrams, term: Term) -> int:
    match term:
        case ("var", k):
            return d.literal(10 * k, (1,))
        case ("not", inner):
            return d.negate(ours(d, inner))
        case ("and", a, b):
            return d.both(ours(d, a), ours(d, b))
        case (_, a, b):
            return d.either(ours(d, a), ours(d, b))


def theirs(manager: Any, term: Term) -> Any:
    match term:
        case ("var", k):
            return manager.var(k)
        case ("not", inner):
            return ~theirs(manager, inner)
        case ("and", a, b):
            return theirs(manager, a) & theirs(manager, b)
        case (_, a, b):
            return theirs(manager, a) | theirs(manager, b)


def manager() -> Any:
    made = BDDManager(1 << 14, 1 << 14, 1)
    made.add_vars(WIDTH)
    return made


@settings(max_examples=200, deadline=None)
@given(st.lists(terms, min_size=1, max_size=4), st.sets(st.integers(0, WIDTH - 1)))
def test_models_and_projections_are_counted_as_oxidd_counts_them(conditions: list[Term], away: set[int]) -> None:
    d, m = diagrams([2] * WIDTH), manager()
    factors = [d.numbers(ours(d, each)) for each in conditions]
    joint = m.true()
    for each in conditions:
        joint = joint & theirs(m, each)
    levels = [10 * k for k in range(WIDTH)]
    assert number(d, eliminate(d, factors, levels, "sum")) == joint.sat_count(WIDTH)
    projected = joint
    for k in sorted(away):
        projected = projected.exists(m.var(k))
    left = eliminate(d, factors, [10 * k for k in sorted(away)], "exists")
    kept = [level for level in levels if level // 10 not in away]
    assert number(d, eliminate(d, left, kept, "sum")) == projected.sat_count(WIDTH) >> len(away)


@settings(max_examples=100, deadline=None)
@given(terms, terms, terms)
def test_equal_conditions_are_one_node(a: Term, b: Term, c: Term) -> None:
    d = diagrams([2] * WIDTH)
    x, y, z = ours(d, a), ours(d, b), ours(d, c)
    assert d.both(x, d.either(y, z)) == d.either(d.both(x, y), d.both(x, z))
    assert d.negate(d.both(x, y)) == d.either(d.negate(x), d.negate(y))
    assert d.negate(d.negate(x)) == x
    assert d.choose(x, y, z) == d.either(d.both(x, y), d.both(d.negate(x), z))


# --- many values, numbers at the ends ---------------------------------------------------------

SIZES = (2, 3, 4, 2, 3)
tables = st.lists(
    st.tuples(
        st.sets(st.integers(0, len(SIZES) - 1), min_size=1, max_size=3).map(sorted),
        st.integers(0, 2**30),
    ),
    min_size=1,
    max_size=4,
)


def table(d: Diagrams, variables: list[int], seed: int, most: int) -> tuple[int, Callable[[tuple[int, ...]], int]]:
    """A random function of a few variables as a diagram, and as plain code."""
    import random

    chance = random.Random(seed)
    values = {at: chance.randrange(most + 1) for at in product(*(range(SIZES[k]) for k in variables))}

    def build(held: tuple[int, ...]) -> int:
        if len(held) == len(variables):
            return d.end(values[held])
        k = variables[len(held)]
        return d.node(10 * k, tuple(build((*held, value)) for value in range(SIZES[k])))

    return build(()), lambda point: values[tuple(point[k] for k in variables)]


POINTS = list(product(*(range(size) for size in SIZES)))


@settings(max_examples=150, deadline=None)
@given(tables, st.sets(st.integers(0, len(SIZES) - 1)), st.sampled_from(["most", "least", "sum"]))
def test_elimination_is_what_listing_gives(made: list[tuple[list[int], int]], first: set[int], how: str) -> None:
    """Sum over some variables, then the most (the least, the sum) over the others: so is ``per_project_*`` found."""
    d = diagrams(SIZES)
    pairs = [table(d, variables, seed, 5) for variables, seed in made]
    left = eliminate(d, [factor for factor, _ in pairs], [10 * k for k in first], "sum")
    outer = [k for k in range(len(SIZES)) if k not in first]
    found = number(d, eliminate(d, left, [10 * k for k in outer], how))
    totals: dict[tuple[int, ...], int] = {}
    for point in POINTS:
        key = tuple(point[k] for k in outer)
        totals[key] = totals.get(key, 0) + prod(function(point) for _, function in pairs)
    assert found == {"most": max, "least": min, "sum": sum}[how](totals.values())


@settings(max_examples=150, deadline=None)
@given(tables, st.sampled_from(["most", "least", "exists"]))
def test_what_is_read_back_has_the_value_found(made: list[tuple[list[int], int]], how: str) -> None:
    d = diagrams(SIZES)
    pairs = [table(d, variables, seed, 1 if how == "exists" else 5) for variables, seed in made]
    factors = [factor for factor, _ in pairs]
    trail: list[Eliminated] = []
    found = number(d, eliminate(d, factors, [10 * k for k in range(len(SIZES))], how, trail))
    values = read_back(d, trail)
    shown = prod(evaluate(d, factor, values) for factor in factors)
    assert shown == found or (how == "exists" and not found)


@settings(max_examples=100, deadline=None)
@given(tables)
def test_possible_values_are_those_that_listing_finds(made: list[tuple[list[int], int]]) -> None:
    d = diagrams(SIZES)
    pairs = [table(d, variables, seed, 1) for variables, seed in made]
    found = possible_values(d, [factor for factor, _ in pairs], [10 * k for k in range(len(SIZES))])
    alive = [point for point in POINTS if all(function(point) for _, function in pairs)]
    assert found == {10 * k: frozenset(point[k] for point in alive) for k in range(len(SIZES))}


@settings(max_examples=100, deadline=None)
@given(st.lists(terms, min_size=1, max_size=3))
def test_what_is_taken_apart_is_the_same_together(conditions: list[Term]) -> None:
    d = diagrams([2] * WIDTH)
    whole = d.every(ours(d, each) for each in conditions)
    parts = taken_apart(d, whole)
    assert d.every(parts) == whole
    assert not any(d.is_end(part, True) for part in parts)


def test_conditions_on_different_facts_are_taken_apart() -> None:
    d = diagrams([2, 2, 2])
    x, y, z = (d.literal(10 * k, (1,)) for k in range(3))
    assert sorted(map(len, map(d.support, taken_apart(d, d.both(x, d.either(y, z)))))) == [1, 2]


@settings(max_examples=100, deadline=None)
@given(tables, st.integers(0, len(SIZES) - 1))
def test_holding_a_variable_takes_it_out(made: list[tuple[list[int], int]], k: int) -> None:
    d = diagrams(SIZES)
    for variables, seed in made:
        factor, function = table(d, variables, seed, 5)
        for value in range(SIZES[k]):
            held = d.restrict(factor, 10 * k, value)
            assert 10 * k not in d.support(held)
            for point in POINTS:
                at = tuple(value if place == k else each for place, each in enumerate(point))
                assert evaluate(d, held, {10 * p: each for p, each in enumerate(point)}) == function(at)


@settings(max_examples=60, deadline=None)
@given(tables, st.permutations(range(4)))
def test_an_exchanged_variable_is_asked_through_the_new_one(made: list[tuple[list[int], int]], new: list[int]) -> None:
    """Variable 2 becomes one at the very top whose value v means the old value ``new[v]``."""
    d = diagrams(SIZES)
    d.size[-5] = 4
    for variables, seed in made:
        factor, function = table(d, variables, seed, 5)
        moved = d.exchange(f"test {new}", {20: (-5, new)}.get, factor)
        assert 20 not in d.support(moved)
        for point in POINTS:
            values = {10 * p: each for p, each in enumerate(point) if p != 2} | {-5: new.index(point[2])}
            assert evaluate(d, moved, values) == function(point)


def test_a_variable_that_nothing_mentions_still_multiplies_a_sum() -> None:
    d = diagrams([2, 3, 4])
    assert number(d, eliminate(d, [d.numbers(d.literal(0, (1,)))], [0, 10, 20], "sum")) == 12
    assert number(d, eliminate(d, [d.numbers(d.literal(0, (1,)))], [0, 10, 20], "exists")) == 1


def test_counts_stay_exact_beyond_floating_point() -> None:
    d = diagrams([3] * 200)
    factors = [d.numbers(d.literal(10 * k, (0, 1))) for k in range(199)]
    assert number(d, eliminate(d, factors, [10 * k for k in range(200)], "sum")) == 2**199 * 3


def test_a_long_chain_stays_small() -> None:
    """Neighbours differ: 2 ways for a chain of two-way variables, whatever its length."""
    d = diagrams([2] * 1_000)
    factors = []
    for k in range(999):
        here, following = d.literal(10 * k, (1,)), d.literal(10 * k + 10, (1,))
        factors.append(d.numbers(d.either(d.both(here, d.negate(following)), d.both(d.negate(here), following))))
    assert number(d, eliminate(d, factors, [10 * k for k in range(1_000)], "sum")) == 2
    assert len(d.level) < 30_000


def test_projects_outside_the_rulebook_are_nobodys_least() -> None:
    d = diagrams([3])
    routes = d.node(0, (d.end(0), d.end(4), d.end(2)))
    inside = d.node(0, (d.end(OUTSIDE), d.end(1), d.end(1)))
    assert number(d, eliminate(d, [routes, inside], [0], "least")) == 2
    nobody = d.node(0, (d.end(OUTSIDE),) * 3)
    assert number(d, eliminate(d, [routes, nobody], [0], "least")) == OUTSIDE


def test_true_and_one_are_different_ends() -> None:
    d = diagrams([2])
    assert d.end(True) != d.end(1)
    assert d.is_end(d.end(1), 1) and not d.is_end(d.end(1), True)


def _parity(d: Diagrams, k: int) -> int:
    result = d.end(False)
    for place in range(k):
        bit = d.literal(10 * place, (1,))
        result = d.either(d.both(result, d.negate(bit)), d.both(d.negate(result), bit))
    return result


def test_too_many_nodes_are_refused() -> None:
    with pytest.raises(OutOfLimits, match="size"):
        _parity(diagrams([2] * 60, nodes=100), 60)


def test_time_that_is_up_stops_the_work_even_when_no_node_is_new() -> None:
    d = diagrams([2] * 12)
    x, y = _parity(d, 12), d.literal(110, (1,))
    d.limits.deadline = time.monotonic() - 1
    with pytest.raises(OutOfLimits, match="time"):
        for turn in range(20_000):
            d.apply(f"turn {turn}", lambda a, b: a and b, x, y)
