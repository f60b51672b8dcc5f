"""What a developer takes when options lie open: one rule a function, many projects at once.

Each takes what every option would be credited (the result of the whole calculation with that option, in the
result's unit), whether it is open, and its cost in credits; each gives the option taken, by its number.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

Array = npt.NDArray[Any]


@dataclass(frozen=True, slots=True)
class Offer:
    """The options of one choice to the projects of one block, a row an option.

    ``credits``; ``open`` (at least one a project); ``order`` from the cheapest to the dearest, as written where they
    cost the same, closed ones last; ``cost`` in credits (0 without a price); ``truth`` the true credits; ``reference``
    the option that counts as the truth.
    """

    credits: Array
    open: Array
    order: Array
    cost: Array
    truth: Array
    reference: Array

    def at(self, rows: Array, of: Array) -> Array:
        """For each project the entry of ``of`` in its own row."""
        if len(of) == 2:
            return np.asarray(np.where(rows == 0, of[0], of[1]))
        return np.asarray(of[rows, np.arange(len(rows))])


def by_cost(money: Array, open_ones: Array) -> Array:
    """The order in which the options are looked at, for each project."""
    return np.asarray(np.argsort(np.where(open_ones, money, np.inf), axis=0, kind="stable"))


def second_look(offer: Offer) -> Array:
    """Starts with the cheapest; moves on while that gives less than the truth by more than the next one costs; keeps
    the last one tried."""
    return np.asarray(offer.at(tried(offer), offer.order), dtype=np.int8)


def tried(offer: Offer) -> Array:
    """How many options beyond the cheapest a second look goes through."""
    order = offer.order
    place = np.zeros(offer.truth.shape, dtype=np.int64)
    for step in range(1, len(order)):
        before, following = order[step - 1], order[step]
        short = offer.at(before, offer.credits) < offer.truth - offer.at(following, offer.cost)
        # An option that has no result for a project gives it nothing: it looks further.
        short |= ~np.isfinite(offer.at(before, offer.credits))
        moves = (place == step - 1) & short & offer.at(following, offer.open)
        place[moves] = step
    return place


def learned(offer: Offer) -> Array:
    """A later period, after a second look: the best of the options that were tried before, its cost counted."""
    order = offer.order
    known = np.zeros(offer.credits.shape, dtype=bool)
    np.put_along_axis(known, order, np.arange(len(order))[:, np.newaxis] <= tried(offer), axis=0)
    return _best(offer, _worth(offer, known & offer.open), second_look(offer))


def pick_of_all(offer: Offer) -> Array:
    """The option that is worth most, its cost counted; the reference where none is worth more."""
    return _best(offer, _worth(offer, offer.open), offer.reference)


def indifferent(offer: Offer, chance: Array) -> Array:
    """Any of the open options; ``chance`` is uniform on [0, 1)."""
    open_before = np.cumsum(offer.open, axis=0)
    wanted = np.floor(chance * open_before[-1]).astype(np.int64) + 1
    return np.asarray(np.argmax((open_before == wanted) & offer.open, axis=0), dtype=np.int8)


def _worth(offer: Offer, among: Array) -> Array:
    return np.asarray(np.where(among & np.isfinite(offer.credits), offer.credits - offer.cost, -np.inf))


def _best(offer: Offer, worth: Array, otherwise: Array) -> Array:
    best = np.argmax(worth, axis=0)
    better = offer.at(best, worth) > offer.at(otherwise.astype(np.int64), worth)
    return np.asarray(np.where(better, best, otherwise), dtype=np.int8)
