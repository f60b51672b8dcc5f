"""Domains of numbers, for whoever reads projects: what lies inside, and the words for them."""

from __future__ import annotations

from fractions import Fraction

from samesum.reading import model as m
from samesum.reading.numbers import as_written


def lies_inside(value: Fraction, domain: m.Range) -> bool:
    return (domain.low is None or value >= domain.low) and (domain.high is None or value <= domain.high)


def unit_behind(unit: m.Unit) -> str:
    return f" {unit.text}" if unit.text else ""


def in_percent(domain: m.Range, unit: m.Unit) -> bool:
    """Whether the rulebook writes this domain in %, and not in a declared unit."""
    return domain.share and not unit.text


def domain_words(domain: m.Range, unit: m.Unit) -> str:
    """The domain as the rulebook writes it: ``0 to 40 ppt``, ``5 % to 10 %``."""
    percent = in_percent(domain, unit)

    def end(value: Fraction | None) -> str:
        if value is None:
            return "any number"
        return f"{as_written(value * 100)} %" if percent else as_written(value)

    return f"{end(domain.low)} to {end(domain.high)}{unit_behind(unit)}"
