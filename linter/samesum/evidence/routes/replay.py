"""The route that an evaluation took, when everything was decided."""

from __future__ import annotations

import numpy as np

from samesum.evidence.trial.arrays import Array
from samesum.evidence.trial.values import Evaluator, State


def reached(evaluator: Evaluator) -> dict[str, Array]:
    """Which rows reach each branch point, when everything is decided: {branch point: yes or no by row}."""
    plan = evaluator.plan
    count = evaluator.rows.count
    active: dict[int, Array] = {plan.root: np.ones(count, dtype=bool)}
    found: dict[str, Array] = {}
    for number in range(plan.root, -1, -1):
        here = active.pop(number, None)
        if here is None or not here.any():
            continue
        node = plan.nodes[number]
        if node.kind == "select":
            state = evaluator.state(node.args[0])
            codes = _codes(state, count)
            targets = [(node.args[0], here)]
            targets += [(body, here & (codes == place)) for place, body in enumerate(node.args[1:])]
        else:
            if node.kind == "point":
                found[node.name] = here
            targets = [(each, here) for each in node.args]
        for target, where in targets:
            active[target] = where if target not in active else active[target] | where
    return found


def _codes(state: State, count: int) -> Array:
    assert state.codes is not None
    return np.broadcast_to(state.codes.data, (count,))


def route_codes(evaluator: Evaluator) -> dict[str, Array]:
    """The route of each row, when everything is decided: the branch taken at each branch point, -1 for not
    reached (or stuck)."""
    where = reached(evaluator)
    count = evaluator.rows.count
    found = {}
    for id, number in evaluator.plan.points.items():
        here = where.get(id)
        if here is None:
            continue
        found[id] = np.where(here, _codes(evaluator.state(number), count), -1).astype(np.int16)
    return found
