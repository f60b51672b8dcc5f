"""Calculated amounts as people read them: separators, as many digits as make sense."""

from __future__ import annotations

import math
from fractions import Fraction

from samesum import written
from samesum.written import plain


def amount(value: float, unit: str = "") -> str:
    """``15,937 t CO2e``; four to six digits below a thousand."""
    if not math.isfinite(value):
        return "unbounded"
    if abs(value) >= 1000:
        text = f"{value:,.0f}" if abs(value) < 1e15 else plain(Fraction(f"{value:.4g}"))
    else:
        text = plain(Fraction(f"{value:.6g}"))
    return f"{text} {unit}".rstrip()


def short_share(value: float | None) -> str:
    """The same for a narrow column: ``×72,900`` in place of ``72,900 times``."""
    said = share(value)
    return f"×{said.removesuffix(' times')}" if said.endswith(" times") else said


def two_shares(first: float, second: float) -> tuple[str, str]:
    """Two shares of the reference for one sentence, both in per cent or both in times: ``9.8 times the reference`` and
    ``10 times``."""
    if not any(math.isfinite(each) and abs(each) >= 10 for each in (first, second)):
        return written.of_reference(first), share(second)
    one, other = (f"{each:.3g}" if math.isfinite(each) else "" for each in (first, second))
    most = f"{plain(Fraction(other))} times" if other else share(second)
    return f"{plain(Fraction(one))} times the reference" if one else share(first), most


def share(value: float | None) -> str:
    """``43.4 %``, ``0``; ``7 times`` from ten times on; ``not known``."""
    if value is None or math.isnan(value):
        return "not known"
    if math.isinf(value):
        return "no bound"
    return written.share(value)
