"""Exact sums, and bounds that contain every value."""

from __future__ import annotations

import math
from collections.abc import Mapping
from fractions import Fraction

import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from samesum.evidence.routes import symbols
from samesum.evidence.routes.ranges import Bounds, bounds
from samesum.evidence.routes.solver import sign_at
from samesum.evidence.routes.symbols import Call, Sum

NAMES = ("x", "y", "z")
small = st.fractions(min_value=-4, max_value=4, max_denominator=4)
sums: st.SearchStrategy[Sum] = st.recursive(
    st.one_of(small.map(symbols.number), st.sampled_from(NAMES).map(symbols.name)),
    lambda inner: st.one_of(
        st.tuples(inner, inner).map(lambda pair: symbols.add(*pair)),
        st.tuples(inner, inner).map(lambda pair: symbols.subtract(*pair)),
        st.tuples(inner, inner).map(lambda pair: symbols.multiply(*pair)),
    ),
    max_leaves=6,
)
points = st.fixed_dictionaries({name: small for name in NAMES})
boxes = st.fixed_dictionaries({name: st.tuples(small, small, st.booleans(), st.booleans()) for name in NAMES}).map(
    lambda made: {name: _cell(*ends) for name, ends in made.items()}
)


def _cell(a: Fraction, b: Fraction, low_open: bool, high_open: bool) -> Bounds:
    return Bounds(a, b, low_open, high_open) if a < b else Bounds(b, a, a != b and low_open, a != b and high_open)


def value(a: Sum, point: Mapping[str, Fraction]) -> Fraction:
    """A polynomial worked out at a point, term by term."""
    total = Fraction(0)
    for monomial, factor in a.terms:
        for generator, power in monomial:
            assert isinstance(generator, str)
            factor *= point[generator] ** power
        total += factor
    return total


def inside(number: Fraction, found: Bounds) -> bool:
    low = found.low is None or number > found.low or (number == found.low and not found.low_open)
    high = found.high is None or number < found.high or (number == found.high and not found.high_open)
    return low and high


# --- sums ------------------------------------------------------------------------------------


@given(sums, sums, points)
def test_working_with_sums_is_working_with_their_values(a: Sum, b: Sum, point: dict[str, Fraction]) -> None:
    assert value(symbols.add(a, b), point) == value(a, point) + value(b, point)
    assert value(symbols.subtract(a, b), point) == value(a, point) - value(b, point)
    assert value(symbols.multiply(a, b), point) == value(a, point) * value(b, point)
    assert value(symbols.scale(a, Fraction(3, 7)), point) == value(a, point) * Fraction(3, 7)
    cube = symbols.power(a, symbols.number(3))
    assert cube is not None and value(cube, point) == value(a, point) ** 3


@given(sums, sums, sums)
def test_equal_polynomials_are_equal_however_they_are_written(a: Sum, b: Sum, c: Sum) -> None:
    assert symbols.add(a, b) == symbols.add(b, a)
    assert symbols.multiply(a, symbols.add(b, c)) == symbols.add(symbols.multiply(a, b), symbols.multiply(a, c))
    assert symbols.subtract(a, a) == symbols.ZERO
    assert symbols.total([a, b, c]) == symbols.add(symbols.add(a, b), c)


@given(sums)
def test_renaming_there_and_back_changes_nothing(a: Sum) -> None:
    there = {"x": "z", "y": "a", "z": "b"}
    renamed = symbols.rename(a, there)
    assert symbols.rename(renamed, {after: before for before, after in there.items()}) == a
    assert symbols.generators(renamed) == {there[name] for name in symbols.generators(a)}


@given(sums)
def test_a_sum_is_its_constant_and_the_rest(a: Sum) -> None:
    assert symbols.add(symbols.without_constant(a), symbols.number(symbols.constant_term(a))) == a


def test_what_cannot_be_worked_out_is_no_number() -> None:
    assert symbols.divide(symbols.name("x"), symbols.ZERO) is None
    assert symbols.call("sqrt", (symbols.number(-1),)) is None
    assert symbols.call("ln", (symbols.number(0),)) is None
    assert symbols.power(symbols.ZERO, symbols.number(-1)) is None


