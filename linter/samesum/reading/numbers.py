"""Numbers as written → exact numbers, within bounds that keep every later calculation finite."""

from __future__ import annotations

from fractions import Fraction
from functools import lru_cache

LONGEST = 60
LARGEST_EXPONENT = 200


@lru_cache(maxsize=2_000)
def exact(text: str) -> Fraction | None:
    """The exact value of ``12``, ``1_000``, ``0.47`` or ``1e-3``; None for a number beyond all use:
    more than 60 digits, or an exponent beyond ±200."""
    plain = text.replace("_", "").lower()
    digits, _, exponent = plain.partition("e")
    power = exponent.lstrip("+-")
    if len(digits) > LONGEST or len(power) > 6 or int(power or 0) > LARGEST_EXPONENT:
        return None
    return Fraction(plain)


def as_written(value: Fraction) -> str:
    """A short decimal for messages: ``12``, ``0.35``, ``44/12`` as ``3.66667``."""
    return f"{float(value):.6g}" if value.denominator != 1 or abs(value) >= 10**15 else str(value.numerator)
