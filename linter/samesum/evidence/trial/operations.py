"""Arithmetic and functions on arrays, element by element; a value that does not exist is NaN."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from typing import Any

import numpy as np

from samesum.evidence.trial.arrays import Array
from samesum.evidence.trial.plan import Node
from samesum.reading import model as m

TIE = 1e-12  # comparisons of decimal inputs in floats: what is nearer than this share of its terms is equal


def within(value: Array, band: m.Band) -> Any:
    """Where a number lies in a band (``low`` < x <= ``high``), ends told apart as in comparisons."""
    here: Any = ~np.isnan(value)
    if band.low is not None:
        low = float(band.low)
        here = here & (value - low > TIE * (np.abs(value) + abs(low)))
    if band.high is not None:
        high = float(band.high)
        here = here & (value - high <= TIE * (np.abs(value) + abs(high)))
    return here


def operated(node: Node, parts: Sequence[Array]) -> Array:
    """A sum, product, quotient, power, minimum, maximum or function, element by element."""
    match node.kind:
        case "linear":
            terms = [
                part if weight == 1 else part * float(weight) for part, weight in zip(parts, node.weights, strict=True)
            ]
            if node.number:
                terms.append(np.full(1, float(node.number)))
            return _folded(np.add, terms)
        case "product":
            return _folded(np.multiply, parts)
        case "divide":
            return finite(parts[0] / parts[1])
        case "power":
            return finite(np.power(parts[0], parts[1]))
        case "min" | "max":
            return _folded(np.minimum if node.kind == "min" else np.maximum, parts)
        case _:
            return FUNCTIONS[node.name](parts[0])


def _folded(operation: Any, parts: Sequence[Array]) -> Array:
    """One operation over all parts, the smaller arrays first; a result is written over where it is large enough."""
    ordered = sorted(parts, key=lambda part: part.size)
    found = ordered[0]
    own = False
    for part in ordered[1:]:
        if own and np.broadcast_shapes(found.shape, part.shape) == found.shape:
            operation(found, part, out=found)
        else:
            found = operation(found, part)
            own = True
    return found


def finite(value: Array) -> Array:
    return np.where(np.isfinite(value), value, np.nan)


def nearest_whole(value: Array) -> Array:
    """The nearest whole number, halves away from zero."""
    whole: Array = np.copysign(np.floor(np.abs(value) + 0.5), value)
    return whole


FUNCTIONS: Mapping[str, Callable[[Array], Array]] = {
    "abs": np.abs,
    "sqrt": np.sqrt,
    "exp": lambda value: finite(np.exp(value)),
    "ln": lambda value: finite(np.log(value)),
    "round": nearest_whole,
    "floor": np.floor,
    "ceil": np.ceil,
}
