"""Exact symbolic numbers: what a formula amounts to in facts and settings.

A ``Sum`` is a polynomial with exact coefficients over *generators*: the names of numeric facts and
settings (``area@2``) and calls that are no polynomial (``exp``, ``min``, a division). Two formulas that
are the same polynomial are equal here, whatever they look like in the rulebook.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache

Monomial = tuple[tuple["Generator", int], ...]


@dataclass(frozen=True, slots=True)
class Call:
    """A function of sums: ``inverse abs min max sqrt exp ln round floor ceil power``."""

    function: str
    arguments: tuple[Sum, ...]


@dataclass(frozen=True, slots=True)
class Sum:
    """A sorted tuple of (monomial, coefficient) without zero coefficients."""

    terms: tuple[tuple[Monomial, Fraction], ...]

    @property
    def constant(self) -> Fraction | None:
        """The number that this is, when it mentions no fact, setting or call."""
        if not self.terms:
            return Fraction(0)
        if len(self.terms) == 1 and not self.terms[0][0]:
            return self.terms[0][1]
        return None


Generator = str | Call
ZERO = Sum(())


@lru_cache(maxsize=100_000)
def _key(generator: Generator) -> str:
    return generator if isinstance(generator, str) else "~" + repr(generator)


def _made(terms: Mapping[Monomial, Fraction]) -> Sum:
    kept = [(monomial, value) for monomial, value in terms.items() if value]
    kept.sort(key=lambda item: [(_key(generator), power) for generator, power in item[0]])
    return Sum(tuple(kept))


def number(value: Fraction | int) -> Sum:
    """A constant."""
    return Sum((((), Fraction(value)),)) if value else ZERO


def name(generator: Generator) -> Sum:
    """A fact, a setting or a call by itself."""
    return Sum(((((generator, 1),), Fraction(1)),))


def add(a: Sum, b: Sum) -> Sum:
    terms = dict(a.terms)
    for monomial, value in b.terms:
        terms[monomial] = terms.get(monomial, Fraction(0)) + value
    return _made(terms)


def scale(a: Sum, factor: Fraction) -> Sum:
    return Sum(tuple((monomial, value * factor) for monomial, value in a.terms)) if factor else ZERO


def subtract(a: Sum, b: Sum) -> Sum:
    return add(a, scale(b, Fraction(-1)))


def multiply(a: Sum, b: Sum) -> Sum:
    terms: dict[Monomial, Fraction] = {}
    for left, x in a.terms:
        for right, y in b.terms:
            powers: dict[Generator, int] = dict(left)
            for generator, power in right:
                powers[generator] = powers.get(generator, 0) + power
            monomial = tuple(sorted(powers.items(), key=lambda item: _key(item[0])))
            terms[monomial] = terms.get(monomial, Fraction(0)) + x * y
    return _made(terms)


def divide(a: Sum, b: Sum) -> Sum | None:
    """``a / b``; None when ``b`` is the constant 0."""
    constant = b.constant
    if constant is not None:
        return scale(a, 1 / constant) if constant else None
    return multiply(a, name(Call("inverse", (b,))))


def power(a: Sum, b: Sum) -> Sum | None:
    """``a ^ b``; None when there is no such number (0 to a negative power)."""
    exponent = b.constant
    if exponent is not None and exponent.denominator == 1 and abs(exponent) <= 12:
        result = number(1)
        for _ in range(abs(int(exponent))):
            result = multiply(result, a)
        return result if exponent >= 0 else divide(number(1), result)
    return name(Call("power", (a, b)))


def call(function: str, arguments: tuple[Sum, ...]) -> Sum | None:
    """A function of sums, worked out when it is exact on constants; None when it has no value."""
    constants = [argument.constant for argument in arguments]
    known = [constant for constant in constants if constant is not None]
    if len(known) == len(constants):
        match function:
            case "min":
                return number(min(known))
            case "max":
                return number(max(known))
            case "abs":
                return number(abs(known[0]))
            case "floor":
                return number(math.floor(known[0]))
            case "ceil":
                return number(math.ceil(known[0]))
            case "round":
                return number(nearest(known[0]))
            case "sqrt":
                if known[0] < 0:
                    return None
                root = Fraction(math.isqrt(known[0].numerator), math.isqrt(known[0].denominator))
                if root * root == known[0]:
                    return number(root)
            case "exp" if known[0] == 0:
                return number(1)
            case "ln":
                if known[0] <= 0:
                    return None
                if known[0] == 1:
                    return ZERO
    if function in ("min", "max"):
        arguments = tuple(sorted(set(arguments), key=repr))
        if len(arguments) == 1:
            return arguments[0]
    return name(Call(function, arguments))


def nearest(value: Fraction) -> int:
    """The nearest whole number, halves away from zero."""
    whole = math.floor(abs(value) + Fraction(1, 2))
    return whole if value >= 0 else -whole


def generators(a: Sum) -> frozenset[str]:
    """The names of all facts and settings inside, calls looked through."""
    found: set[str] = set()
    for monomial, _ in a.terms:
        for generator, _power in monomial:
            if isinstance(generator, str):
                found.add(generator)
            else:
                found.update(*(generators(argument) for argument in generator.arguments))
    return frozenset(found)


def is_linear(a: Sum) -> bool:
    """Whether every term is a number, or a number times one name."""
    return all(
        not monomial or (len(monomial) == 1 and monomial[0][1] == 1 and isinstance(monomial[0][0], str))
        for monomial, _ in a.terms
    )


def without_constant(a: Sum) -> Sum:
    """The sum without its constant term."""
    return Sum(tuple((monomial, value) for monomial, value in a.terms if monomial))


def constant_term(a: Sum) -> Fraction:
    """The constant term."""
    return next((value for monomial, value in a.terms if not monomial), Fraction(0))


def rename(a: Sum, names: Mapping[str, str]) -> Sum:
    """The same sum over other names."""
    result: dict[Monomial, Fraction] = {}
    for monomial, value in a.terms:
        renamed: list[tuple[Generator, int]] = []
        for generator, exponent in monomial:
            new: Generator
            if isinstance(generator, str):
                new = names[generator]
            else:
                new = Call(generator.function, tuple(rename(argument, names) for argument in generator.arguments))
            renamed.append((new, exponent))
        key = tuple(sorted(renamed, key=lambda item: _key(item[0])))
        result[key] = result.get(key, Fraction(0)) + value
    return _made(result)


def total(parts: Iterable[Sum]) -> Sum:
    """The sum of sums."""
    terms: dict[Monomial, Fraction] = {}
    for part in parts:
        for monomial, value in part.terms:
            terms[monomial] = terms.get(monomial, Fraction(0)) + value
    return _made(terms)


# --- ranges ------------------------------------------------------------------------------


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
