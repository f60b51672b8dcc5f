"""The figures of every project of a batch: routes, distinct results, lowest, highest, reference, spread."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Any

import numpy as np

from samesum.evidence.choosing.batches import Batch
from samesum.evidence.routes.replay import route_codes
from samesum.evidence.trial.arrays import Array, Table, spread_out, union
from samesum.evidence.trial.deciding import reference_decision
from samesum.evidence.trial.extremes import Extreme, Extremes, find_extremes, plan_work
from samesum.evidence.trial.open_routes import count_routes
from samesum.evidence.trial.operations import nearest_whole
from samesum.evidence.trial.plan import Plan
from samesum.evidence.trial.searching import search
from samesum.evidence.trial.values import Evaluator, Rows, TooMany
from samesum.reading import model as m

MOST_LISTED = 65_536  # results of one project that are told apart
NO_COUNT = -1


@dataclass(frozen=True, slots=True)
class Figures:
    """One line a project. ``routes`` is -1 where it could not be counted, ``distinct`` -1 where results are too many to
    tell apart or a setting is free. ``proved``: between what the result is proved to lie where ``complete`` is false.
    ``moving``: what leaves a choice in some project (kind, id or name). ``issued``: lowest, highest and reference after
    rounding."""

    batch: Batch
    outside: Array
    routes: Array
    distinct: Array
    lowest: Extreme
    highest: Extreme
    reference: Extreme
    complete: Array
    proved_low: Array
    proved_high: Array
    spread: Array
    moving: tuple[tuple[str, str], ...]
    issued: tuple[Array, Array, Array]


def figures_of(batch: Batch, deadline: float) -> Figures:
    """All figures of a batch. ``deadline`` (monotonic clock) bounds the search where an exact answer would be too
    much work."""
    plan, rows = batch.plan, batch.rows
    result = plan.graph.model.result
    assert result is not None
    reference = reference_of(plan, rows)
    outside, routes, distinct, moving = _counted(plan, rows)
    try:
        extremes = find_extremes(plan, rows)
        proved_low, proved_high = extremes.lowest.value, extremes.highest.value
        if not extremes.exact.all():
            extremes, proved_low, proved_high = search(plan, rows, extremes, deadline)
    except TooMany:
        extremes, proved_low, proved_high = search(plan, rows, None, deadline)
    spread = spread_of(extremes, reference)
    return Figures(
        batch,
        outside,
        routes,
        distinct,
        extremes.lowest,
        extremes.highest,
        reference,
        extremes.exact,
        proved_low,
        proved_high,
        spread,
        moving,
        (
            issued(extremes.lowest.value, result),
            issued(extremes.highest.value, result),
            issued(reference.value, result),
        ),
    )


def spread_of(extremes: Extremes, reference: Extreme) -> Array:
    """(highest − lowest) / |reference|; NaN without a reference other than zero."""
    size = np.abs(reference.value)
    with np.errstate(all="ignore"):
        found = (extremes.highest.value - extremes.lowest.value) / np.where(size > 0, size, np.nan)
    return np.asarray(found)


def reference_of(plan: Plan, rows: Rows) -> Extreme:
    """Every choice on its reference, settings half-way or as given, judgements yes or as given."""
    fixed = replace(rows, free={})
    evaluator = Evaluator(plan, fixed, decide=reference_decision(plan))
    value = np.broadcast_to(evaluator.number(plan.root).data, (rows.count,)).astype(np.float64)
    return Extreme(value, route_codes(evaluator), fixed)


def _counted(plan: Plan, rows: Rows) -> tuple[Array, Array, Array, tuple[tuple[str, str], ...]]:
    outside: list[Array] = []
    routes: list[Array] = []
    distinct: list[Array] = []
    moving: dict[tuple[str, str], None] = {}
    size = min(max(1, rows.count), 4096)
    for start in range(0, rows.count, size):
        part = rows.part(slice(start, start + size))
        blank = np.full(part.count, NO_COUNT)
        try:
            work = plan_work(plan, part, frozenset())
        except TooMany:
            outside.append(np.zeros(part.count, dtype=bool))
            routes.append(blank)
            distinct.append(blank)
            moving.update(dict.fromkeys(_all_moving(plan, part)))
            continue
        evaluator = work.evaluator
        outside.append(_outside(evaluator))
        moving.update({(axis.kind, axis.name): None for axis in evaluator.axes if axis.kind != "part"})
        wide = [step.node.name for step in work.steps if step.kind == "wide"]
        moving.update({("numeric", name): None for name in wide})
        try:
            routes.append(count_routes(evaluator, work.structure))
        except TooMany:
            routes.append(blank)
        numeric = {*wide, *(axis.name for axis in evaluator.axes if axis.kind == "numeric")}
        free = np.zeros(part.count, dtype=bool)
        for name in numeric:
            free |= part.free[name]
        distinct.append(blank if free.all() else np.where(free, NO_COUNT, _distinct(evaluator)))
    return np.concatenate(outside), np.concatenate(routes), np.concatenate(distinct), tuple(moving)


def _all_moving(plan: Plan, rows: Rows) -> list[tuple[str, str]]:
    """Everything that may leave a choice, where conditions could not be worked out together."""
    found = [("point", id) for id in plan.points if not plan.graph.branch_points[id].leader]
    for name, where in rows.free.items():
        if where.any():
            found.append(("numeric" if name in plan.numeric else "named" if name in plan.named else "judgement", name))
    return found


def _outside(evaluator: Evaluator) -> Array:
    """Rows for which applicability fails whatever is decided."""
    plan, rows = evaluator.plan, evaluator.rows
    root = plan.nodes[plan.root]
    if root.kind != "guard":
        return np.zeros(rows.count, dtype=bool)
    parts: list[Table] = []
    for each in root.args[1:]:
        truth = evaluator.truth(each)
        parts.append(truth.holds)
        if truth.valid is not None:
            parts.append(truth.valid)
    axes = union(parts)
    parts += [Table((axis,), allowed) for axis in axes if (allowed := evaluator.axes[axis].allowed) is not None]
    inside: Any = np.array(True)
    for part in parts:
        inside = inside & spread_out(part, axes)
    folded = inside.reshape(-1, inside.shape[-1]).any(axis=0)
    return np.broadcast_to(~folded, (rows.count,))


def _distinct(evaluator: Evaluator) -> Array:
    """How many different results each row has after rounding."""
    plan, rows = evaluator.plan, evaluator.rows
    blank = np.full(rows.count, NO_COUNT)
    try:
        table = evaluator.number(plan.root)
    except TooMany:
        return blank
    if table.cells > MOST_LISTED or table.cells * rows.count > 1 << 24:
        return blank
    for axis in table.axes:
        allowed = evaluator.axes[axis].allowed
        if allowed is not None:
            axes = union([table, Table((axis,), allowed)])
            data = np.where(spread_out(Table((axis,), allowed), axes), spread_out(table, axes), np.nan)
            table = Table(axes, data)
    values = np.broadcast_to(table.data.reshape(-1, table.data.shape[-1]), (table.cells, rows.count))
    result = plan.graph.model.result
    assert result is not None
    ordered = np.sort(issued(values, result), axis=0)
    known = ~np.isnan(ordered)
    with np.errstate(all="ignore"):
        apart = np.diff(ordered, axis=0) > 1e-9 * np.maximum(np.abs(ordered[1:]), 1e-9)
    return np.asarray(known[0].astype(np.int64) + (apart & known[1:]).sum(axis=0))


def issued(values: Array, result: m.Result) -> Array:
    """After the result's own rounding. A value within a billionth of a step's end is taken to stand on it."""
    if not result.rounding or not result.step:
        return values
    step = Fraction(result.step)
    with np.errstate(all="ignore"):
        steps = values * (float(step.denominator) / float(step.numerator))
        ends = np.round(steps * 2) / 2
        steps = np.where(np.abs(steps - ends) < np.maximum(1e-9, 1e-13 * np.abs(steps)), ends, steps)
        if result.rounding == "nearest":
            whole = nearest_whole(steps)
        else:
            whole = np.floor(steps) if result.rounding == "down" else np.ceil(steps)
        return np.asarray(whole * float(step.numerator) / float(step.denominator) + 0.0)


def codes_of(extreme: Extreme, row: int) -> Mapping[str, int]:
    """The route of one row: {branch point: branch}."""
    return {id: int(codes[row]) for id, codes in extreme.route.items() if codes[row] >= 0}
