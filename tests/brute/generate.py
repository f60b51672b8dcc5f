"""Rulebooks and projects at random: small enough for brute force, with every feature now and then.

One maker serves two sources of chance: ``rulebook(seed)`` is fast and repeatable, ``rulebooks()`` is
a hypothesis strategy that can shrink what it finds.
"""

from __future__ import annotations

import random
from collections.abc import Callable
from fractions import Fraction

from hypothesis import strategies as st

from brute.declarer import Chance
from brute.linear import TooLarge
from brute.maker import Maker
from brute.points import representative
from brute.rulebooks import OneOf, Range, Rulebook, Setting

MOST_POINTS = 3_000


class Dice:
    """Decisions of a seeded generator."""

    def __init__(self, seed: int) -> None:
        self.random = random.Random(seed)

    def between(self, low: int, high: int) -> int:
        return low + int(self.random.random() * (high - low + 1))


class Drawn:
    """Decisions drawn by hypothesis."""

    def __init__(self, draw: Callable[[st.SearchStrategy[int]], int]) -> None:
        self.draw = draw

    def between(self, low: int, high: int) -> int:
        return self.draw(st.integers(low, high))


def fits(rulebook: Rulebook) -> bool:
    """Whether brute force can take it: comparisons are linear, there are not too many points."""
    try:
        return representative(rulebook).rows <= MOST_POINTS
    except TooLarge:
        return False


def rulebook(seed: int) -> Rulebook:
    """The rulebook of a seed: the first of its attempts that fits."""
    attempt = 0
    while True:
        made = Maker(Dice(seed * 1000 + attempt)).rulebook()
        if fits(made):
            return made
        attempt += 1


@st.composite
def rulebooks(draw: Callable[[st.SearchStrategy[int]], int]) -> Rulebook:
    """The same as a hypothesis strategy."""
    return Maker(Drawn(draw)).rulebook()


def case(made: Rulebook, chance: Chance) -> dict[str, object]:
    """A project for the rulebook: a value for each fact (quarters, so that floats hold them exactly), with as many
    elements as the index has or fewer, and now and then for a setting or judgement."""

    def value(domain: object) -> object:
        if isinstance(domain, Range):
            low = domain.low if domain.low is not None else Fraction(-2)
            high = domain.high if domain.high is not None else Fraction(6)
            return low + Fraction(chance.between(0, int((high - low) * 4)), 4)
        if isinstance(domain, OneOf):
            return domain.values[chance.between(0, len(domain.values) - 1)]
        return bool(chance.between(0, 1))

    sizes = {i.name: i.most if chance.between(0, 3) else chance.between(1, i.most) for i in made.indices}
    found: dict[str, object] = {}
    for fact in made.facts:
        found[fact.name] = [value(fact.domain) for _ in range(sizes[fact.index])] if fact.index else value(fact.domain)
    for human in (*made.settings, *made.judgements):
        if chance.between(0, 9) >= 7 and human.takes is None:
            found[human.name] = value(human.domain if isinstance(human, Setting) else None)
    return found
