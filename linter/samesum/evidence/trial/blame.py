"""Who is to blame: what each branch point, judgement and setting moves, and the order in which to close them.

``swing`` lets one of them leave the reference and holds all others; ``left`` holds one of them and lets all others
move. Both are the largest over the projects, so projects that cannot matter any more are not looked at.
"""

from __future__ import annotations

import math
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from samesum.evidence.trial.arrays import Array, Table
from samesum.evidence.trial.deciding import Decide, reference_decision
from samesum.evidence.trial.extremes import find_extremes, find_range, plan_work
from samesum.evidence.trial.figures import Figures
from samesum.evidence.trial.plan import Plan
from samesum.evidence.trial.steps import Work
from samesum.evidence.trial.values import Evaluator, Rows, TooMany
from samesum.reading import model as m

FIRST = 64
SMALL = 1e-12


@dataclass(frozen=True, slots=True)
class Mover:
    """Something that leaves the number to somebody. ``kind``: ``choice``, ``overlap``, ``judgement`` or
    ``setting``; ``general`` is the id without an element's number."""

    id: str
    general: str
    kind: str
    by: m.Decider
    clause: str


@dataclass(frozen=True, slots=True)
class Blame:
    """``swing`` and ``left`` as shares of the reference; None when no project has a reference other than zero, or
    the time was up."""

    mover: Mover
    swing: float | None
    left: float | None


@dataclass(frozen=True, slots=True)
class Closing:
    """The ``left``-over spread after this one, and all before it, are closed (all elements together)."""

    general: str
    left: float


def movers_of(plan: Plan, moving: Sequence[tuple[str, str]]) -> list[Mover]:
    """Everything that leaves a choice in some project, in the rulebook's order."""
    model = plan.graph.model
    names = {name for _, name in moving}
    found = []
    for point in plan.graph.branch_points.values():
        if point.id in names:
            by = point.by or "developer"
            kind = "choice" if point.kind == "choice" else "overlap"
            found.append(Mover(point.id, point.general_id, kind, by, point.clause))
    for setting in model.settings:
        if setting.name in names:
            found.append(Mover(setting.name, setting.name, "setting", setting.by, setting.about.clause))
    for judgement in model.judgements:
        if judgement.name in names:
            found.append(Mover(judgement.name, judgement.name, "judgement", judgement.by, judgement.about.clause))
    return found


def all_movers(figures: Sequence[Figures]) -> list[Mover]:
    """The movers of all batches, each once."""
    found: dict[str, Mover] = {}
    for each in figures:
        for mover in movers_of(each.batch.plan, each.moving):
            found.setdefault(mover.id, mover)
    kinds = ("choice", "overlap", "judgement", "setting")
    return sorted(found.values(), key=lambda mover: kinds.index(mover.kind) > 1)


def find_blame(figures: Sequence[Figures], deadline: float) -> list[Blame]:
    """Swing and what is left of each mover, the largest over all projects."""
    found = []
    remaining = Remaining(figures, deadline)
    for mover in all_movers(figures):
        swing = left = None
        if any(np.isfinite(each.spread).any() for each in figures):
            swing = find_swing(figures, mover, deadline)
            left = remaining.left_over(frozenset({mover.id}))
        found.append(Blame(mover, swing, left))
    return found


@dataclass(slots=True)
class Remaining:
    """What is left when movers are held, for one set of figures. Work on small batches is kept and built upon."""

    figures: Sequence[Figures]
    deadline: float
    _bases: dict[int, Work] = field(default_factory=dict)

    def left_over(self, held: frozenset[str], enough: float = math.inf) -> float | None:
        """The largest spread when some movers are held at the reference; stops looking at ``enough``. None when the
        time was up or it would be too much work."""
        most = 0.0
        order = sorted(range(len(self.figures)), key=lambda place: -_widest(self.figures[place]))
        for place in order:
            each = self.figures[place]
            spread = np.where(np.isfinite(each.spread), each.spread, -1.0)
            rows = np.argsort(-spread, kind="stable")
            start, size = 0, FIRST
            while start < len(rows) and spread[rows[start]] > most and most < enough:
                if time.monotonic() > self.deadline:
                    return None
                part = rows[start : start + size]
                try:
                    if each.batch.rows.count <= FIRST:
                        low, high = find_range(each.batch.plan, each.batch.rows, held, self._base(place))
                        part = np.arange(each.batch.rows.count)
                    else:
                        part = part[spread[part] > most]
                        low, high = find_range(each.batch.plan, each.batch.rows.part(part), held)
                except TooMany:
                    return None
                size_there = np.abs(each.reference.value[part])
                with np.errstate(all="ignore"):
                    left = (high - low) / np.where(size_there > 0, size_there, np.nan)
                most = max(most, float(np.nanmax(left, initial=0.0)))
                start, size = start + size, size * 4
        return 0.0 if most < SMALL else most

    def _base(self, place: int) -> Work:
        if place not in self._bases:
            batch = self.figures[place].batch
            self._bases[place] = plan_work(batch.plan, batch.rows, frozenset())
        return self._bases[place]


