"""What the rulebook itself takes, for whoever reads projects: it is not theirs to give."""

from __future__ import annotations

import re
from collections.abc import Iterable
from fractions import Fraction

from samesum.reading import model as m
from samesum.reading import walk
from samesum.reading.numbers import as_written


def taken_at(model: m.Model, points: Iterable[str]) -> dict[str, str]:
    """What each choice takes that nobody makes, by the ids of all elements; "" for whatever else has branches."""
    general: dict[str, str] = {}

    def inside(body: m.Body, id: str) -> None:
        general[id] = body.takes if isinstance(body, m.Choice) else ""
        for branch in walk.branches(body):
            inside(branch.body, f"{id}/{branch.name}")

    for quantity in model.quantities:
        inside(quantity.body, quantity.name)
    return {id: general[re.sub(r"@\d+", "", id)] for id in points}


def prescribed_for(declared: m.Setting | m.Judgement | m.Fact) -> Fraction | str | bool | None:
    """The value that the rulebook itself takes; None where somebody decides, or for a fact."""
    return None if isinstance(declared, m.Fact) else declared.takes


def prescribed_words(declared: m.Setting | m.Judgement | m.Fact) -> tuple[str, str]:
    """What to say to whoever gives another value than the one that the rulebook takes, and what to do."""
    takes = prescribed_for(declared)
    if isinstance(takes, Fraction):
        assert isinstance(declared, m.Setting)
        domain = declared.domain
        share = not declared.unit.text and isinstance(domain, m.Range) and domain.high is not None and domain.high <= 1
        behind = f" {declared.unit.text}" if declared.unit.text else ""
        text = f"{as_written(100 * takes)} %" if share else f"{as_written(takes)}{behind}"
    else:
        text = takes if isinstance(takes, str) else "yes" if takes else "no"
    line = declared.about.span.line
    return f"the rulebook itself takes {text} for `{declared.name}` (its line {line})", "leave it out"