@pytest.mark.parametrize(
    ("function", "argument", "expected"),
    [
        ("round", Fraction(5, 2), 3),
        ("round", Fraction(-5, 2), -3),
        ("floor", Fraction(-5, 2), -3),
        ("ceil", Fraction(-5, 2), -2),
        ("abs", Fraction(-5, 2), Fraction(5, 2)),
        ("sqrt", Fraction(9, 4), Fraction(3, 2)),
        ("exp", Fraction(0), 1),
        ("ln", Fraction(1), 0),
    ],
)
def test_functions_of_constants_are_exact(function: str, argument: Fraction, expected: Fraction) -> None:
    assert symbols.call(function, (symbols.number(argument),)) == symbols.number(expected)


def test_an_irrational_number_stays_a_call() -> None:
    found = symbols.call("sqrt", (symbols.number(2),))
    assert found is not None and found.constant is None


# --- bounds ----------------------------------------------------------------------------------


@settings(max_examples=400)
@given(sums, boxes, st.lists(st.fractions(min_value=0, max_value=1, max_denominator=8), min_size=3, max_size=3))
def test_bounds_contain_every_value(a: Sum, box: dict[str, Bounds], shares: list[Fraction]) -> None:
    found = bounds(a, box)
    point = {}
    for (name, cell), share in zip(box.items(), shares, strict=True):
        assert cell.low is not None and cell.high is not None
        at = cell.low + (cell.high - cell.low) * share
        assume(inside(at, cell))
        point[name] = at
    assert inside(value(a, point), found), (point, found)


@given(boxes, small, small, small, small)
def test_bounds_of_a_linear_sum_are_sharp(
    box: dict[str, Bounds], p: Fraction, q: Fraction, r: Fraction, c: Fraction
) -> None:
    factors = dict(zip(NAMES, (p, q, r), strict=True))
    a = symbols.total([symbols.number(c), *(symbols.scale(symbols.name(name), f) for name, f in factors.items())])
    found = bounds(a, box)
    ends = {name: (cell.low, cell.high) if factors[name] >= 0 else (cell.high, cell.low) for name, cell in box.items()}
    assert found.low == c + sum(factors[name] * (low or 0) for name, (low, _) in ends.items())
    assert found.high == c + sum(factors[name] * (high or 0) for name, (_, high) in ends.items())
    asked = [(box[name], factor) for name, factor in factors.items() if factor]
    assert found.low_open == any(cell.low_open if factor > 0 else cell.high_open for cell, factor in asked)
    assert found.high_open == any(cell.high_open if factor > 0 else cell.low_open for cell, factor in asked)


@settings(max_examples=300)
@given(
    st.sampled_from(["abs", "sqrt", "exp", "ln", "round", "floor", "ceil", "inverse"]),
    st.fractions(min_value=-30, max_value=30, max_denominator=97),
    st.fractions(min_value=0, max_value=5, max_denominator=97),
    st.fractions(min_value=0, max_value=1, max_denominator=8),
)
def test_bounds_of_a_function_contain_its_values(function: str, low: Fraction, wide: Fraction, share: Fraction) -> None:
    at = low + wide * share
    assume(at > 0 or function not in ("sqrt", "ln", "inverse"))
    found = bounds(symbols.name(Call(function, (symbols.name("x"),))), {"x": Bounds(low, low + wide)})
    exact: dict[str, Fraction] = {"abs": abs(at), "floor": Fraction(math.floor(at)), "ceil": Fraction(math.ceil(at))}
    if at:
        exact["inverse"] = 1 / at
    exact["round"] = Fraction(symbols.nearest(at))
    if function in exact:
        assert inside(exact[function], found)
        return
    # squares and rational powers are compared exactly; exp and ln with a hair's breadth to spare
    if function == "sqrt":
        assert found.low is None or found.low**2 <= at
        assert found.high is None or found.high**2 >= at
        return
    true = Fraction({"exp": math.exp, "ln": math.log}[function](float(at)))
    hair = abs(true) / 10**12 + Fraction(1, 10**12)
    assert (found.low is None or found.low <= true + hair) and (found.high is None or found.high >= true - hair)