def _widest(figures: Figures) -> float:
    return float(np.nanmax(np.where(np.isfinite(figures.spread), figures.spread, -1.0), initial=-1.0))


def closing_order(figures: Sequence[Figures], deadline: float) -> tuple[list[Closing], bool]:
    """Greedy: at each step the one that leaves least. False beside it when the time was up before the end."""
    remaining = Remaining(figures, deadline)
    groups: dict[str, set[str]] = {}
    for mover in all_movers(figures):
        groups.setdefault(mover.general, set()).add(mover.id)
    held: frozenset[str] = frozenset()
    found: list[Closing] = []
    while groups:
        best: tuple[float, str] | None = None
        for general, ids in groups.items():
            left = remaining.left_over(held | ids, math.inf if best is None else best[0])
            if left is None:
                return found, False
            if best is None or left < best[0] - SMALL:
                best = (left, general)
        assert best is not None
        held = held | groups.pop(best[1])
        found.append(Closing(best[1], best[0]))
        if best[0] == 0.0:
            break
    return found, True


# --- swing -----------------------------------------------------------------------------------


def _reach(figures: Figures) -> Array:
    """How far from the reference any route of each row lies, as a share of it; -1 without a reference."""
    reference = figures.reference.value
    with np.errstate(all="ignore"):
        away = np.maximum(figures.highest.value - reference, reference - figures.lowest.value) / np.abs(reference)
    usable = np.isfinite(reference) & (reference != 0) & np.isfinite(away)
    return np.where(usable, away, -1.0)


def find_swing(figures: Sequence[Figures], mover: Mover, deadline: float) -> float | None:
    """The largest change that the mover makes when it alone leaves the reference. None when the time was up."""
    most = 0.0
    reaches = [_reach(each) for each in figures]
    for place in sorted(range(len(figures)), key=lambda place: -float(reaches[place].max(initial=-1.0))):
        each, reach = figures[place], reaches[place]
        if not _can_move(each, mover):
            continue
        rows = np.argsort(-reach, kind="stable")
        start, size = 0, FIRST
        # a hair of slack: where only this one moves, what it reaches is the row's own end
        while start < len(rows) and reach[rows[start]] * (1 + 1e-9) > most:
            if time.monotonic() > deadline:
                return None
            part = rows[start : start + size]
            reference = each.reference.value[part]
            for value in _alternatives(each.batch.plan, each.batch.rows.part(part), mover):
                with np.errstate(all="ignore"):
                    away = np.abs(value - reference) / np.abs(reference)
                most = max(most, float(np.nanmax(np.where(reach[part] >= 0, away, np.nan), initial=0.0)))
            start, size = start + size, size * 4
    return 0.0 if most < SMALL else most


def _can_move(figures: Figures, mover: Mover) -> bool:
    return any(name == mover.id for _, name in figures.moving)


def _alternatives(plan: Plan, rows: Rows, mover: Mover) -> list[Array]:
    """The results when the mover alone leaves the reference, NaN where it cannot."""
    if mover.kind in ("choice", "overlap"):
        if mover.id not in plan.points:
            return []
        count = len(plan.graph.branch_points[mover.id].branches)
        fixed = replace(rows, free={})
        return [_worked_out(plan, fixed, _leaving(plan, mover.id, branch)) for branch in range(count)]
    free = rows.free.get(mover.id)
    if free is None or not free.any():
        return []
    if mover.id in plan.numeric:
        return _setting_ends(plan, rows, mover.id)
    found = []
    if mover.id in plan.named:
        for code in range(len(plan.named[mover.id])):
            codes = np.where(free, code, rows.codes[mover.id])
            inputs = replace(rows, codes={**rows.codes, mover.id: codes}, free={})
            found.append(_worked_out(plan, inputs, reference_decision(plan)))
        return found
    flags = np.where(free, False, rows.flags[mover.id])
    inputs = replace(rows, flags={**rows.flags, mover.id: flags}, free={})
    return [_worked_out(plan, inputs, reference_decision(plan))]


def _setting_ends(plan: Plan, rows: Rows, name: str) -> list[Array]:
    held = frozenset(plan.points) | {each for each in rows.free if each != name}
    try:
        extremes = find_extremes(plan, rows, held)
    except TooMany:
        return []
    return [extremes.lowest.value, extremes.highest.value]


def _leaving(plan: Plan, id: str, branch: int) -> Decide:
    usual = reference_decision(plan)

    def decide(point: str, open_: Sequence[Table], rows: int) -> Array:
        if point != id:
            return usual(point, open_, rows)
        return np.where(np.broadcast_to(open_[branch].data, (rows,)), branch, -1)

    return decide


def _worked_out(plan: Plan, inputs: Rows, decide: Callable[[str, Sequence[Table], int], Array]) -> Array:
    evaluator = Evaluator(plan, inputs, decide=decide)
    return np.broadcast_to(evaluator.number(plan.root).data, (inputs.count,)).astype(np.float64)
