"""The points that stand for all projects and human inputs miss nothing."""

from __future__ import annotations

import random
from fractions import Fraction
from itertools import product

import numpy as np
import pytest

from brute.counts import count, gaps, overlapping
from brute.evaluate import Evaluator
from brute.examples import X, cases, n, result, to
from brute.generate import rulebook
from brute.linear import TooLarge
from brute.points import FACT, FIXED, FREE, Points, columns, representative, variables
from brute.rulebooks import (
    Compare,
    Expression,
    Fact,
    OneOf,
    Op,
    Range,
    Ref,
)

# --- points ------------------------------------------------------------------------------------


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
