"""Arrays with only the axes they need: one axis for each branch point or human input, projects last.

A ``Table`` is a number (or yes/no) for every combination of its axes and every row; a number without a
value is NaN. Rows stand last so that the inner loops of numpy run along them. numpy allows 64 axes an
array; a table holds only those it depends on.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

Array = np.ndarray[Any, Any]


@dataclass(frozen=True, slots=True)
class Table:
    """``axes`` in rising order; ``data`` has one dimension for each, then one of rows (1 when all are alike)."""

    axes: tuple[int, ...]
    data: Array

    @property
    def cells(self) -> int:
        return int(np.prod(self.data.shape[:-1], dtype=np.float64))


def constant(value: float | bool) -> Table:
    return Table((), np.full(1, value))


def where_code(code: int) -> Callable[[Array, Array, Array], Array]:
    """(codes, here, elsewhere) → ``here`` where the code is this one."""

    def chosen(codes: Array, here: Array, elsewhere: Array) -> Array:
        return np.where(codes == code, here, elsewhere)

    return chosen


def union(tables: Sequence[Table]) -> tuple[int, ...]:
    """The axes that any of the tables has."""
    found: tuple[int, ...] = ()
    for table in tables:
        if table.axes != found:
            found = table.axes if not found else tuple(sorted({*found, *table.axes}))
    return found


def spread_out(table: Table, axes: tuple[int, ...]) -> Array:
    """The data with a dimension of size 1 for each axis of ``axes`` that the table does not have."""
    if table.axes == axes:
        return table.data
    sizes = dict(zip(table.axes, table.data.shape[:-1], strict=True))
    return table.data.reshape((*(sizes.get(axis, 1) for axis in axes), table.data.shape[-1]))


def combined(operation: Callable[..., Array], *tables: Table) -> Table:
    """``operation`` on tables, element by element."""
    axes = union(tables)
    return Table(axes, operation(*(spread_out(table, axes) for table in tables)))


def at(table: Table, axis: int, index: int) -> Table:
    """The table where an axis stands at one place; itself when it has no such axis."""
    if axis not in table.axes:
        return table
    place = table.axes.index(axis)
    return Table(table.axes[:place] + table.axes[place + 1 :], table.data.take(index, axis=place))


def stacked(axis: int, parts: Sequence[Table], blank: float | bool) -> Table:
    """One table along a new axis, ``parts`` at its places."""
    inner = union(parts)
    axes = tuple(sorted((*inner, axis)))
    place = axes.index(axis)
    arrays = [spread_out(part, inner) for part in parts]
    shape = list(np.broadcast_shapes(*(array.shape for array in arrays)))
    made: Array = np.empty((*shape[:place], len(parts), *shape[place:]), dtype=np.result_type(*arrays))
    lines = np.moveaxis(made, place, 0)
    for index, array in enumerate(arrays):
        lines[index] = array
    return Table(axes, made)


def reduced(table: Table, axes: Sequence[int], operation: Callable[..., Array]) -> Table:
    """Without ``axes``, folded by ``operation`` (such as ``np.fmin.reduce``)."""
    dimensions = tuple(table.axes.index(axis) for axis in axes if axis in table.axes)
    if not dimensions:
        return table
    kept = tuple(axis for axis in table.axes if axis not in axes)
    return Table(kept, operation(table.data, axis=dimensions))


def picked(table: Table, places: Mapping[int, Array], rows: int) -> Array:
    """The value of each row where each axis stands at that row's place."""
    if not table.axes:
        return np.broadcast_to(table.data, (rows,))
    line = np.arange(rows) if table.data.shape[-1] != 1 else np.zeros(rows, dtype=np.intp)
    found: Array = table.data[(*(places[axis] for axis in table.axes), line)]
    return found
