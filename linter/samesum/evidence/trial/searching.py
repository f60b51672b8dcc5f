"""Extremes where they cannot be read off: a search for what is reached, and bounds for what is not."""

from __future__ import annotations

import math
import time
from collections.abc import Mapping
from dataclasses import replace

import numpy as np

from samesum.evidence.routes.replay import route_codes
from samesum.evidence.trial.arrays import Array
from samesum.evidence.trial.bounds import Boxes
from samesum.evidence.trial.deciding import decision, preferred
from samesum.evidence.trial.extremes import Extreme, Extremes
from samesum.evidence.trial.plan import Plan
from samesum.evidence.trial.settings import candidates_of
from samesum.evidence.trial.structure import find_structure
from samesum.evidence.trial.values import Evaluator, Rows, TooMany

MOST_WAYS = 512
NEAR = 1e-12  # what is found and what is proved are one number: the rounding of floats, and no more


def search(plan: Plan, rows: Rows, start: Extremes | None, deadline: float) -> tuple[Extremes, Array, Array]:
    """The best that was found from ``start`` (or the reference) by changing one decision at a time, and proved
    bounds. ``exact`` where the two meet."""
    found = []
    for high in (False, True):
        first = None if start is None else (start.highest if high else start.lowest)
        found.append(first if first is not None else _climbed(plan, rows, None, high, deadline))
    low, high_bound = _proved(plan, rows, found[0].value, found[1].value, deadline)
    if start is not None:
        low = np.where(start.exact, start.lowest.value, low)
        high_bound = np.where(start.exact, start.highest.value, high_bound)
    meet = np.ones(rows.count, dtype=bool)
    for side, bound in enumerate((low, high_bound)):
        value, other = found[side].value, found[1 - side].value
        meet &= np.abs(value - bound) <= NEAR * _scale(value, other)
    exact = meet if start is None else meet | start.exact
    return Extremes(found[0], found[1], exact), low, high_bound


def _proved(plan: Plan, rows: Rows, lowest: Array, highest: Array, deadline: float) -> tuple[Array, Array]:
    """What no route and no setting can get below or above, row by row."""
    from samesum.evidence.trial.dividing import lowest_over

    boxes, names = open_boxes(plan, rows)
    boxes, problems = _routes_apart(plan, rows, boxes)
    left = (deadline - time.monotonic()) / 2
    sides = []
    for high, reached, other in ((False, lowest, highest), (True, highest, lowest)):
        until = time.monotonic() + left if not high else deadline
        bracket = lowest_over(
            plan, plan.root, boxes, names, until, NEAR / 2, highest=high, reached=reached, problems=problems,
            scale=_scale(reached, other),
        )  # fmt: skip
        sides.append(bracket.proved)
    return sides[0], sides[1]


def _scale(value: Array, other: Array) -> Array:
    """What differences from one end are small in proportion to: its size, or a hundredth of the other end's, since
    both come of the same numbers."""
    return np.nan_to_num(np.maximum(np.abs(value), np.abs(other) / 100), nan=1.0) + 1e-9


def _routes_apart(plan: Plan, rows: Rows, boxes: Boxes) -> tuple[Boxes, Array]:
    """A box for each way of deciding, where these are few: then nothing in a box is decided twice."""
    evaluator = Evaluator(plan, rows)
    evaluator.candidates, _ = candidates_of(plan, rows, frozenset())
    try:
        find_structure(evaluator)
    except TooMany:
        return boxes, np.arange(rows.count)
    axes = [axis for axis in evaluator.axes if axis.kind in ("point", "judgement", "named")]
    ways = math.prod(axis.size for axis in axes)
    if ways > MOST_WAYS:
        return boxes, np.arange(rows.count)
    problems = np.repeat(np.arange(rows.count), ways)
    made = boxes.part(problems)
    which = np.tile(np.arange(ways), rows.count)
    taken, codes, flags = dict(made.taken), dict(made.codes), dict(made.flags)
    keep = np.ones(len(problems), dtype=bool)
    for axis in axes:
        place = which % axis.size
        which = which // axis.size
        if axis.kind == "point":
            taken[axis.name] = place
        elif axis.kind == "named":
            keep &= codes[axis.name][place, np.arange(len(place))]
            codes[axis.name] = np.arange(axis.size)[:, None] == place[None, :]
        else:
            may, may_not = flags[axis.name]
            keep &= np.where(place == 0, may, may_not)
            flags[axis.name] = (place == 0, place == 1)
    kept = np.flatnonzero(keep)
    return Boxes(made.count, made.low, made.high, codes, flags, taken).part(kept), problems[kept]


