"""Whether a condition that changed lets some project through that it did not.

Asked of a rulebook made for the question: cases in order of the old condition, then the new one. Its second branch
can be taken by exactly the projects that have the new one alone.
"""

from __future__ import annotations

import time
from fractions import Fraction

from samesum.evidence.routes.conditions import examine_conditions
from samesum.evidence.routes.counting import deep
from samesum.evidence.routes.diagrams import Limits, OutOfLimits
from samesum.evidence.routes.relating import build_network
from samesum.graph import BranchPoint, build, names_in
from samesum.reading import model as m
from samesum.reading import walk

ASKED, TOGETHER = "what is asked", "all elements"  # no rulebook can have names with a space


def lets_more_through(
    old: tuple[m.Model, BranchPoint], new: tuple[m.Model, BranchPoint], branch: str, seconds: float
) -> bool | None:
    """Whether some project, and some reading of what is left open, meets the condition of that branch in the new draft
    and not in the old one. None where that was not worked out: where a condition asks for more than facts, settings
    and judgements that both drafts declare alike, where it lets more through and stands inside another branch (whose
    projects may all be among the old ones), or where time ran out."""
    was, now = (point.conditions[point.branches.index(branch)] for _, point in (old, new))
    assert was is not None and now is not None
    before, after = old[0], new[0]
    asked = (was, now, *(each.condition for each in after.applies))
    if not all(_is_simple(each) for each in asked) or _meaning(was, before) != _meaning(was, after):
        return None
    index = next(each.index for each in after.quantities if each.name == new[1].quantity)
    with deep():
        try:
            network = build_network(build(_question(after, was, now, index)), Limits(time.monotonic() + seconds / 2))
        except OutOfLimits:
            return None
        found = examine_conditions(network, seconds / 2)
    if found.undecided:
        return None
    if any(each.branch == "2" for each in found.dead_branches):
        return False
    return True if new[1].parent is None else None


def _question(model: m.Model, was: m.Condition, now: m.Condition, index: str) -> m.Model:
    """The rulebook that asks; of its numbers none means anything."""
    span = now.span
    number = m.Formula(m.Number(Fraction(1), m.PLAIN, span), span)
    branches = (m.When("1", was, number, span), m.When("2", now, number, span), m.When("otherwise", None, number, span))
    about = m.About("", "", "", span, span)
    quantities = [m.Quantity(ASKED, m.PLAIN, index, m.Cases(True, branches, span), about)]
    if index:
        each = m.Reference(ASKED, "quantity", index, m.PLAIN, span)
        whole = m.Formula(m.Reduction("sum", each, index, m.PLAIN, span), span)
        quantities.append(m.Quantity(TOGETHER, m.PLAIN, "", whole, about))
    result = m.Result(quantities[-1].name, m.PLAIN, "", None, about)
    return m.Model(
        model.file, model.title, model.draft, model.title_span, result, 1, model.applies, model.indices, model.facts,
        model.settings, model.judgements, model.constants, (), tuple(quantities),
    )  # fmt: skip


def _is_simple(condition: m.Condition) -> bool:
    """Whether it asks for facts, settings, judgements and constants alone, and has a value whatever they are."""
    for node in walk.inside(condition):
        match node:
            case m.Takes() | m.Lookup() | m.Unknown() | m.Reference(kind="quantity"):
                return False
            case m.Function(name=name) if name not in ("min", "max", "abs", "round", "floor", "ceil"):
                return False
            case m.Arithmetic(operator="^"):
                return False
            case m.Arithmetic(operator="/", right=right) if not (isinstance(right, m.Number) and right.value):
                return False
    return True


def _meaning(condition: m.Condition, model: m.Model) -> list[object]:
    """What the names that a condition mentions stand for, and how many elements there are."""
    names = set(names_in(condition))
    found: list[object] = [(each.name, each.most) for each in model.indices]
    found += [(each.name, each.unit, each.index, each.domain) for each in model.facts if each.name in names]
    found += [(each.name, each.unit, each.domain) for each in model.settings if each.name in names]
    found += [(each.name, each.wording) for each in model.judgements if each.name in names]
    for constant in model.constants:
        if constant.name in names:
            value = constant.expression.value if isinstance(constant.expression, m.Number) else object()
            found.append((constant.name, constant.unit, value))
    return sorted(found, key=repr)
