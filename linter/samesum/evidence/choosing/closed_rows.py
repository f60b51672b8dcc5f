"""The closed forms of one choice, weighted by what it is worth in each project of a block.

Where the result is T + S e in the error e of what was taken, a project is over-issued S × the formula's value; S is
read off by working the rulebook out once more with e = 1.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence

import numpy as np

from samesum.evidence.choosing import closed_forms as forms
from samesum.evidence.choosing.behaviours import Offer
from samesum.evidence.choosing.bench import Alone, Array
from samesum.evidence.choosing.closed_forms import Noise
from samesum.evidence.choosing.linear import linear_in
from samesum.evidence.choosing.tally import tally
from samesum.reading import model as m


def closed_rows(one: Alone, found: Mapping[str, tuple[Offer, list[Array]]]) -> None:
    """Adds the rows (latitude, behaviour, option, "closed") of a choice for which the formulas hold."""
    bench, latitude = one.bench, one.latitude
    noises, correlation = noises_of(one)
    if noises is None or not linear_in(bench.program, one.points) or len(found) != len(one.points):
        return
    extra: dict[tuple[str, str], Array | None] = {}
    for id in one.points:
        worth = slope(one, id)
        bench.sums.tallies[latitude.id, "weight", id, "closed"] = tally(bench.truth + worth, bench.truth)
        for key, value in _over_issued(noises, correlation, found[id][0], worth, bench.terms.price).items():
            if key[0] == "lowest" and not _one_way(one, id, worth):
                value = None
            if key not in extra:
                extra[key] = value
            else:
                before = extra[key]
                extra[key] = None if before is None or value is None else before + value
    for (behaviour, option), credited in extra.items():
        if credited is not None:
            number = int(option) if option else -1
            name = latitude.candidates[number] if option else ""
            bench.sums.tallies[latitude.id, behaviour, name, "closed"] = tally(bench.truth + credited, bench.truth)


def _one_way(one: Alone, id: str, worth: Array) -> bool:
    """Whether the rule that takes the lowest (or highest) value takes what credits least in every project."""
    value = np.asarray(one.bench.truth_values[one.bench.program.selects[id]])
    return bool(np.all(np.sign(worth) * np.sign(value) * one.latitude.leaning >= 0)) and one.latitude.leaning != 0


def noises_of(one: Alone) -> tuple[list[Noise] | None, float]:
    """The options' errors and their correlation; None where an option states none, or is not always open, or where a
    deduction against the choice stands in the text."""
    body = one.bench.program.choosing[one.points[0]].point.body
    if not isinstance(body, m.Choice) or one.latitude.withheld:
        return None, 0.0
    if any((option.error is None and option.bias is None) or option.only_when for option in body.options):
        return None, 0.0
    if any(one.bench.program.choosing[one.points[0]].nested):
        return None, 0.0
    noises = [Noise(float(option.bias or 0), float(option.error or 0)) for option in body.options]
    return noises, float(body.correlated or 0)


def slope(one: Alone, id: str) -> Array:
    """S of each project: what an error of 1 in what this point gives adds to the result."""
    reference = one.latitude.reference
    ones = np.ones(one.bench.truth.shape)
    return one.credited({id: reference}, {(id, reference): ones}) - one.bench.full(one.base)


def _over_issued(
    noises: Sequence[Noise], correlation: float, offer: Offer, worth: Array, price: float | None
) -> dict[tuple[str, str], Array | None]:
    """Credits beyond the truth, a project at a time, by behaviour and option; None where no formula holds."""
    made: dict[tuple[str, str], Array | None] = {}
    for number, noise in enumerate(noises):
        made["mandated", str(number)] = noise.bias * worth
    made["indifferent", ""] = forms.indifferent(noises) * worth
    made["lowest", ""] = _signed(lambda some: forms.lowest_of_all(some, correlation), noises, worth)
    costly = bool(price) and bool(np.any(offer.cost))
    if not costly:
        made["pick of all", ""] = _signed(lambda some: forms.pick_of_all(some, correlation), noises, worth)
    elif len(noises) == 2:
        made["pick of all", ""] = _two(forms.pick_of_two_each, noises, correlation, offer.cost, worth)
    else:
        made["pick of all", ""] = None
    made["second look", ""] = _looks(noises, correlation, offer, worth, costly)
    return made


def _signed(form: Callable[[Sequence[Noise]], float], noises: Sequence[Noise], worth: Array) -> Array | None:
    """The form's value × S; where S is negative (an emission) the errors count the other way round."""
    try:
        up = form(noises)
        down = form([Noise(-noise.bias, noise.error) for noise in noises]) if np.any(worth < 0) else 0.0
    except ValueError:
        return None
    return np.where(worth >= 0, up, down) * np.abs(worth)


Two = Callable[[Noise, Noise, float, Array], Array]


def _two(form: Two, noises: Sequence[Noise], correlation: float, costs: Array, worth: Array) -> Array:
    """A two-option form with each project's own cost, in units of S."""
    size = np.where(worth == 0, 1.0, np.abs(worth))
    first, second = noises
    up = form(first, second, correlation, (costs[1] - costs[0]) / size)
    mirrored = Noise(-first.bias, first.error), Noise(-second.bias, second.error)
    down = form(*mirrored, correlation, (costs[1] - costs[0]) / size) if np.any(worth < 0) else up
    return np.where(worth >= 0, up, down) * np.abs(worth)


def _looks(noises: Sequence[Noise], correlation: float, offer: Offer, worth: Array, costly: bool) -> Array | None:
    """The second look, for each order in which the options stand by cost."""
    orders, which = np.unique(offer.order, axis=1, return_inverse=True)
    made = np.zeros(worth.shape)
    for number in range(orders.shape[1]):
        order = orders[:, number]
        among = np.ravel(which) == number
        inner = [noises[place] for place in order]
        if not costly:
            value = _signed(lambda some: forms.looks_in_order(some, correlation), inner, worth[among])
        elif len(inner) == 2:
            costs = np.array([np.zeros(int(among.sum())), offer.cost[order[1]][among]])
            value = _two(forms.second_look_each, inner, correlation, costs, worth[among])
        else:
            value = None
        if value is None:
            return None
        made[among] = value
    return made
