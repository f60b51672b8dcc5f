"""Proved bounds of exact sums over boxes of facts and settings, by interval arithmetic on exact fractions."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from fractions import Fraction

from samesum.evidence.routes.symbols import Call, Sum, call, nearest, number


@dataclass(frozen=True, slots=True)
class Bounds:
    """Proved bounds; None is no bound. An *open* bound is not reached."""

    low: Fraction | None
    high: Fraction | None
    low_open: bool = False
    high_open: bool = False


UNBOUNDED = Bounds(None, None)


def bounds(a: Sum, box: Mapping[str, Bounds]) -> Bounds:
    """Bounds of ``a`` over a box of facts and settings, by interval arithmetic on exact fractions
    (transcendental functions by floating point, widened). Exact for a linear sum."""
    result = Bounds(Fraction(0), Fraction(0))
    for monomial, coefficient in a.terms:
        part = Bounds(Fraction(1), Fraction(1))
        for generator, exponent in monomial:
            base = box.get(generator, UNBOUNDED) if isinstance(generator, str) else _call_bounds(generator, box)
            part = _product(part, _whole_power(base, exponent))
        part = _product(part, Bounds(coefficient, coefficient))
        result = Bounds(
            None if result.low is None or part.low is None else result.low + part.low,
            None if result.high is None or part.high is None else result.high + part.high,
            result.low_open or part.low_open,
            result.high_open or part.high_open,
        )
    return result


def has_no_value(a: Sum, point: Mapping[str, Fraction]) -> bool:
    """Whether the sum plainly has no value at a point: it divides by zero there, or takes a root or logarithm of what
    has none."""
    here = {name: Bounds(value, value) for name, value in point.items()}
    return any(
        not isinstance(generator, str)
        and (any(has_no_value(inner, point) for inner in generator.arguments) or _no_value(generator, here))
        for monomial, _ in a.terms
        for generator, _power in monomial
    )


def _no_value(made: Call, here: Mapping[str, Bounds]) -> bool:
    first, *others = (bounds(argument, here) for argument in made.arguments)
    match made.function:
        case "inverse":
            return first.low == first.high == 0
        case "sqrt":
            return first.high is not None and first.high < 0
        case "ln":
            return first.high is not None and first.high <= 0
        case "power":
            exponent = others[0]
            if first.low == first.high == 0:
                return exponent.high is not None and exponent.high < 0
            if exponent.low is None or exponent.low != exponent.high:
                return False
            return first.high is not None and first.high < 0 and exponent.low.denominator != 1
        case _:
            return False


def _product(a: Bounds, b: Bounds) -> Bounds:
    if a.low == a.high == 0 or b.low == b.high == 0:
        return Bounds(Fraction(0), Fraction(0))
    corners: list[tuple[Fraction, bool]] = []
    no_low = no_high = False
    for x, x_open, x_side in ((a.low, a.low_open, -1), (a.high, a.high_open, 1)):
        for y, y_open, y_side in ((b.low, b.low_open, -1), (b.high, b.high_open, 1)):
            if x is None or y is None:
                known, side = (y, x_side) if x is None else (x, y_side)
                if known is None:
                    sign = x_side * y_side
                elif known == 0:
                    corners.append((Fraction(0), (y_open if x is None else x_open)))
                    continue
                else:
                    sign = side * (1 if known > 0 else -1)
                no_high |= sign > 0
                no_low |= sign < 0
            elif x == 0 or y == 0:
                # 0 is reached as soon as one closed end is 0
                corners.append((Fraction(0), (x != 0 or x_open) and (y != 0 or y_open)))
            else:
                corners.append((x * y, x_open or y_open))
    values = [value for value, _ in corners]
    low = None if no_low or not values else min(values)
    high = None if no_high or not values else max(values)
    return Bounds(
        low,
        high,
        low is not None and all(is_open for value, is_open in corners if value == low),
        high is not None and all(is_open for value, is_open in corners if value == high),
    )


def _whole_power(base: Bounds, exponent: int) -> Bounds:
    if exponent % 2 == 0:
        size = _absolute(base)
        result = Bounds(Fraction(1), Fraction(1))
        for _ in range(exponent):
            result = _product(result, size)
        return result
    result = Bounds(Fraction(1), Fraction(1))
    if base.low is not None and base.low < 0 and (base.high is None or base.high > 0):
        # odd powers rise, so the ends are enough
        low, high = base.low, base.high
        return Bounds(low**exponent, None if high is None else high**exponent, base.low_open, base.high_open)
    for _ in range(exponent):
        result = _product(result, base)
    return result


def _absolute(base: Bounds) -> Bounds:
    if base.low is not None and base.low >= 0:
        return base
    if base.high is not None and base.high <= 0:
        return Bounds(-base.high, None if base.low is None else -base.low, base.high_open, base.low_open)
    if base.low is None or base.high is None:
        return Bounds(Fraction(0), None)
    if -base.low == base.high:
        return Bounds(Fraction(0), base.high, False, base.low_open and base.high_open)
    larger_low = -base.low > base.high
    return Bounds(Fraction(0), max(-base.low, base.high), False, base.low_open if larger_low else base.high_open)


def _call_bounds(made: Call, box: Mapping[str, Bounds]) -> Bounds:
    inner = [bounds(argument, box) for argument in made.arguments]
    first = inner[0]
    match made.function:
        case "abs":
            return _closed(_absolute(first))
        case "inverse":
            if (first.low is not None and first.low > 0) or (first.high is not None and first.high < 0):
                return Bounds(
                    Fraction(0) if first.high is None else 1 / first.high,
                    Fraction(0) if first.low is None else 1 / first.low,
                )
            return UNBOUNDED
        case "min" | "max":
            lows = [each.low for each in inner]
            highs = [each.high for each in inner]
            largest = made.function == "max"
            return Bounds(_extreme(lows, largest, largest), _extreme(highs, largest, not largest))
        case "floor" | "ceil" | "round":
            whole: Callable[[Fraction], int] = nearest
            if made.function != "round":
                whole = math.floor if made.function == "floor" else math.ceil
            return Bounds(
                None if first.low is None else Fraction(whole(first.low)),
                None if first.high is None else Fraction(whole(first.high)),
            )
        case "sqrt" | "exp" | "ln":
            return _rising(made.function, first)
        case "power":
            return _any_power(first, inner[1])
        case _:
            return UNBOUNDED


def _any_power(base: Bounds, exponent: Bounds) -> Bounds:
    """Bounds of a power whose base is nowhere below 0: its extremes are at the corners, for its logarithm is the
    product of the exponent and the base's logarithm. Floating point, widened by eight units in the last place."""
    if base.low is None or base.low < 0:
        return UNBOUNDED
    if base.high is None or exponent.low is None or exponent.high is None or (base.low == 0 and exponent.low <= 0):
        return Bounds(Fraction(0), None)
    try:
        bases = [each for value in (base.low, base.high) for each in _around(value)]
        exponents = [each for value in (exponent.low, exponent.high) for each in _around(value)]
        corners = [math.pow(max(x, 0.0), y) for x in bases for y in exponents]
    except (OverflowError, ValueError):  # beyond floating point; or 0 to a negative power, when 0 was rounded to
        return Bounds(Fraction(0), None)
    low, high = min(corners), max(corners)
    for _ in range(8):
        low, high = math.nextafter(low, -math.inf), math.nextafter(high, math.inf)
    return Bounds(max(Fraction(0), Fraction(low)), Fraction(high) if math.isfinite(high) else None)


