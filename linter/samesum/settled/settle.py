"""A rulebook as it is applied, once what nobody decides any more is put where the decision stood.

Takes a ``Model``, gives a ``Model`` without a choice, setting or judgement that ``takes`` something: a mandated
option's body, the lowest or highest of the options, a prescribed value. What follows such a choice, or asks which
option it took, gets the branch or the answer that goes with it. ``reopened`` is for whoever compares with the truth,
for which the options that are not taken still count.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from fractions import Fraction

from samesum.reading import model as m
from samesum.reading import walk
from samesum.settled.maker import Maker


def settled(model: m.Model) -> m.Model:
    """The model with everything put in its place that takes something; the same model where nothing does."""
    settled_in = [
        quantity
        for quantity in model.quantities
        if any(isinstance(body, m.Choice) and body.takes for body in walk.bodies(quantity.body))
    ]
    inputs: tuple[m.Setting | m.Judgement, ...] = (*model.settings, *model.judgements)
    values = {each.name: each.takes for each in inputs if each.takes is not None}
    if not settled_in and not values:
        return model
    choices = _leaders(model)
    maker = Maker(choices, values, frozenset(choices[name].name for name in _asked_of(model) if name in choices))
    quantities: list[m.Quantity] = []
    for quantity in model.quantities:
        body = maker.body(quantity, quantity.body, quantity.name)
        quantities += [replace(quantity, body=body), *maker.made]
        maker.made.clear()
    return replace(
        model,
        applies=tuple(replace(each, condition=maker.condition(each.condition)) for each in model.applies),
        settings=tuple(each for each in model.settings if each.takes is None),
        judgements=tuple(each for each in model.judgements if each.takes is None),
        constants=(*model.constants, *_constants(model)),
        quantities=tuple(quantities),
    )


@dataclass(frozen=True, slots=True)
class Prescribed:
    """What nobody decides: what each choice takes, by its id without an element's number, and the value of each setting
    and judgement, by its name."""

    choices: Mapping[str, str]
    inputs: Mapping[str, Fraction | str | bool]


def reopened(model: m.Model) -> tuple[m.Model, Prescribed]:
    """The model with every choice, setting and judgement as if somebody decided it, and what the rulebook takes."""
    taken: dict[str, str] = {}

    def body(old: m.Body, id: str) -> m.Body:
        if isinstance(old, m.Choice) and old.takes:
            taken[id] = old.takes
            old = replace(old, takes="")
        return _with_bodies(old, tuple(body(each.body, f"{id}/{each.name}") for each in walk.branches(old)))

    quantities = tuple(replace(each, body=body(each.body, each.name)) for each in model.quantities)
    everyone: tuple[m.Setting | m.Judgement, ...] = (*model.settings, *model.judgements)
    inputs = {each.name: each.takes for each in everyone if each.takes is not None}
    if not taken and not inputs:
        return model, Prescribed({}, {})
    settings = tuple(replace(each, takes=None) for each in model.settings)
    judgements = tuple(replace(each, takes=None) for each in model.judgements)
    reopened = replace(model, quantities=quantities, settings=settings, judgements=judgements)
    return reopened, Prescribed(taken, inputs)


def _constants(model: m.Model) -> Iterator[m.Constant]:
    for setting in model.settings:
        if isinstance(setting.takes, Fraction):
            number = m.Number(setting.takes, setting.unit, setting.about.name_span)
            yield m.Constant(setting.name, setting.unit, number, setting.about)


def _leaders(model: m.Model) -> dict[str, m.Quantity]:
    """By the name of each quantity whose choice nobody makes, or that follows one through any number of others, the
    quantity with that choice."""
    quantities = {quantity.name: quantity for quantity in model.quantities}
    found: dict[str, m.Quantity] = {}
    for quantity in model.quantities:
        leader = quantity
        for _ in model.quantities:  # no longer than that, should a text with mistakes go round in circles
            if isinstance(leader.body, m.Follows) and leader.body.quantity in quantities:
                leader = quantities[leader.body.quantity]
        if isinstance(leader.body, m.Choice) and leader.body.takes:
            found[quantity.name] = leader
    return found


def _asked_of(model: m.Model) -> frozenset[str]:
    """The quantities whose choice something follows, or asks what it took."""
    found: set[str] = set()
    conditions = [each.condition for each in model.applies]
    for quantity in model.quantities:
        for body in walk.bodies(quantity.body):
            if isinstance(body, m.Follows):
                found.add(body.quantity)
            conditions += [condition for each in walk.branches(body) if (condition := walk.condition_of(each))]
    for condition in conditions:
        found |= {each.quantity for each in walk.inside(condition) if isinstance(each, m.Takes)}
    return frozenset(found)


def _with_bodies(body: m.Body, inner: tuple[m.Body, ...]) -> m.Body:
    match body:
        case m.Cases(branches=branches):
            whens = tuple(replace(each, body=new) for each, new in zip(branches, inner, strict=True))
            return replace(body, branches=whens)
        case m.Choice(options=options) | m.Follows(options=options):
            return replace(
                body, options=tuple(replace(each, body=new) for each, new in zip(options, inner, strict=True))
            )
        case _:
            return body
