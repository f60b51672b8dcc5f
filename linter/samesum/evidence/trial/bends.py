"""Whether a number rises, falls, or does both, as one of its sources moves while everything decided stands still.

The sources are settings and shared parts. What only rises or only falls has its extremes at the source's ends.
"""

from __future__ import annotations

from dataclasses import dataclass

from samesum.evidence.trial.plan import CONDITIONS, Node
from samesum.evidence.trial.structure import Span, Structure


@dataclass(frozen=True, slots=True)
class Way:
    """``straight``: a straight line. ``up`` +1 rises, -1 falls, 0 one of the two; None: may do both."""

    straight: bool
    up: int | None


FLAT: Way | None = None
BENT = Way(False, None)


def way_of(structure: Structure, source: int) -> Way | None:
    """How the result moves with ``source`` between the turns of its conditions; None when it does not move."""
    ways: dict[int, Way] = {source: Way(True, 1)}
    nodes = structure.plan.nodes
    for number, inner in structure.children.items():
        node = nodes[number]
        if number <= source or node.kind in CONDITIONS or node.kind in ("lookup", "input", "number"):
            continue
        parts = [ways.get(each) for each in node.args]
        if all(part is None for part in parts):
            continue
        if node.kind == "select":
            moved = [ways[each] for each in inner[1:] if each in ways]
            made: Way | None = _any_of(moved) if moved else None
        else:
            made = _operation(node, parts, [structure.spans.get(each, (0.0, 0.0)) for each in node.args])
        if made is not None:
            ways[number] = made
    return ways.get(structure.plan.root)


def _any_of(ways: list[Way]) -> Way:
    if any(way.up is None for way in ways):
        return BENT
    ups = {way.up for way in ways}
    return Way(all(way.straight for way in ways), ups.pop() if len(ups) == 1 else 0)


def _sum(ways: list[Way]) -> Way:
    if len(ways) == 1:
        return ways[0]
    straight = all(way.straight for way in ways)
    ups = {way.up for way in ways}
    if None in ups:
        return BENT
    if ups in ({1}, {-1}):
        return Way(straight, ups.pop())
    return Way(True, 0) if straight else BENT


def _scaled(way: Way, span: Span) -> Way:
    """The way of a product with something that stands still and lies in ``span``."""
    if way.up is None:
        return BENT
    if span[0] >= 0:
        return way
    return Way(way.straight, -way.up if span[1] <= 0 else 0)


def _sign(span: Span) -> int:
    return 1 if span[0] >= 0 else -1 if span[1] <= 0 else 0


def _operation(node: Node, parts: list[Way | None], spans: list[Span]) -> Way | None:
    moved = [(part, span) for part, span in zip(parts, spans, strict=True) if part is not None]
    still = [span for part, span in zip(parts, spans, strict=True) if part is None]
    match node.kind:
        case "linear":
            weighted = [
                _scaled(part, (float(weight), float(weight)))
                for part, weight in zip(parts, node.weights, strict=True)
                if part is not None and weight
            ]
            return _sum(weighted) if weighted else None
        case "guard":
            return parts[0]
        case "product":
            return _product(moved, still)
        case "divide":
            return _quotient(parts[0], parts[1], spans[0], spans[1])
        case "power":
            return _power(parts[0], parts[1], spans[0], spans[1])
        case "min" | "max":
            if len(moved) == 1:
                return Way(False, moved[0][0].up)
            ups = {part.up for part, _ in moved}
            return Way(False, ups.pop()) if ups in ({1}, {-1}) else BENT
        case "call":
            way, span = moved[0]
            if way.up is None:
                return BENT
            if node.name == "abs":
                sign = _sign(span)
                return Way(way.straight, way.up * sign) if sign else BENT
            return Way(False, way.up)
        case _:
            return BENT


def _product(moved: list[tuple[Way, Span]], still: list[Span]) -> Way:
    if len(moved) == 1:
        way = moved[0][0]
        for span in still:
            way = _scaled(way, span)
        return way
    ups = {way.up for way, _ in moved}
    if ups in ({1}, {-1}) and all(span[0] >= 0 for _, span in moved):
        way = Way(False, ups.pop())
        for span in still:
            way = _scaled(way, span)
        return way
    return BENT


def _quotient(above: Way | None, below: Way | None, top: Span, bottom: Span) -> Way:
    if bottom[0] <= 0 <= bottom[1]:
        return BENT
    if below is None:
        assert above is not None
        return _scaled(above, bottom)
    if below.up is None or (above is not None and above.up is None):
        return BENT
    if above is None:
        return Way(False, -below.up * _sign(top))
    if above.straight and below.straight:
        # (a + b·s) / (c + d·s) only rises or only falls where the divisor is not zero
        return Way(False, 0)
    if above.up is not None and above.up * below.up == -1 and top[0] >= 0 and bottom[0] > 0:
        return Way(False, above.up)
    return BENT


def _power(base: Way | None, exponent: Way | None, under: Span, over: Span) -> Way:
    if base is not None and exponent is not None:
        return BENT
    if base is not None:
        if base.up is None:
            return BENT
        whole = over[0] == over[1] and over[0] == int(over[0])
        if under[0] >= 0:
            return Way(False, base.up * _sign(over))
        if whole and over[0] > 0:
            if int(over[0]) % 2:
                return Way(False, base.up)
            return Way(False, -base.up) if under[1] <= 0 else BENT
        return BENT
    assert exponent is not None
    if exponent.up is None or under[0] <= 0:
        return BENT
    return Way(False, exponent.up * (1 if under[0] >= 1 else -1 if under[1] <= 1 else 0))