@pytest.mark.parametrize("at", [Fraction(1, 3), Fraction(-2001, 10), Fraction(1413, 2), Fraction(7001, 11)])
def test_bounds_of_exp_hold_to_the_last_digit(at: Fraction) -> None:
    """Against a series in whole numbers: exp is far steeper than a double's last digit where its argument is large."""
    found = bounds(symbols.name(Call("exp", (symbols.name("x"),))), {"x": Bounds(at, at)})
    true = _exp(at)
    assert found.low is not None and found.high is not None
    assert found.low < true < found.high
    assert (found.high - found.low) / true < Fraction(1, 10**11)


def _exp(at: Fraction) -> Fraction:
    """exp by its series at at/1024, squared ten times, to 60 digits."""
    scale = 10**400
    x = abs(at) / 1024
    term, total = scale, scale
    for k in range(1, 120):
        term = term * x.numerator // (x.denominator * k)
        total += term
    result = Fraction(total, scale)
    for _ in range(10):
        result = Fraction(int(result * result * scale), scale)
    return result if at >= 0 else 1 / result


@pytest.mark.parametrize(
    ("base", "exponent", "true"),
    [((4, 9), (Fraction(1, 2),) * 2, (2, 3)), ((2, 3), (-2, 2), (Fraction(1, 9), 9)), ((0, 4), (2, 3), (0, 64))],
)
def test_bounds_of_a_power_contain_its_values(
    base: tuple[int, int], exponent: tuple[Fraction, Fraction], true: tuple[Fraction, Fraction]
) -> None:
    a = symbols.name(Call("power", (symbols.name("x"), symbols.name("y"))))
    found = bounds(a, {"x": Bounds(*map(Fraction, base)), "y": Bounds(*map(Fraction, exponent))})
    assert found.low is not None and found.high is not None
    assert found.low <= true[0] and found.high >= true[1]
    assert found.high - found.low <= (true[1] - true[0]) * (1 + Fraction(1, 10**9))


def test_bounds_of_a_root_hold_to_the_last_digit() -> None:
    three, half = Bounds(Fraction(3), Fraction(3)), Bounds(Fraction(1, 2), Fraction(1, 2))
    found = bounds(symbols.name(Call("power", (symbols.name("x"), symbols.name("y")))), {"x": three, "y": half})
    assert found.low is not None and found.high is not None
    assert found.low**2 < 3 < found.high**2


def test_a_power_of_what_may_be_below_zero_has_no_bounds() -> None:
    a = symbols.name(Call("power", (symbols.name("x"), symbols.name("y"))))
    assert bounds(a, {"x": Bounds(Fraction(-1), Fraction(2)), "y": Bounds(Fraction(1), Fraction(2))}) == Bounds(
        None, None
    )


@given(small, small, small)
def test_minimum_and_maximum_contain_their_values(x: Fraction, y: Fraction, c: Fraction) -> None:
    box = {"x": Bounds(x, x), "y": Bounds(y, y)}
    for function, true in (("min", min(x, y, c)), ("max", max(x, y, c))):
        a = symbols.call(function, (symbols.name("x"), symbols.name("y"), symbols.number(c)))
        assert a is not None and inside(true, bounds(a, box))


def test_squares_are_not_below_zero() -> None:
    """x² and x·x on [−1, 1]: [0, 1] (Moore; plain intervals give [−1, 1] for the product)."""
    x = symbols.name("x")
    box = {"x": Bounds(Fraction(-1), Fraction(1))}
    assert bounds(symbols.multiply(x, x), box) == Bounds(Fraction(0), Fraction(1))


def test_an_open_end_is_not_reached() -> None:
    x = symbols.name("x")
    found = bounds(symbols.scale(x, Fraction(-2)), {"x": Bounds(Fraction(1), Fraction(3), True, False)})
    assert found == Bounds(Fraction(-6), Fraction(-2), False, True)


# --- signs at a point ----------------------------------------------------------------------


@given(sums, points)
def test_the_sign_at_a_point_is_exact(a: Sum, point: dict[str, Fraction]) -> None:
    true = value(a, point)
    assert sign_at(a, point) == (0 if true < 0 else 1 if true == 0 else 2)


def test_a_sign_that_floating_point_cannot_tell_is_not_told() -> None:
    exp = symbols.call("exp", (symbols.name("x"),))
    assert exp is not None
    e = Fraction(math.e)
    assert sign_at(symbols.subtract(exp, symbols.number(e)), {"x": Fraction(1)}) is None
    assert sign_at(symbols.subtract(exp, symbols.number(2)), {"x": Fraction(1)}) == 2
