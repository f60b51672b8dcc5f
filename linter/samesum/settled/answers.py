"""Conditions of which some are known to hold always, or never."""

from __future__ import annotations

from fractions import Fraction

from samesum.reading import model as m
from samesum.spans import Span

Answer = m.Condition | bool
"""A condition, or whether it always or never holds."""


def never(span: Span) -> m.Condition:
    """A condition that no project meets."""
    return m.Comparison("=", m.Number(Fraction(0), m.PLAIN, span), m.Number(Fraction(1), m.PLAIN, span), span)


def always(span: Span) -> m.Condition:
    """A condition that every project meets."""
    return m.Comparison("=", m.Number(Fraction(0), m.PLAIN, span), m.Number(Fraction(0), m.PLAIN, span), span)


def written(answer: Answer, span: Span) -> m.Condition:
    """An answer as a condition."""
    if isinstance(answer, bool):
        return always(span) if answer else never(span)
    return answer


def all_of(parts: list[Answer], span: Span) -> Answer:
    """Whether all of them hold."""
    if any(part is False for part in parts):
        return False
    left = tuple(part for part in parts if not isinstance(part, bool))
    return m.All(left, span) if len(left) > 1 else left[0] if left else True


def not_so(part: Answer, span: Span) -> Answer:
    """Whether it does not hold."""
    return not part if isinstance(part, bool) else m.Not(part, span)
