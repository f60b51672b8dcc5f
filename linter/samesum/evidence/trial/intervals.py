"""Intervals that hold the true value for certain: every end is rounded outwards.

The four operations and the square root are correctly rounded in IEEE 754 (IEEE 1985, section 4), so one step
outwards is enough; powers, ``exp`` and ``ln`` of numpy are widened by four units in the last place. An end that
cannot be told is infinite; 0 times infinity is 0, since the ends stand for numbers, not limits.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import reduce

import numpy as np

from samesum.evidence.trial.arrays import Array
from samesum.evidence.trial.operations import nearest_whole


@dataclass(frozen=True, slots=True)
class Interval:
    """``low`` <= value <= ``high``, element by element."""

    low: Array
    high: Array


def exactly(value: Fraction) -> Interval:
    """The interval of one exact number: one float, or the two floats around it."""
    near = float(value)
    if Fraction(near) == value:
        return Interval(np.full(1, near), np.full(1, near))
    return Interval(np.full(1, np.nextafter(near, -np.inf)), np.full(1, np.nextafter(near, np.inf)))


def outward(low: Array, high: Array, steps: int = 1) -> Interval:
    """One or more floats further out; an end that is no number is infinite."""
    low = np.where(np.isnan(low), -np.inf, low)
    high = np.where(np.isnan(high), np.inf, high)
    for _ in range(steps):
        low, high = np.nextafter(low, -np.inf), np.nextafter(high, np.inf)
    return Interval(low, high)


def added(a: Interval, b: Interval) -> Interval:
    return outward(a.low + b.low, a.high + b.high)


def _times(a: Array, b: Array) -> Array:
    with np.errstate(invalid="ignore"):
        found = a * b
    return np.where((a == 0) | (b == 0), 0.0, found)


def multiplied(a: Interval, b: Interval) -> Interval:
    ends = [_times(x, y) for x in (a.low, a.high) for y in (b.low, b.high)]
    made = outward(np.minimum.reduce(ends), np.maximum.reduce(ends))
    nothing = ((a.low == 0) & (a.high == 0)) | ((b.low == 0) & (b.high == 0))
    return Interval(np.where(nothing, 0.0, made.low), np.where(nothing, 0.0, made.high))


def divided(a: Interval, b: Interval) -> Interval:
    """Over the divisors that are not zero; the whole line where zero lies strictly inside them."""
    with np.errstate(all="ignore"):
        low = np.where(b.high == 0, -np.inf, 1 / b.high)
        high = np.where(b.low == 0, np.inf, 1 / b.low)
    turned = outward(low, high)
    across = (b.low < 0) & (b.high > 0) | ((b.low == 0) & (b.high == 0))
    return multiplied(a, Interval(np.where(across, -np.inf, turned.low), np.where(across, np.inf, turned.high)))


def whole_power(a: Interval, exponent: int) -> Interval:
    """``a`` to a whole power of one or more."""
    with np.errstate(all="ignore"):
        low, high = np.power(a.low, exponent), np.power(a.high, exponent)
    if exponent % 2 == 0:
        smallest = np.where((a.low <= 0) & (a.high >= 0), 0.0, np.minimum(low, high))
        made = outward(smallest, np.maximum(low, high), 4)
        return Interval(np.maximum(made.low, 0.0), made.high)
    return outward(low, high, 4)


def powered(a: Interval, b: Interval) -> Interval:
    """``a`` to any power, over bases above zero; the whole line where a base may not be."""
    with np.errstate(all="ignore"):
        ends = [np.power(x, y) for x in (a.low, a.high) for y in (b.low, b.high)]
    made = outward(np.minimum.reduce(ends), np.maximum.reduce(ends), 4)
    doubtful = a.low <= 0
    return Interval(np.where(doubtful, -np.inf, made.low), np.where(doubtful, np.inf, made.high))


def smallest(parts: Sequence[Interval]) -> Interval:
    return Interval(reduce(np.minimum, [part.low for part in parts]), reduce(np.minimum, [part.high for part in parts]))


def largest(parts: Sequence[Interval]) -> Interval:
    return Interval(reduce(np.maximum, [part.low for part in parts]), reduce(np.maximum, [part.high for part in parts]))


def around(parts: Sequence[Interval]) -> Interval:
    """The smallest interval around several."""
    return Interval(reduce(np.minimum, [part.low for part in parts]), reduce(np.maximum, [part.high for part in parts]))


def called(name: str, a: Interval) -> Interval:
    """``abs sqrt exp ln round floor ceil``, over the arguments that have a value."""
    low, high = a.low, a.high
    with np.errstate(all="ignore"):
        match name:
            case "abs":
                zero = (low <= 0) & (high >= 0)
                return Interval(
                    np.where(zero, 0.0, np.minimum(np.abs(low), np.abs(high))), np.maximum(np.abs(low), np.abs(high))
                )
            case "sqrt":
                made = outward(np.sqrt(np.maximum(low, 0.0)), np.sqrt(np.maximum(high, 0.0)))
                return Interval(np.maximum(made.low, 0.0), made.high)
            case "exp":
                made = outward(np.exp(low), np.exp(high), 4)
                return Interval(np.maximum(made.low, 0.0), made.high)
            case "ln":
                return outward(np.where(low > 0, np.log(low), -np.inf), np.where(high > 0, np.log(high), -np.inf), 4)
            case "round":
                return Interval(nearest_whole(low), nearest_whole(high))
            case "floor":
                return Interval(np.floor(low), np.floor(high))
            case _:
                return Interval(np.ceil(low), np.ceil(high))
