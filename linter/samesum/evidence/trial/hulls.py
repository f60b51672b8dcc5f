"""Lowest and highest of a number at once, and which end of each part gives them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from samesum.evidence.trial.arrays import Array, Table, spread_out, union
from samesum.evidence.trial.operations import operated
from samesum.evidence.trial.plan import Node


@dataclass(frozen=True, slots=True)
class Hull:
    """``low`` and ``high`` are one object where nothing was folded away yet."""

    low: Table
    high: Table

    @property
    def thin(self) -> bool:
        return self.low is self.high


def applied(node: Node, parts: Sequence[Hull]) -> Hull:
    """The operation on hulls of independent parts; exact where it is ``steady`` over them."""
    axes = union([part.low for part in parts])
    lows = [spread_out(part.low, axes) for part in parts]
    if all(part.thin for part in parts):
        thin = Table(axes, operated(node, lows))
        return Hull(thin, thin)
    highs = [low if part.thin else spread_out(part.high, axes) for part, low in zip(parts, lows, strict=True)]
    if node.kind == "linear":
        low = operated(node, [a if w >= 0 else b for a, b, w in zip(lows, highs, node.weights, strict=True)])
        high = operated(node, [b if w >= 0 else a for a, b, w in zip(lows, highs, node.weights, strict=True)])
        return Hull(Table(axes, low), Table(axes, high))
    if node.kind in ("min", "max") or (node.kind == "call" and node.name != "abs"):
        return Hull(Table(axes, operated(node, lows)), Table(axes, operated(node, highs)))
    found = [operated(node, corner) for corner in corners(lows, highs)]
    low, high = found[0], found[0]
    for each in found[1:]:
        low, high = np.minimum(low, each), np.maximum(high, each)
    return Hull(Table(axes, low), Table(axes, high))


def corners(lows: Sequence[Array], highs: Sequence[Array]) -> list[list[Array]]:
    """Every combination of ends; a part that is thin has one end."""
    found: list[list[Array]] = [[]]
    for low, high in zip(lows, highs, strict=True):
        ends = (low,) if low is high else (low, high)
        found = [[*before, end] for before in found for end in ends]
    return found


def ends_wanted(node: Node, lows: Sequence[Array], highs: Sequence[Array], want_high: Array) -> list[Array]:
    """Of which parts the high end is needed for the operation's own end. All arrays have one dimension, of rows."""
    if node.kind == "linear":
        return [want_high if weight >= 0 else ~want_high for weight in node.weights]
    if node.kind in ("min", "max") or (node.kind == "call" and node.name != "abs"):
        return [want_high for _ in lows]
    rows = len(want_high)
    found: list[Array] = []
    choices: list[list[bool]] = [[]]
    for low, high in zip(lows, highs, strict=True):
        choices = [[*before, end] for before in choices for end in ((False,) if low is high else (False, True))]
    for corner in corners(lows, highs):
        found.append(np.broadcast_to(operated(node, corner), (rows,)))
    values = np.where(np.isnan(np.stack(found)), np.inf, np.stack(found))
    lowest = np.argmin(values, axis=0)
    highest = np.argmax(np.where(np.isinf(values), -np.inf, values), axis=0)
    corner_of: Any = np.where(want_high, highest, lowest)
    table = np.array(choices, dtype=bool)
    return [table[corner_of, part] for part in range(len(lows))]