def _extreme(values: list[Fraction | None], largest: bool, ignore_missing: bool) -> Fraction | None:
    known = [value for value in values if value is not None]
    if not known or (len(known) < len(values) and not ignore_missing):
        return None
    return max(known) if largest else min(known)


def _closed(a: Bounds) -> Bounds:
    return Bounds(a.low, a.high)


def _around(value: Fraction) -> tuple[float, float]:
    """The floating-point numbers next to a value: not above it, and not below it. Raises ``OverflowError``."""
    found = float(value)
    exact = Fraction(found)
    return (
        found if exact <= value else math.nextafter(found, -math.inf),
        found if exact >= value else math.nextafter(found, math.inf),
    )


def _rising(function: str, inner: Bounds) -> Bounds:
    """Bounds of a rising function: the argument rounded outwards, the result widened by four units in the last
    place."""

    def at(value: Fraction, downwards: bool) -> Fraction | None:
        exact = call(function, (number(value),))
        if exact is not None and exact.constant is not None:
            return exact.constant
        try:
            rounded = _around(value)[0 if downwards else 1]
            if function == "exp":
                found = math.exp(rounded)
            elif value < 0:
                return Fraction(0) if function == "sqrt" and downwards else None
            elif function == "sqrt":
                found = math.sqrt(max(rounded, 0.0))
            elif rounded <= 0:
                return None
            else:
                found = math.log(rounded)
        except OverflowError:
            return None
        for _ in range(4):
            found = math.nextafter(found, -math.inf if downwards else math.inf)
        return Fraction(found) if math.isfinite(found) else None

    low = at(inner.low, True) if inner.low is not None else (Fraction(0) if function != "ln" else None)
    high = at(inner.high, False) if inner.high is not None else None
    if function in ("exp", "sqrt") and low is not None:
        low = max(low, Fraction(0))
    return Bounds(low, high)
