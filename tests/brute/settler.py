"""Rulebooks at random in which nobody makes some choices: what they take is drawn as well.

A maker of its own, so that the rulebooks of ``generate`` stay what they are.
"""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

from brute.generate import Dice, fits
from brute.maker import Maker
from brute.rulebooks import HIGHEST, LOWEST, Body, Choice, Condition, OneOf, Option, Range, Rulebook, Setting, branches
from brute.taking import Taking, asked


class Settler(Maker):
    """Settles most choices, and some settings and judgements; more options have an ``only when``, more choices are
    followed and asked."""

    def body(self, here: str, depth: int = 0) -> Body:
        if self.budget > 2 and self.choices(here) and self.maybe((30, 10, 0, 0)[depth]):
            self.budget -= 1
            return self.follows(here, depth)
        return super().body(here, depth)

    def atom(self, here: str) -> Condition:
        return self.takes(here) if self.choices(here) and self.maybe(35) else super().atom(here)

    def choice(self, here: str, depth: int) -> Body:
        made = super().choice(here, depth)
        assert isinstance(made, Choice)
        if not self.maybe(65):
            return made
        options = tuple(self.option(o, here) for o in made.options)
        takes = self.pick((LOWEST, HIGHEST, *(o.name for o in options)))
        return replace(made, options=options, takes=takes, timing="")

    def option(self, made: Option, here: str) -> Option:
        if made.only_when is None and self.maybe(25):
            made = replace(made, only_when=self.condition(here))
        if made.error is None and self.maybe(40):
            made = replace(made, error=Fraction(self.between(1, 8) * 5, 100))
        return made

    def declare(self) -> None:
        super().declare()
        self.settings = [replace(s, takes=self.value(s)) if self.maybe(30) else s for s in self.settings]
        self.judgements = [replace(j, takes=self.maybe(50)) if self.maybe(30) else j for j in self.judgements]

    def value(self, setting: Setting) -> Fraction | str | bool:
        domain = setting.domain
        if isinstance(domain, OneOf):
            return self.pick(domain.values)
        if isinstance(domain, Range):
            assert domain.low is not None and domain.high is not None
            return domain.low + (domain.high - domain.low) * Fraction(self.between(0, 4), 4)
        return self.maybe(50)


def settled_rulebook(seed: int) -> Rulebook:
    """The rulebook of a seed: the first of its attempts that fits and has a choice that nobody makes; for every third
    seed one per index, for every third one that is followed or asked."""
    attempt = 0
    while True:
        made = Settler(Dice(seed * 1000 + attempt)).rulebook()
        wanted = (is_settled, is_settled_per_index, is_settled_and_asked)[seed % 3]
        if wanted(made) and fits(made):
            return made
        attempt += 1


def is_settled(made: Rulebook) -> bool:
    return any(settled_choices(quantity.body) for quantity in made.quantities)


def is_settled_per_index(made: Rulebook) -> bool:
    return any(quantity.index and settled_choices(quantity.body) for quantity in made.quantities)


def is_settled_and_asked(made: Rulebook) -> bool:
    taking = Taking(made)
    return any(taking.leader(name) for name in asked(made))


def settled_choices(body: Body) -> list[Choice]:
    """The choices in a body that nobody makes, the outer ones first."""
    own = [body] if isinstance(body, Choice) and body.takes else []
    return own + [each for _, _, inner in branches(body) for each in settled_choices(inner)]
