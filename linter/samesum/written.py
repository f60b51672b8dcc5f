"""Numbers as people read them, and whole numbers of any length."""

from __future__ import annotations

import sys
from collections.abc import Iterator
from contextlib import contextmanager
from decimal import Context, Decimal
from fractions import Fraction

LONGEST_WHOLE = 10**15


@contextmanager
def long_integers() -> Iterator[None]:
    """Room for writing whole numbers of any length (Python stops at 4,300 digits by itself)."""
    before = sys.get_int_max_str_digits()
    sys.set_int_max_str_digits(0)
    try:
        yield
    finally:
        sys.set_int_max_str_digits(before)


def whole(number: int) -> str:
    """A count for people: in full up to 15 digits, then its beginning, its length and its size."""
    if abs(number) < LONGEST_WHOLE:
        return f"{number:,}"
    with long_integers():
        digits = str(number)
    exponent = len(digits) - 1
    tenths = (int(digits[:3]) + 5) // 10
    if tenths >= 100:
        tenths, exponent = 10, exponent + 1
    head = len(digits) % 3 or 3
    start = ",".join((digits[:head], digits[head : head + 3], digits[head + 3 : head + 6]))
    return f"{start},… ({len(digits)} digits, about {tenths / 10} × 10^{exponent})"


def decimal(value: Fraction) -> Decimal:
    """The value to 30 digits, however large or small."""
    context = Context(prec=30, Emax=10**9, Emin=-(10**9))
    return context.divide(context.create_decimal(value.numerator), context.create_decimal(value.denominator))


def plain(value: Fraction) -> str:
    """A measured or calculated number for people: to six significant digits, whole where it is whole, with commas
    from 1,000 on."""
    if value.denominator == 1 and abs(value) < LONGEST_WHOLE:
        return f"{value.numerator:,}"
    found = decimal(value)
    size = found.adjusted()
    if -5 <= size < 15:
        places = max(0, 5 - size)
        text = f"{found:,.{places}f}"
        return text.rstrip("0").rstrip(".") if "." in text else text
    text = f"{found:.5e}"
    mantissa, _, exponent = text.partition("e")
    return f"{mantissa.rstrip('0').rstrip('.')}e{int(exponent)}"


def as_sentence(text: str) -> str:
    """A phrase as a whole sentence: a capital at the head, a stop at the end; "" stays as it is."""
    if not text:
        return ""
    return text[0].upper() + text[1:] + ("" if text[-1] in ".!?" else ".")


def percent(value: Fraction) -> str:
    """A share for people, to three significant digits: ``7.86 %``, ``0.05 %``, ``500 %``."""
    hundred = value * 100
    if not hundred:
        return "0 %"
    size = decimal(abs(hundred)).adjusted()
    step = Fraction(10) ** (size - 2) if size < 2 else Fraction(1)
    return f"{plain(round(hundred / step) * step)} %"


def share(value: float) -> str:
    """A share of something for people: ``43.4 %``; ``153,000 times`` from ten times on, ``0 %``."""
    if abs(value) < 10:
        return percent(Fraction(f"{value:.6g}"))
    return f"{plain(Fraction(f'{value:.3g}'))} times"


def of_reference(value: float) -> str:
    """``43.4 % of the reference``; ``153,000 times the reference`` from ten times on."""
    said = share(value)
    return f"{said} the reference" if said.endswith(" times") else f"{said} of the reference"


def number(value: Fraction) -> int | float | str:
    """A number for JSON: whole numbers whole, others as the nearest floating-point number where that is exact to
    its last digit, else as a fraction ``"125/6"``, so that a witness can be replayed exactly."""
    if value.denominator == 1:
        return value.numerator
    try:
        nearest = float(value)
    except OverflowError:
        return str(value)
    return nearest if Fraction(repr(nearest)) == value else str(value)