def open_boxes(plan: Plan, rows: Rows) -> tuple[Boxes, tuple[str, ...]]:
    """Boxes that hold everything left open in each row, and the settings that can be split."""
    names = tuple(name for name, where in rows.free.items() if name in plan.numeric and where.any())
    low, high = dict(rows.numbers), dict(rows.numbers)
    for name in names:
        domain = plan.numeric[name]
        free = rows.free[name]
        low[name] = np.where(free, -np.inf if domain.low is None else float(domain.low), low[name])
        high[name] = np.where(free, np.inf if domain.high is None else float(domain.high), high[name])
    codes = {}
    for name, each in rows.codes.items():
        codes[name] = np.arange(len(plan.named[name]))[:, None] == each[None, :]
        if name in rows.free:
            codes[name] = codes[name] | rows.free[name][None, :]
    flags = {}
    for name, each in rows.flags.items():
        free = rows.free.get(name, np.zeros(rows.count, dtype=bool))
        flags[name] = (each | free, ~each | free)
    return Boxes(rows.count, low, high, codes, flags), names


def _climbed(plan: Plan, rows: Rows, first: Extreme | None, high: bool, deadline: float) -> Extreme:
    codes: dict[str, Array] = {} if first is None else {id: each.astype(np.int64) for id, each in first.route.items()}
    inputs = replace(rows, free={}) if first is None else first.inputs
    value = _value(plan, inputs, codes)
    sign = 1.0 if high else -1.0
    for _ in range(4):
        better_anywhere = False
        for kind, name, options in _moves(plan, rows):
            for option in options:
                if time.monotonic() > deadline:
                    return _end(plan, inputs, codes)
                tried_codes, tried_inputs = codes, inputs
                if kind == "point":
                    tried_codes = {**codes, name: np.full(rows.count, option)}
                else:
                    tried_inputs = _moved(plan, rows, inputs, kind, name, option)
                new = _value(plan, tried_inputs, tried_codes)
                better = (sign * new > sign * value + 1e-12 * np.abs(value)) | (np.isnan(value) & ~np.isnan(new))
                if not better.any():
                    continue
                better_anywhere = True
                value = np.where(better, new, value)
                if kind == "point":
                    before = codes.get(name, np.full(rows.count, -1))
                    codes = {**codes, name: np.where(better, option, before)}
                else:
                    inputs = _mixed(inputs, tried_inputs, better)
        if not better_anywhere:
            break
    return _end(plan, inputs, codes)


def _moves(plan: Plan, rows: Rows) -> list[tuple[str, str, list[int]]]:
    found: list[tuple[str, str, list[int]]] = []
    for id in plan.points:
        point = plan.graph.branch_points[id]
        if not point.leader and point.kind != "cases in order" and len(point.branches) > 1:
            found.append(("point", id, preferred(plan, id)))
    for name, where in rows.free.items():
        if where.any():
            if name in plan.numeric:
                found.append(("numeric", name, list(range(9))))
            elif name in plan.named:
                found.append(("named", name, list(range(len(plan.named[name])))))
            else:
                found.append(("judgement", name, [0, 1]))
    return found


def _moved(plan: Plan, rows: Rows, inputs: Rows, kind: str, name: str, option: int) -> Rows:
    free = rows.free[name]
    if kind == "judgement":
        return replace(inputs, flags={**inputs.flags, name: np.where(free, option == 1, inputs.flags[name])})
    if kind == "named":
        return replace(inputs, codes={**inputs.codes, name: np.where(free, option, inputs.codes[name])})
    domain = plan.numeric[name]
    if domain.low is None or domain.high is None:
        return inputs
    at = float(domain.low) + option / 8 * float(domain.high - domain.low)
    return replace(inputs, numbers={**inputs.numbers, name: np.where(free, at, inputs.numbers[name])})


def _mixed(one: Rows, other: Rows, where: Array) -> Rows:
    def mixed(a: Mapping[str, Array], b: Mapping[str, Array]) -> dict[str, Array]:
        return {name: each if b[name] is each else np.where(where, b[name], each) for name, each in a.items()}

    return Rows(
        one.count, mixed(one.numbers, other.numbers), mixed(one.codes, other.codes), mixed(one.flags, other.flags), {}
    )


def _value(plan: Plan, inputs: Rows, codes: Mapping[str, Array]) -> Array:
    evaluator = Evaluator(plan, inputs, decide=decision(codes, plan))
    return np.broadcast_to(evaluator.number(plan.root).data, (inputs.count,)).astype(np.float64)


def _end(plan: Plan, inputs: Rows, codes: Mapping[str, Array]) -> Extreme:
    evaluator = Evaluator(plan, inputs, decide=decision(codes, plan))
    value = np.broadcast_to(evaluator.number(plan.root).data, (inputs.count,)).astype(np.float64)
    return Extreme(value, route_codes(evaluator), inputs)
