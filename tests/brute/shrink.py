"""Makes a rulebook small while something about it stays true. For finding out, not for tests that pass."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import fields, is_dataclass, replace
from fractions import Fraction

from brute.rulebooks import (
    And,
    Call,
    Cases,
    Chain,
    Choice,
    Compare,
    Follows,
    Formula,
    Holds,
    Is,
    Judgement,
    Lookup,
    Neg,
    Not,
    Num,
    Op,
    Option,
    Or,
    Over,
    Position,
    Ref,
    Rulebook,
    Setting,
    Takes,
    branches,
)

EXPRESSIONS = (Num, Ref, Lookup, Op, Neg, Call, Over, Position)
CONDITIONS = (Compare, Chain, Is, Holds, Takes, And, Or, Not)
BODIES = (Formula, Cases, Choice, Follows)


def smaller(node: object) -> Iterator[object]:
    """Everything that is one step smaller than ``node``, of the same kind."""
    if isinstance(node, Rulebook):
        yield from _fewer_options(node)
    yield from _instead(node)
    if isinstance(node, Fraction | int | str | bool) or node is None or not is_dataclass(node):
        return
    for each in fields(node):
        value = getattr(node, each.name)
        if isinstance(value, tuple):
            least = 2 if isinstance(node, And | Or) and each.name == "parts" else 0
            for k, part in enumerate(value):
                rest = (*value[:k], *value[k + 1 :])
                if len(rest) >= least:
                    yield replace(node, **{each.name: rest})
                for other in smaller(part):
                    yield replace(node, **{each.name: (*value[:k], other, *value[k + 1 :])})
        else:
            for other in smaller(value):
                yield replace(node, **{each.name: other})


def _instead(node: object) -> Iterator[object]:
    for kinds in (EXPRESSIONS, CONDITIONS, BODIES):
        if isinstance(node, kinds):
            for part in _inside(node):
                if isinstance(part, kinds):
                    yield part
    if isinstance(node, EXPRESSIONS) and node != Num(Fraction(0)):
        yield Num(Fraction(0))
        if not isinstance(node, Num):
            yield Num(Fraction(1))
    if isinstance(node, BODIES) and not isinstance(node, Formula):
        yield Formula(Num(Fraction(0)))
    if isinstance(node, Option):
        for name, plain in (("only_when", None), ("error", None), ("cost", None), ("reference", False)):
            if getattr(node, name) != plain:
                yield replace(node, **{name: plain})
    if isinstance(node, Choice) and node.timing:
        yield replace(node, timing="")
    if isinstance(node, Choice) and node.takes:
        yield replace(node, takes="")
    if isinstance(node, Setting | Judgement) and node.takes is not None:
        yield replace(node, takes=None)
    if isinstance(node, Rulebook):
        if node.periods > 1:
            yield replace(node, periods=1)
        if node.rounding:
            yield replace(node, rounding="")
        for index in node.indices:
            if index.most > 1:
                yield replace(node, indices=tuple(replace(i, most=i.most - (i == index)) for i in node.indices))


def _inside(node: object) -> Iterator[object]:
    if not is_dataclass(node):
        return
    for each in fields(node):
        value = getattr(node, each.name)
        for part in value if isinstance(value, tuple) else (value,):
            yield part
            if not isinstance(node, BODIES) or not isinstance(part, BODIES):
                yield from (p for p in _inside(part) if isinstance(part, Option) or type(part).__name__ == "When")


def _fewer_options(rulebook: Rulebook) -> Iterator[Rulebook]:
    """A choice's option goes together with that of all that follow it."""
    names = {name for q in rulebook.quantities for name, _, _ in branches(q.body)}
    for quantity in rulebook.quantities:
        if not isinstance(quantity.body, Choice):
            continue
        for name in sorted(names):
            changed = tuple(
                replace(q, body=replace(q.body, options=tuple(o for o in q.body.options if o.name != name)))
                if q == quantity or (isinstance(q.body, Follows) and q.body.quantity == quantity.name)
                else q
                for q in rulebook.quantities
            )
            if changed != rulebook.quantities:
                yield replace(rulebook, quantities=changed)


def shrink(rulebook: Rulebook, still: Callable[[Rulebook], bool]) -> Rulebook:
    """The smallest rulebook found by single steps for which ``still`` holds; it says no to what means nothing."""
    while True:
        for other in smaller(rulebook):
            assert isinstance(other, Rulebook)
            if still(other):
                rulebook = other
                break
        else:
            return rulebook
