"""Lowest and highest result of every project with the route that gives each, without listing routes.

Exact: an operation is folded only where its extremes are at the ends of its parts; the route found is replayed,
and its value must be the one that was folded.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from samesum.evidence.routes.replay import route_codes
from samesum.evidence.trial.arrays import Array, Table, picked
from samesum.evidence.trial.bends import BENT, way_of
from samesum.evidence.trial.deciding import decision
from samesum.evidence.trial.folding import allowed_only, fold_all
from samesum.evidence.trial.hulls import Hull, ends_wanted
from samesum.evidence.trial.plan import CONDITIONS, Plan
from samesum.evidence.trial.settings import candidates_of, ends_of
from samesum.evidence.trial.steps import Work
from samesum.evidence.trial.structure import Structure, find_structure
from samesum.evidence.trial.values import Evaluator, Rows, TooMany

LARGE = 4096  # combinations beyond which a shared part may stand for itself
MOST_AT_ONCE = 3_000_000  # cells in one table
GRID = 33
ROUNDS = 26  # each to a quarter: from a grid of 33 to neighbouring floats
STILL = 4  # rounds without a better value after which a smooth extreme is found


@dataclass(frozen=True, slots=True)
class Extreme:
    """One end of each row's range. ``value`` before rounding, NaN where no route has a result. ``route``: branch
    taken by branch point, -1 where not reached. ``inputs``: the rows, settings and judgements as they stand there."""

    value: Array
    route: Mapping[str, Array]
    inputs: Rows


@dataclass(frozen=True, slots=True)
class Extremes:
    """``exact``: whether nothing lies below ``lowest`` or above ``highest``, row by row."""

    lowest: Extreme
    highest: Extreme
    exact: Array


def find_extremes(plan: Plan, rows: Rows, held: frozenset[str] = frozenset()) -> Extremes:
    """Lowest and highest of each row over all routes and free settings. What is ``held`` (branch points by id,
    settings and judgements by name) keeps to the reference. Raises ``TooMany`` when parts share too much.

    A setting in which the result both rises and falls is searched ever more finely around the best values found;
    its rows are not exact until somebody proves a bound."""
    work = plan_work(plan, rows, held)
    per_row = max(1, work.largest)
    if per_row > MOST_AT_ONCE:
        raise TooMany
    size = max(1, MOST_AT_ONCE // per_row)
    if size < rows.count:
        parts = [rows.part(slice(start, start + size)) for start in range(0, rows.count, size)]
        return joined([find_extremes(plan, part, held) for part in parts], list(plan.points))
    bent = _bent(plan, work)
    return _refined(plan, rows, held, bent) if bent else _run(plan, work)


def find_range(plan: Plan, rows: Rows, held: frozenset[str], base: Work | None = None) -> tuple[Array, Array]:
    """Only the lowest and highest values. ``base`` is the work on the same rows with nothing held, if it is at
    hand."""
    if base is None:
        work = plan_work(plan, rows, held)
    else:
        evaluator = base.evaluator.holding(held)
        structure = find_structure(evaluator)
        work = Work(evaluator, structure, base.unsure)
        work.plan_steps()
        if work.largest > LARGE:
            work = _with_parts(evaluator, structure, base.unsure, frozenset(), work)
    if work.largest * rows.count > MOST_AT_ONCE or _bent(plan, work):
        extremes = find_extremes(plan, rows, held)
        return extremes.lowest.value, extremes.highest.value
    with np.errstate(all="ignore"):
        hull = fold_all(work)[-1]
    return np.broadcast_to(hull.low.data, (rows.count,)), np.broadcast_to(hull.high.data, (rows.count,))


def _bent(plan: Plan, work: Work) -> frozenset[str]:
    """Free settings in which the result both rises and falls."""
    return frozenset(
        plan.nodes[number].name
        for number in work.structure.children
        if plan.nodes[number].kind == "input"
        and work.evaluator.is_free(plan.nodes[number].name)
        and way_of(work.structure, number) == BENT
    )


def _refined(plan: Plan, rows: Rows, held: frozenset[str], bent: frozenset[str]) -> Extremes:
    lines = GRID if len(bent) == 1 else 9
    spread = {name: np.linspace(*_domain(plan, rows, name), lines) for name in bent}
    spacing = {name: (each[-1] - each[0]) / (lines - 1) for name, each in spread.items()}
    found: Extremes | None = None
    still = 0
    for number in range(ROUNDS):
        work = plan_work(plan, rows, held, spread, bent)
        if work.largest * rows.count > 4 * MOST_AT_ONCE:
            if rows.count == 1:
                raise TooMany
            halves = [slice(0, rows.count // 2), slice(rows.count // 2, rows.count)]
            return joined([_refined(plan, rows.part(half), held, bent) for half in halves], list(plan.points))
        before, found = found, _run(plan, work)
        still = still + 1 if before is not None and _same_ends(before, found) else 0
        if still >= STILL and number > ROUNDS // 2:
            break
        for name in bent:
            near = [
                extreme.inputs.numbers[name] + step * spacing[name] / 4
                for extreme in (found.lowest, found.highest)
                for step in range(-4, 5)
            ]
            low, high = _domain(plan, rows, name)
            spread[name] = np.clip(np.stack(near), low, high)
            spacing[name] = spacing[name] / 4
    assert found is not None
    moved = np.logical_or.reduce([rows.free[name] for name in bent])
    return Extremes(found.lowest, found.highest, found.exact & ~moved)


def _same_ends(one: Extremes, other: Extremes) -> bool:
    return np.array_equal(one.lowest.value, other.lowest.value, equal_nan=True) and np.array_equal(
        one.highest.value, other.highest.value, equal_nan=True
    )


def _domain(plan: Plan, rows: Rows, name: str) -> tuple[Array, Array]:
    ends = ends_of(plan, rows, name)
    return ends[0], ends[-1]


def plan_work(
    plan: Plan,
    rows: Rows,
    held: frozenset[str],
    more: Mapping[str, Array] | None = None,
    bent: frozenset[str] = frozenset(),
) -> Work:
    """The steps, with shared parts standing for themselves where that keeps tables small. ``more``: further values
    of settings to try; ``bent``: settings that are never taken from end to end."""
    evaluator = Evaluator(plan, rows, held=held)
    evaluator.candidates, unsure = candidates_of(plan, rows, held, more)
    structure = find_structure(evaluator)
    work = Work(evaluator, structure, unsure, bent)
    work.plan_steps()
    if work.largest > LARGE:
        work = _with_parts(evaluator, structure, unsure, bent, work)
    return work


def _with_parts(evaluator: Evaluator, structure: Structure, unsure: Array, bent: frozenset[str], work: Work) -> Work:
    """Lets shared parts stand for themselves, the largest first, as long as that makes tables smaller."""
    uses: dict[int, int] = {}
    for inner in structure.children.values():
        for each in inner:
            uses[each] = uses.get(each, 0) + 1
    leaves = [axis.node for axis in evaluator.axes]
    candidates = []
    for number, count in uses.items():
        kind = structure.plan.nodes[number].kind
        if count < 2 or number in structure.full or kind in CONDITIONS or kind in ("number", "input", "lookup"):
            continue
        inside = sum(structure.dominates(number, leaf) for leaf in leaves if leaf in structure.dominator)
        way = way_of(structure, number)
        if inside > 1 and way is not None and way.up is not None:
            candidates.append((inside, number))
    for _, number in sorted(candidates, reverse=True):
        structure.cut([number])
        again = Work(evaluator, structure, unsure, bent)
        again.plan_steps()
        if again.largest < work.largest:
            work = again
        else:
            structure.uncut(number)
        if work.largest <= LARGE:
            break
    final = Work(evaluator, structure, unsure, bent)
    final.plan_steps()
    return final


def _run(plan: Plan, work: Work) -> Extremes:
    with np.errstate(all="ignore"):
        hulls = fold_all(work)
        root = work.steps[-1].out
        found = [_backward(plan, work, hulls, root, high) for high in (False, True)]
    low, high = hulls[root].low, hulls[root].high
    rows = work.evaluator.rows.count
    agrees = np.ones(rows, dtype=bool)
    for extreme, table in zip(found, (low, high), strict=True):
        folded = np.broadcast_to(table.data, (rows,))
        same = np.abs(extreme.value - folded) <= 1e-9 * np.maximum(np.abs(folded), 1e-9)
        agrees &= same | np.isnan(folded)
        extreme.value[np.isnan(folded)] = np.nan
    return Extremes(found[0], found[1], agrees & ~work.unsure)


# --- backward ------------------------------------------------------------------------------


def _backward(plan: Plan, work: Work, hulls: list[Hull], root: int, high: bool) -> Extreme:
    """Which place each axis takes for one end of each row, read off the work from the last step to the first."""
    evaluator = work.evaluator
    rows = evaluator.rows.count
    places: dict[int, Array] = {}
    wants: dict[int, Array] = {root: np.full(rows, 2 if high else 1, dtype=np.int8)}
    numbers = dict(evaluator.rows.numbers)

    def ask(slot: int, want: Array) -> None:
        if not hulls[slot].thin:
            known = wants.get(slot)
            wants[slot] = want if known is None else np.where(want > 0, want, known)

    def ends(slot: int) -> tuple[Array, Array]:
        low = picked(hulls[slot].low, places, rows)
        return low, low if hulls[slot].thin else picked(hulls[slot].high, places, rows)

    for step in reversed(work.steps):
        if step.kind == "part":
            want = np.where(places[step.axes[0]] == 1, 2, 1).astype(np.int8)
            ask(step.inputs[0], want)
            continue
        want = wants.pop(step.out, np.zeros(rows, dtype=np.int8))
        if step.kind == "fold":
            inner = hulls[step.inputs[0]]
            _choose(evaluator, inner, step.axes, want == 2, places, rows)
            ask(step.inputs[0], want)
        elif step.kind == "wide":
            values = evaluator.candidates[step.node.name]
            numbers[step.node.name] = np.where(want == 2, values[-1], values[0])
        elif step.kind == "guard":
            ask(step.inputs[0], want)
        elif step.kind == "select":
            state = evaluator.state(step.node.args[0])
            if state.codes is not None:
                taken = picked(state.codes, places, rows)
            else:
                assert state.axis is not None
                taken = places[state.axis]
            for place, slot in zip(step.places, step.inputs, strict=True):
                ask(slot, np.where(taken == place, want, 0).astype(np.int8))
        elif step.kind == "apply" and any(not hulls[slot].thin for slot in step.inputs):
            pairs = [ends(slot) for slot in step.inputs]
            asked = ends_wanted(step.node, [low for low, _ in pairs], [top for _, top in pairs], want == 2)
            for slot, top in zip(step.inputs, asked, strict=True):
                ask(slot, np.where(want > 0, np.where(top, 2, 1), 0).astype(np.int8))
    return _replayed(plan, evaluator, places, numbers)


def _choose(
    evaluator: Evaluator, inner: Hull, axes: tuple[int, ...], high: Array, places: dict[int, Array], rows: int
) -> None:
    """The place of each folded axis that gives the end wanted, given where the other axes stand."""
    for axis in axes:
        allowed = evaluator.axes[axis].allowed
        places[axis] = np.zeros(rows, dtype=np.intp) if allowed is None else np.argmax(allowed, axis=0)
    axes = tuple(axis for axis in axes if axis in inner.low.axes or axis in inner.high.axes)
    if not axes:
        return
    found: Array | None = None
    none = np.ones(rows, dtype=bool)
    for side in (False, True) if not inner.thin else (False,):
        table = allowed_only(evaluator, inner.high if side else inner.low, axes)
        kept = tuple(axis for axis in table.axes if axis not in axes)
        order = [table.axes.index(axis) for axis in (*kept, *axes)]
        moved = table.data.transpose(*order, len(table.axes))
        shape = moved.shape[len(kept) : -1]
        line = np.arange(rows) if moved.shape[-1] != 1 else np.zeros(rows, dtype=np.intp)
        if kept:
            flat = moved.reshape(*moved.shape[: len(kept)], -1, moved.shape[-1])
            index: Any = (*(places[axis] for axis in kept), slice(None), line)
            cut = flat[index]
        else:
            cut = moved.reshape(-1, moved.shape[-1])[:, line].T
        none &= np.isnan(cut).all(axis=1)
        lowest = np.argmin(np.where(np.isnan(cut), np.inf, cut), axis=1)
        highest = np.argmax(np.where(np.isnan(cut), -np.inf, cut), axis=1)
        mine = np.where(high, highest, lowest)
        found = mine if found is None else np.where(high, mine, found)
    assert found is not None
    for axis, place in zip(axes, np.unravel_index(found, shape), strict=True):
        places[axis] = np.where(none, places[axis], place)


def _replayed(plan: Plan, evaluator: Evaluator, places: Mapping[int, Array], numbers: dict[str, Array]) -> Extreme:
    """The value and route of each row when every axis stands at its place."""
    rows = evaluator.rows
    codes: dict[str, Array] = {}
    flags, named = dict(rows.flags), dict(rows.codes)
    for number, axis in enumerate(evaluator.axes):
        place = places.get(number)
        if place is None:
            continue
        if axis.kind == "point":
            codes[axis.name] = place
        elif axis.kind == "judgement":
            flags[axis.name] = place == 0
        elif axis.kind == "named":
            named[axis.name] = place
        elif axis.kind == "numeric":
            numbers[axis.name] = picked(Table((number,), evaluator.candidates[axis.name]), places, rows.count)
    inputs = Rows(rows.count, numbers, named, flags, {})
    replay = Evaluator(plan, inputs, decide=decision(codes, plan))
    value = np.array(np.broadcast_to(replay.number(plan.root).data, (rows.count,)), dtype=np.float64)
    return Extreme(value, route_codes(replay), inputs)


def joined(parts: list[Extremes], order: Sequence[str]) -> Extremes:
    def one(extremes: list[Extreme]) -> Extreme:
        reached = {name for each in extremes for name in each.route}
        names = [name for name in order if name in reached]
        route = {
            name: np.concatenate(
                [each.route.get(name, np.full(len(each.value), -1, dtype=np.int16)) for each in extremes]
            )
            for name in names
        }
        first = extremes[0].inputs

        def glued(which: str) -> dict[str, Array]:
            return {
                name: np.concatenate([getattr(each.inputs, which)[name] for each in extremes])
                for name in getattr(first, which)
            }

        count = sum(each.inputs.count for each in extremes)
        inputs = Rows(count, glued("numbers"), glued("codes"), glued("flags"), {})
        return Extreme(np.concatenate([each.value for each in extremes]), route, inputs)

    return Extremes(
        one([each.lowest for each in parts]),
        one([each.highest for each in parts]),
        np.concatenate([each.exact for each in parts]),
    )
