"""At which values a free setting has to be tried: its ends, and where a condition or a band of a table turns.

Between two such values the same branches are open, so a result that only rises or only falls in the setting has
its extremes at them. A turn that belongs to one side only is tried just beside it as well: as near as a comparison
can tell apart.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping

import numpy as np

from samesum.evidence.trial.arrays import Array, Table, combined, constant
from samesum.evidence.trial.operations import TIE
from samesum.evidence.trial.plan import Plan
from samesum.evidence.trial.values import Evaluator, Rows, TooMany
from samesum.reading import model as m

MOST_LINES = 240
BESIDE = 1e-9  # of the domain's width, where it cannot be told how near a comparison can tell values apart

Turn = tuple[Array, Array]
"""A value of the setting, and how far beside it a comparison tells it from the value itself."""


def candidates_of(
    plan: Plan, rows: Rows, held: frozenset[str], more: Mapping[str, Array] | None = None
) -> tuple[dict[str, Array], Array]:
    """For each numeric setting that some row leaves free, the values to try (one line a candidate, one column a
    row, rising), and the rows for which they may not be enough. ``more``: further values to try."""
    free = [
        name for name, where in rows.free.items() if name in plan.numeric and name not in held and bool(where.any())
    ]
    unsure = np.zeros(rows.count, dtype=bool)
    found = {name: ends_of(plan, rows, name) for name in free}
    for name, lines in (more or {}).items():
        if name in found:
            inside = np.clip(lines, found[name][0], found[name][1])
            found[name] = np.sort(np.concatenate([found[name], inside]), axis=0)
    turning = {name: list(_turning(plan, name)) for name in free}
    for again in (False, True):
        if again and sum(bool(each) for each in turning.values()) < 2:
            break
        for name in free:
            for node, bound in turning[name]:
                try:
                    turns = _turns(plan, rows, name, node, bound, found, held, unsure)
                except TooMany:
                    unsure |= rows.free[name]
                    continue
                if len(turns) + len(found[name]) > MOST_LINES:
                    unsure |= rows.free[name]
                elif turns:
                    found[name] = _with_turns(found[name], turns)
    return found, unsure


def ends_of(plan: Plan, rows: Rows, name: str) -> Array:
    domain = plan.numeric[name]
    given = ~rows.free[name]
    sides = []
    for bound in (domain.low, domain.high):
        at = rows.numbers[name] if bound is None else np.full(rows.count, float(bound))
        sides.append(np.where(given, rows.numbers[name], at))
    return np.stack(sides)


def _turning(plan: Plan, name: str) -> Iterator[tuple[int, float | None]]:
    """Comparisons that the setting moves, and limits of bands that its number is held against."""
    depends: list[bool] = []
    for node in plan.nodes:
        depends.append((node.kind == "input" and node.name == name) or any(depends[each] for each in node.args))
    for number, node in enumerate(plan.nodes):
        if node.kind == "compare" and depends[number]:
            yield number, None
        elif node.kind == "lookup" and depends[number]:
            table = plan.tables[node.name]
            for place, (arg, key) in enumerate(zip(node.args, table.keys, strict=True)):
                if key.bands and depends[arg]:
                    labels = [row.labels[place] for row in table.rows]
                    limits = {
                        bound for label in labels if isinstance(label, m.Band) for bound in (label.low, label.high)
                    }
                    for limit in sorted(bound for bound in limits if bound is not None):
                        yield arg, float(limit)


def _turns(
    plan: Plan,
    rows: Rows,
    name: str,
    node: int,
    bound: float | None,
    known: Mapping[str, Array],
    held: frozenset[str],
    unsure: Array,
) -> list[Turn]:
    """Where the difference of a comparison is zero between two values known so far. It must be a straight line
    there."""
    lines = known[name]
    points: Array = np.empty((2 * len(lines) - 1, rows.count))
    points[0::2] = lines
    points[1::2] = (lines[1:] + lines[:-1]) / 2
    evaluator = Evaluator(plan, rows, held=held, candidates={**known, name: points})
    if bound is None:
        left, right = (evaluator.number(each) for each in plan.nodes[node].args)
    else:
        left, right = evaluator.number(node), constant(bound)
    difference = combined(np.subtract, left, right)
    terms = [left, right] if bound is not None else [evaluator.scale(each) for each in plan.nodes[node].args]
    scale = combined(lambda x, a, b: np.abs(a) + np.abs(b) + 0 * x, difference, *terms)
    axis = next(
        (place for place, each in enumerate(evaluator.axes) if each.kind == "numeric" and each.name == name), -1
    )
    if axis not in difference.axes:
        return []

    def by_lines(table: Table) -> Array:
        moved = np.moveaxis(table.data, table.axes.index(axis), 0)
        flat = moved.reshape(len(points), -1, moved.shape[-1])
        return np.broadcast_to(flat, (len(points), flat.shape[1], rows.count))

    data = by_lines(difference)
    low, middle, high = data[0:-1:2], data[1::2], data[2::2]
    width = lines[-1] - lines[0]
    clean = ((lines[1:] - lines[:-1]) > 2.5 * BESIDE * width)[:, None, :] & rows.free[name]
    with np.errstate(all="ignore"):
        bent = clean & (np.abs(low + high - 2 * middle) > 1e-9 * (np.abs(low) + np.abs(high)))
        crossing = clean & (low * high < 0)
        share = low / (low - high)
    unsure |= bent.any(axis=(0, 1))
    aside = _beside(lines, data[0::2], by_lines(scale)[0::2]) if scale.axes == difference.axes else None
    usual = BESIDE * width
    found: list[Turn] = []
    # a turn at one of the values known so far: what lies just beside it is another matter
    size = np.nanmax(np.abs(data), axis=0, initial=0.0)
    touching = ((np.abs(data[0::2]) <= 1e-9 * size) & (size > 0)).any(axis=1) & rows.free[name]
    for number, (line, here) in enumerate(zip(lines, touching, strict=True)):
        if here.any():
            near = usual if aside is None else aside[[max(number - 1, 0), min(number, len(aside) - 1)]].max(axis=(0, 1))
            found.append((np.where(here, line, lines[0]), np.where(np.isfinite(near), near, usual)))
    for cell, combination in np.argwhere(crossing.any(axis=2)).tolist():
        here = crossing[cell, combination]
        at = lines[cell] + np.where(here, share[cell, combination], 0) * (lines[cell + 1] - lines[cell])
        near = usual if aside is None else aside[cell, combination]
        found.append((np.where(here, at, lines[0]), np.where(np.isfinite(near), near, usual)))
        if len(found) > MOST_LINES:
            raise TooMany
    return found


def _beside(lines: Array, data: Array, scale: Array) -> Array:
    """Between any two values known so far: how far a comparison's difference has to go to be seen as one (twice
    what it takes for equal), in the setting's own measure."""
    with np.errstate(all="ignore"):
        slope = np.abs(data[1:] - data[:-1]) / (lines[1:] - lines[:-1])[:, None, :]
        return np.asarray(2 * TIE * np.maximum(scale[1:], scale[:-1]) / slope)


def _with_turns(lines: Array, turns: list[Turn]) -> Array:
    """The values known so far with turns, and what lies just beside each, among them."""
    low, high = lines[0], lines[-1]
    more = [np.clip(turn + step * beside, low, high) for turn, beside in turns for step in (-1, 0, 1)]
    made: Array = np.sort(np.concatenate([lines, np.stack(more)]), axis=0)
    return made
