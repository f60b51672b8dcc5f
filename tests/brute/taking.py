"""What the rulebook itself ``takes``: in a choice that nobody makes, as a setting, as a judgement.

The meaning that is followed here, beyond the language's own page:

* A choice that takes an option is read like cases in order: that option where its ``only when`` holds, then the
  others by ``preference``. Nothing is asked behind an option that is always open, and nothing of one that never is.
  What follows the choice is asked the same; ``Q takes OPTION`` asks of the options before that one, and of it.
* One that takes the lowest or highest value asks which options are open and evaluates those, all of them. Which options
  were open tells routes apart, as it does with cases; which was the lowest does not, but for what follows it.
  ``Q takes OPTION`` and what follows Q evaluate Q.
* No option open is a gap.
* Nothing is asked for a condition that the text alone answers: by what a named or yes/no setting or a judgement
  takes, or by an option that a choice always or never takes. Comparisons of numbers are asked.
* A choice that takes something is decided by nobody, so it has no branch that a policy could stray to.
"""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction
from itertools import product

import numpy as np

from brute.rulebooks import (
    And,
    Body,
    Choice,
    Condition,
    Follows,
    Holds,
    Is,
    Not,
    OneOf,
    Option,
    Or,
    Rulebook,
    Takes,
    branches,
)

Array = np.ndarray


def preference(choice: Choice) -> list[Option]:
    """The options marked as reference, those with an error by its size, the others as written."""
    marked = [o for o in choice.options if o.reference]
    known = sorted((o for o in choice.options if o.error is not None), key=lambda o: o.error or Fraction(0))
    return list({o.name: o for o in (*marked, *known, *choice.options)}.values())


def prescribed(rulebook: Rulebook) -> dict[str, Fraction | int | bool]:
    """What settings and judgements take, as ``Points.columns`` has it (numbers as they are)."""
    found: dict[str, Fraction | int | bool] = {j.name: j.takes for j in rulebook.judgements if j.takes is not None}
    for setting in rulebook.settings:
        if isinstance(setting.takes, str):
            assert isinstance(setting.domain, OneOf)
            found[setting.name] = setting.domain.values.index(setting.takes)
        elif setting.takes is not None:
            found[setting.name] = setting.takes
    return found


def open_sets(holds: dict[str, Array]) -> dict[str, Array]:
    """Where exactly these options are open, by their names with ``+`` between them; none open is no such set."""
    found: dict[str, Array] = {}
    for chosen in product((True, False), repeat=len(holds)):
        if any(chosen):
            where = [it if in_it else ~it for it, in_it in zip(holds.values(), chosen, strict=True)]
            name = "+".join(name for name, in_it in zip(holds, chosen, strict=True) if in_it)
            found[name] = np.logical_and.reduce(where)
    return found


def asked(rulebook: Rulebook) -> set[str]:
    """Quantities whose choice something follows or asks."""

    def of(condition: Condition) -> Iterator[str]:
        if isinstance(condition, Takes):
            yield condition.quantity
        elif isinstance(condition, And | Or):
            for part in condition.parts:
                yield from of(part)
        elif isinstance(condition, Not):
            yield from of(condition.part)

    def inside(body: Body) -> Iterator[str]:
        if isinstance(body, Follows):
            yield body.quantity
        for _, condition, inner in branches(body):
            if condition is not None:
                yield from of(condition)
            yield from inside(inner)

    found = {name for condition in rulebook.applies for name in of(condition)}
    return found | {name for quantity in rulebook.quantities for name in inside(quantity.body)}


class Taking:
    """What the text of a rulebook settles alone."""

    def __init__(self, rulebook: Rulebook) -> None:
        self.bodies = {q.name: q.body for q in rulebook.quantities}
        self.inputs = {d.name: d.takes for d in (*rulebook.settings, *rulebook.judgements) if d.takes is not None}
        self.nothing = not self.inputs and not any(isinstance(b, Choice) and b.takes for b in self.bodies.values())

    def leader(self, name: str) -> tuple[str, Choice] | None:
        """The quantity whose choice this one has or follows, when nobody makes that choice."""
        if self.nothing:
            return None
        body = self.bodies[name]
        while isinstance(body, Follows):
            name, body = body.quantity, self.bodies[body.quantity]
        return (name, body) if isinstance(body, Choice) and body.takes else None

    def line(self, choice: Choice) -> list[tuple[str, Condition | None]]:
        """The options that a choice takes, the one before the other, each with what is asked first."""
        ordered = sorted(preference(choice), key=lambda o: o.name != choice.takes)
        found: list[tuple[str, Condition | None]] = []
        for option in ordered:
            open_ = self.opens(option)
            if open_ is not False:
                found.append((option.name, None if open_ else option.only_when))
            if open_:
                break
        return found

    def opens(self, option: Option) -> bool | None:
        return True if option.only_when is None else self.known(option.only_when)

    def known(self, c: Condition) -> bool | None:
        """What the text alone answers; None where it does not."""
        if self.nothing:
            return None
        if isinstance(c, Holds) and c.name in self.inputs:
            return self.inputs[c.name] is True
        if isinstance(c, Is) and c.name in self.inputs:
            return self.inputs[c.name] in c.values
        if isinstance(c, Takes) and (leader := self.leader(c.quantity)):
            return self.took(c.option, leader[1])
        if isinstance(c, Not):
            part = self.known(c.part)
            return None if part is None else not part
        if isinstance(c, And | Or):
            decisive = isinstance(c, Or)
            parts = [self.known(part) for part in c.parts]
            return decisive if decisive in parts else None if None in parts else not decisive
        return None

    def took(self, option: str, choice: Choice) -> bool | None:
        if choice.extreme:
            closed = any(o.name == option and self.opens(o) is False for o in choice.options)
            return False if closed else None
        line = self.line(choice)
        if option not in [name for name, _ in line]:
            return False
        return True if line[0] == (option, None) else None
