"""Which branch is taken where somebody decides: the reference, or what is given."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence

import numpy as np

from samesum.evidence.trial.arrays import Array, Table, spread_out, union
from samesum.evidence.trial.plan import Plan
from samesum.reading import model as m

Decide = Callable[[str, Sequence[Table], int], Array]
"""Branch point, where each branch is open, number of rows → the branch of each row (-1 for none)."""


def first_open(open_: Sequence[Table], order: Sequence[int]) -> Table:
    """The first open branch in an order, -1 where none is."""
    axes = union(open_)
    arrays = [spread_out(each, axes) for each in open_]
    codes: Array = np.full(np.broadcast_shapes(*(array.shape for array in arrays)), -1, dtype=np.int64)
    for branch in reversed(order):
        codes = np.where(arrays[branch], branch, codes)
    return Table(axes, codes)


def preferred(plan: Plan, id: str) -> list[int]:
    """The branches in the order in which the reference takes them: the option marked so, then those whose error is
    stated, the lowest first, then the others as written. Of cases as written."""
    body = plan.graph.branch_points[id].body
    if not isinstance(body, m.Choice):
        return list(range(len(plan.graph.branch_points[id].branches)))
    marked = [place for place, option in enumerate(body.options) if option.reference]
    stated = [(option.error, place) for place, option in enumerate(body.options) if option.error is not None]
    order = [*marked, *(place for _, place in sorted(stated)), *range(len(body.options))]
    return list(dict.fromkeys(order))


def reference_decision(plan: Plan) -> Decide:
    """Takes the reference at every branch point: its first open branch in the order of ``preferred``."""

    def decide(id: str, open_: Sequence[Table], rows: int) -> Array:
        return np.broadcast_to(first_open(open_, preferred(plan, id)).data, (rows,))

    return decide


def decision(codes: Mapping[str, Array], plan: Plan) -> Decide:
    """Takes the given branches; where none is given, or it is not open, what ``otherwise`` says: the reference."""

    def decide(id: str, open_: Sequence[Table], rows: int) -> Array:
        fallback = np.broadcast_to(first_open(open_, preferred(plan, id)).data, (rows,))
        wanted = codes.get(id)
        if wanted is None:
            return fallback
        can = np.zeros(rows, dtype=bool)
        for branch, each in enumerate(open_):
            can |= (wanted == branch) & np.broadcast_to(each.data, (rows,))
        return np.where(can, wanted, fallback)

    return decide
