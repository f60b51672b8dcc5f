"""The work on extremes, step by step from the inputs to the result: lowest and highest of every slot."""

from __future__ import annotations

import numpy as np

from samesum.evidence.trial.arrays import Table, at, combined, reduced, stacked, where_code
from samesum.evidence.trial.hulls import Hull, applied
from samesum.evidence.trial.steps import Step, Work
from samesum.evidence.trial.values import Evaluator


def fold_all(work: Work) -> list[Hull]:
    hulls: list[Hull] = []
    for step in work.steps:
        hulls.append(_done(work, step, hulls))
    return hulls


def _done(work: Work, step: Step, hulls: list[Hull]) -> Hull:
    evaluator = work.evaluator
    match step.kind:
        case "given":
            table = evaluator.number(step.number)
            return Hull(table, table)
        case "wide":
            values = evaluator.candidates[step.node.name]
            return Hull(Table((), values[0]), Table((), values[-1]))
        case "apply":
            return applied(step.node, [hulls[slot] for slot in step.inputs])
        case "select":
            return _selected(evaluator, step, hulls)
        case "guard":
            return _guarded(evaluator, step, hulls[step.inputs[0]])
        case "fold":
            inner = hulls[step.inputs[0]]
            axes = tuple(axis for axis in step.axes if axis in inner.low.axes or axis in inner.high.axes)
            low = reduced(allowed_only(evaluator, inner.low, axes), axes, np.fmin.reduce)
            high = reduced(allowed_only(evaluator, inner.high, axes), axes, np.fmax.reduce)
            return Hull(low, high)
        case _:
            inner = hulls[step.inputs[0]]
            table = stacked(step.axes[0], (inner.low, inner.high), np.nan)
            return Hull(table, table)


def allowed_only(evaluator: Evaluator, table: Table, axes: tuple[int, ...]) -> Table:
    """Without the places that a row may not take (a judgement that the project gives)."""
    for axis in axes:
        allowed = evaluator.axes[axis].allowed
        if allowed is not None:
            table = combined(lambda v, a: np.where(a, v, np.nan), table, Table((axis,), allowed))
    return table


def _selected(evaluator: Evaluator, step: Step, hulls: list[Hull]) -> Hull:
    state = evaluator.state(step.node.args[0])
    inputs = [hulls[slot] for slot in step.inputs]
    thin = all(each.thin for each in inputs)
    sides = []
    for high in (False,) if thin else (False, True):
        bodies = [each.high if high else each.low for each in inputs]
        if state.codes is not None:
            codes = state.codes
            if len(bodies) == 1 and (codes.data == step.places[0]).all():
                sides.append(bodies[0])
                continue
            value = Table((), np.array([np.nan]))
            for place, body in zip(step.places, bodies, strict=True):
                value = combined(where_code(place), codes, body, value)
            sides.append(value)
            continue
        assert state.axis is not None
        parts = []
        by_place = dict(zip(step.places, bodies, strict=True))
        for place, open_ in enumerate(state.open):
            here = by_place.get(place)
            if here is None:
                parts.append(Table((), np.array([np.nan])))
                continue
            here = at(here, state.axis, place)
            if not open_.data.all():
                here = combined(lambda o, v: np.where(o, v, np.nan), open_, here)
            parts.append(here)
        sides.append(stacked(state.axis, parts, np.nan))
    return Hull(sides[0], sides[-1])


def _guarded(evaluator: Evaluator, step: Step, inner: Hull) -> Hull:
    low, high = inner.low, inner.high
    for each in step.node.args[1:]:
        truth = evaluator.truth(each)
        where = truth.holds if truth.valid is None else combined(np.logical_and, truth.holds, truth.valid)
        thin = low is high
        low = combined(lambda w, v: np.where(w, v, np.nan), where, low)
        high = low if thin else combined(lambda w, v: np.where(w, v, np.nan), where, high)
    return Hull(low, high)
