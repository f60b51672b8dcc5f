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


def without_comma(head: str, tail: str) -> str:
    """What to write for a number with commas: ``head`` stands before the first, ``tail`` behind it.

    Both readings where both can be meant: ``3,667`` is a decimal comma to some and thousands to others.
    """
    before = head.lstrip("+-").replace("_", "")
    grouped = f"{head}_{tail.replace(',', '_')}"
    if "," in tail or "." in tail:
        return f"write `{grouped}`"
    if len(tail) != 3 or len(before) > 3 or not before.strip("0"):
        return f"write `{head}.{tail}`, with a point"
    return f"write `{head}.{tail}`, or `{grouped}` for thousands"


def as_written(value: Fraction) -> str:
    """A short decimal for messages: ``12``, ``0.35``, ``44/12`` as ``3.66667``."""
    return f"{float(value):.6g}" if value.denominator != 1 or abs(value) >= 10**15 else str(value.numerator)
