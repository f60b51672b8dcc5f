"""The lowest of a number over a box of inputs, found and proved by dividing the box (branch and bound).

Many problems go side by side. A box whose proved bound cannot beat what was found is dropped; the others are
pinned in every input in which the number only rises or only falls, and halved where the number moves most. Where
conditions must hold besides, boxes in which one fails for certain are dropped, and a box in which one may fail is
pinned only for its bound.
"""

from __future__ import annotations

import time
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from samesum.evidence.trial import intervals as iv
from samesum.evidence.trial.arrays import Array
from samesum.evidence.trial.bounds import Boxes, Ranged, Ranges, domain_boxes
from samesum.evidence.trial.intervals import Interval
from samesum.evidence.trial.plan import Plan

MOST_BOXES = 4_000_000
AT_ONCE = 20_000


@dataclass(frozen=True, slots=True)
class Bracket:
    """Of each problem: ``found`` is reached at ``point`` (infinite where nothing was found), nothing lies below
    ``proved``."""

    found: Array
    proved: Array
    point: Mapping[str, Array]


def lowest_over(
    plan: Plan,
    node: int,
    boxes: Boxes,
    names: tuple[str, ...],
    deadline: float,
    close: float = 1e-9,
    highest: bool = False,
    reached: Array | None = None,
    problems: Array | None = None,
    scale: Array | None = None,
    most: int = MOST_BOXES,
    known: Array | None = None,
    conditions: tuple[int, ...] = (),
) -> Bracket:
    """The lowest (or ``highest``) of a node over each box, splitting the inputs ``names``. Stops when found and
    proved are within ``close`` of each other (relative to what was found), at ``deadline``, or when there are too
    many boxes; what was proved by then stands.

    ``reached``: what the caller knows to be reached, problem by problem; then nothing else is looked for. Without
    it, only one route may be open (``taken`` settles the others), so that a number in the middle of a box is reached.
    ``problems``: the problem of each box, where several boxes belong to one. ``scale``: what ``close`` is
    relative to where a problem's own number is smaller; ``most``: boxes looked at, all in all; ``known``: what is
    reached elsewhere, to be bettered; ``conditions``: nodes that must hold."""
    if problems is None:
        problems = np.arange(boxes.count)
    sign = -1.0 if highest else 1.0
    work = _Division(plan, node, boxes, names, problems, sign, reached, scale, most, known, conditions)
    return work.run(deadline, close)


def range_over_domains(plan: Plan, seconds: float = 5.0, close: float = 1e-9) -> tuple[Bracket, Bracket]:
    """The lowest and highest result over all projects of a rulebook that leaves one route."""
    boxes = domain_boxes(plan)
    names = tuple(name for name in plan.numeric if boxes.low[name][0] < boxes.high[name][0])
    start = time.monotonic()
    return (
        lowest_over(plan, plan.result, boxes, names, start + seconds / 2, close),
        lowest_over(plan, plan.result, boxes, names, start + seconds, close, highest=True),
    )


