"""Whether the estimates that somebody may pick from lie further apart than they did.

What an error gives to pick from is how far two estimates of one quantity lie apart, not how far each lies from the
truth. Of normal errors s1 and s2 with correlation r the difference has the variance s1² + s2² − 2 r s1 s2.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from itertools import combinations

from samesum.reading import model as m
from samesum.reviewing.places import exact_percent
from samesum.reviewing.rows import Row, RowOption
from samesum.written import decimal, percent


@dataclass(frozen=True, slots=True)
class _Pair:
    """How far two options lie apart: the variance of the difference of their errors, the distance of their biases."""

    names: tuple[str, str]
    variance: Fraction
    biases: Fraction


def further_apart(before: Row, after: Row) -> list[str]:
    """Each way in which options of a choice lie further apart, in words, with the widest pair that it is true of.
    A cost counts for nothing here: it moves no number, only what is tried first."""
    found = [
        f"the error of {option.name} ({exact_percent(was.error)}) is stated no longer"
        for option in after.options
        for was in before.options
        if option.name == was.name and option.error is None and was.error is not None
    ]
    earlier = _pairs(_as_in(before.options, after.options), _correlated(before))
    grown = [
        (each, was)
        for each in _pairs(_as_in(after.options, before.options), _correlated(after)).values()
        for was in [earlier.get(frozenset(each.names)) or _widest(tuple(earlier.values()))]
    ]
    by_error = [(each, was) for each, was in grown if each.variance > was.variance]
    if by_error:
        each, was = max(by_error, key=lambda pair: pair[0].variance)
        now, then = _told_apart(_root(each.variance), _root(was.variance))
        found.append(
            f"the estimates of {' and '.join(each.names)} lie further apart: the standard deviation of their "
            f"difference is {now}, not {then}"
        )
    by_bias = [(each, was) for each, was in grown if each.biases > was.biases]
    if by_bias:
        each, was = max(by_bias, key=lambda pair: pair[0].biases)
        now, then = exact_percent(each.biases), exact_percent(was.biases)
        found.append(f"the biases of {' and '.join(each.names)} lie further apart: {now}, not {then}")
    return found


def _as_in(options: Sequence[RowOption], others: Sequence[RowOption]) -> list[RowOption]:
    """The options, with the error from the other draft where only that one states it. Stating an error at last opens
    nothing, and one that is stated no longer is told by itself."""
    known = {option.name: option.error for option in others}
    return [replace(each, error=known.get(each.name)) if each.error is None else each for each in options]


def _pairs(options: Sequence[RowOption], together: Fraction) -> Mapping[frozenset[str], _Pair]:
    """Every two options; an error or a bias that is not stated is 0."""
    found: dict[frozenset[str], _Pair] = {}
    for first, second in combinations(options, 2):
        a, b = (each.error or Fraction(0) for each in (first, second))
        biases = abs((first.bias or Fraction(0)) - (second.bias or Fraction(0)))
        names = (first.name, second.name)
        found[frozenset(names)] = _Pair(names, a * a + b * b - 2 * together * a * b, biases)
    return found


def _widest(pairs: Sequence[_Pair]) -> _Pair:
    """What a pair with an option that is new is held against: the furthest that any two lay apart."""
    variance = max((each.variance for each in pairs), default=Fraction(0))
    return _Pair(("", ""), variance, max((each.biases for each in pairs), default=Fraction(0)))


def _correlated(row: Row) -> Fraction:
    """How far the errors of the options go together; 0 where that is not said."""
    body = row.place.points[0].body
    return (body.correlated or Fraction(0)) if isinstance(body, m.Choice) else Fraction(0)


def _root(variance: Fraction) -> Fraction:
    return Fraction(decimal(variance).sqrt())


def _told_apart(first: Fraction, second: Fraction) -> tuple[str, str]:
    """Two shares for people, with as many digits as it takes to see a difference."""
    if percent(first) != percent(second):
        return percent(first), percent(second)
    return exact_percent(first), exact_percent(second)