@dataclass(slots=True)
class _Division:
    plan: Plan
    node: int
    boxes: Boxes
    names: tuple[str, ...]
    problems: Array
    sign: float
    reached: Array | None
    scale: Array | None
    most: int
    known: Array | None = None
    conditions: tuple[int, ...] = ()

    def run(self, deadline: float, close: float) -> Bracket:
        count = int(self.problems.max()) + 1 if len(self.problems) else 0
        start = self.known if self.reached is None else self.reached
        found: Array = (
            np.full(count, np.inf)
            if start is None
            else self.sign * np.where(np.isnan(start), self.sign * np.inf, start)
        )
        point = {name: np.full(count, np.nan) for name in self.names}
        owner = np.arange(self.boxes.count)
        low, high = (
            np.stack([side[name] for name in self.names]).astype(np.float64)
            if self.names
            else np.zeros((0, self.boxes.count))
            for side in (self.boxes.low, self.boxes.high)
        )
        settled: Array = np.full(count, np.inf)
        looked = 0
        bound, low, high, split = self._bounded(owner, low, high)
        self._look(owner, (low + high) / 2, found, point)
        self._look(owner, low, found, point)
        self._look(owner, high, found, point)
        while len(owner):
            best = found[self.problems[owner]]
            with np.errstate(invalid="ignore"):
                least = 1e-300 if self.scale is None else self.scale[self.problems[owner]]
                done = bound >= best - close * np.maximum(np.abs(best), least)
            finished = done | _thin(low, high)
            np.minimum.at(settled, self.problems[owner[finished]], bound[finished])
            keep = ~finished
            owner, low, high, bound, split = owner[keep], low[:, keep], high[:, keep], bound[keep], split[keep]
            looked += len(owner)
            if not len(owner) or time.monotonic() > deadline or looked > self.most or len(owner) > 400_000:
                break
            order = np.argsort(bound, kind="stable")
            now, later = order[:AT_ONCE], order[AT_ONCE:]
            parts = self._halves(owner[now], low[:, now], high[:, now], split[now])
            new = self._bounded(*parts)
            self._look(parts[0], (new[1] + new[2]) / 2, found, point)
            owner = np.concatenate([owner[later], parts[0]])
            bound = np.concatenate([bound[later], np.maximum(new[0], np.concatenate([bound[now], bound[now]]))])
            low = np.concatenate([low[:, later], new[1]], axis=1)
            high = np.concatenate([high[:, later], new[2]], axis=1)
            split = np.concatenate([split[later], new[3]])
        np.minimum.at(settled, self.problems[owner], bound)
        proved = np.minimum(settled, found)
        return Bracket(self.sign * found, self.sign * proved, point)

    def _halves(self, owner: Array, low: Array, high: Array, split: Array) -> tuple[Array, Array, Array]:
        line = np.arange(len(owner))
        middle = (low[split, line] + high[split, line]) / 2
        first, second = high.copy(), low.copy()
        first[split, line] = middle
        second[split, line] = middle
        return (
            np.concatenate([owner, owner]),
            np.concatenate([low, second], axis=1),
            np.concatenate([first, high], axis=1),
        )

    def _inputs(self, owner: Array, low: Array, high: Array) -> Boxes:
        part = self.boxes.part(owner)
        lows, highs = dict(part.low), dict(part.high)
        for place, name in enumerate(self.names):
            lows[name], highs[name] = low[place], high[place]
        return Boxes(len(owner), lows, highs, part.codes, part.flags, part.taken)

    def _ranges(self, owner: Array, low: Array, high: Array, slopes: bool) -> Ranges:
        names = frozenset(self.names) if slopes else frozenset[str]()
        return Ranges(self.plan, self._inputs(owner, low, high), names)

    def _ranged(self, owner: Array, low: Array, high: Array) -> Ranged:
        return self._ranges(owner, low, high, False).number(self.node)

    def _asked(self, ranges: Ranges, size: int) -> tuple[Array, Array]:
        """Boxes in which a condition fails for certain, and those in which one may fail."""
        fails: Array = np.zeros(size, dtype=bool)
        doubtful: Array = np.zeros(size, dtype=bool)
        for each in self.conditions:
            verdict = ranges.verdict(each)
            fails = fails | ~verdict.may
            doubtful = doubtful | verdict.may_not
        return fails, doubtful

    def _bounded(self, owner: Array, low: Array, high: Array) -> tuple[Array, Array, Array, Array]:
        """A lower bound of each box, the box pinned where that loses nothing, and which input to split."""
        size = len(owner)
        ranges = self._ranges(owner, low, high, True)
        ranged = ranges.number(self.node)
        fails, doubtful = self._asked(ranges, size)
        whole_low, whole_high = low, high
        bound = np.broadcast_to(self._low(ranged.value), (size,)).copy()
        low, high = low.copy(), high.copy()
        steep: Array = np.zeros((max(1, len(self.names)), size))
        pinned: Array = np.zeros(size, dtype=bool)
        empty = np.broadcast_to(ranged.value.low > ranged.value.high, (size,))
        bound[empty | fails] = np.inf
        for place, name in enumerate(self.names):
            slope = ranged.slopes.get(name)
            down, up = (np.zeros(size), np.zeros(size)) if slope is None else self._signed(slope, size)
            rising, falling = down >= 0, (up <= 0) & ~(down >= 0)
            pinned |= (rising | falling) & (high[place] > low[place])
            high[place] = np.where(rising, low[place], high[place])
            low[place] = np.where(falling, high[place], low[place])
            width = high[place] - low[place]
            with np.errstate(all="ignore"):
                steepness = np.where(width > 0, np.maximum(np.abs(down), np.abs(up)) * width, 0.0)
            steep[place] = np.where(
                np.isfinite(steepness), steepness, np.where(width > 0, 1e300 * np.minimum(width, 1e6), 0.0)
            )
        if pinned.any():
            again = np.flatnonzero(pinned)
            inner = self._ranged(owner[again], low[:, again], high[:, again])
            bound[again] = np.maximum(bound[again], self._low(inner.value))
        bound = np.maximum(bound, self._mean_value(owner, low, high, ranged, size))
        split = np.argmax(steep, axis=0)
        if doubtful.any():
            low, high = np.where(doubtful, whole_low, low), np.where(doubtful, whole_high, high)
            split = np.where(doubtful, self._widest(owner, low, high), split)
        return bound, low, high, split

    def _widest(self, owner: Array, low: Array, high: Array) -> Array:
        """The input of each box that is widest in proportion to where it began."""
        if not self.names:
            return np.zeros(len(owner), dtype=np.intp)
        whole = np.stack([self.boxes.high[name][owner] - self.boxes.low[name][owner] for name in self.names])
        with np.errstate(all="ignore"):
            return np.asarray(np.argmax(np.where(whole > 0, (high - low) / whole, 0.0), axis=0))

    def _signed(self, slope: Interval, size: int) -> tuple[Array, Array]:
        down, up = np.broadcast_to(slope.low, (size,)), np.broadcast_to(slope.high, (size,))
        return (down, up) if self.sign > 0 else (-up, -down)

    def _low(self, value: Interval) -> Array:
        return value.low if self.sign > 0 else -value.high

    def _mean_value(self, owner: Array, low: Array, high: Array, ranged: Ranged, size: int) -> Array:
        """The number in the middle, and how far its slopes can take it from there."""
        middle = (low + high) / 2
        at = self._ranged(owner, middle, middle).value
        total = Interval(np.broadcast_to(at.low, (size,)), np.broadcast_to(at.high, (size,)))
        with np.errstate(all="ignore"):
            for place, name in enumerate(self.names):
                slope = ranged.slopes.get(name)
                if slope is not None:
                    way = iv.outward(low[place] - middle[place], high[place] - middle[place])
                    still = high[place] == low[place]
                    way = Interval(np.where(still, 0.0, way.low), np.where(still, 0.0, way.high))
                    total = iv.added(total, iv.multiplied(slope, way))
        return np.where(np.isnan(self._low(total)), -np.inf, self._low(total))

    def _look(self, owner: Array, at: Array, found: Array, point: dict[str, Array]) -> None:
        """What the number is at some points: the upper end of its interval there is reached or bettered."""
        if self.reached is not None:
            return
        ranges = self._ranges(owner, at, at, False)
        value = ranges.number(self.node).value
        fails, doubtful = self._asked(ranges, len(owner))
        here = np.broadcast_to(value.high if self.sign > 0 else -value.low, (len(owner),))
        here = np.where(np.isfinite(here) & ~fails & ~doubtful, here, np.inf)
        mine = self.problems[owner]
        order = np.lexsort((here, mine))
        first = order[np.concatenate([[True], np.diff(mine[order]) != 0])] if len(order) else order
        better = first[here[first] < found[mine[first]]]
        found[mine[better]] = here[better]
        for number, name in enumerate(self.names):
            point[name][mine[better]] = at[number, better]


def _thin(low: Array, high: Array) -> Array:
    """Boxes that cannot usefully be halved."""
    if not len(low):
        return np.ones(low.shape[1], dtype=bool)
    narrow = np.all((high - low) <= 4 * np.spacing(np.maximum(np.abs(low), np.abs(high))), axis=0)
    return np.asarray(narrow)
