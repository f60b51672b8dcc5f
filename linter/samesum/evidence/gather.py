"""Everything that ``check`` and ``count`` need to know about a rulebook, in one go."""

from __future__ import annotations

import time

from samesum.evidence.evidence import Evidence
from samesum.evidence.routes.conditions import Conditions, Undecided, examine_conditions
from samesum.evidence.routes.control import find_control
from samesum.evidence.routes.counting import count, deep
from samesum.evidence.routes.diagrams import Limits, OutOfLimits
from samesum.evidence.routes.network import Network
from samesum.evidence.routes.relating import build_network
from samesum.graph import DecisionGraph


def gather(graph: DecisionGraph, seconds: float = 10.0) -> Evidence:
    """Conditions, counts and control of a rulebook, within about ``seconds`` (a third each for building,
    asking and counting; what one leaves over the next may use)."""
    start = time.monotonic()
    network = _network(graph, seconds)
    left = seconds - (time.monotonic() - start)
    if network is None:
        points = tuple(Undecided(id, "gap") for id in graph.branch_points)
        conditions = Conditions((), (), (), points)
    else:
        conditions = examine_conditions(network, max(left / 2, 0.2))
    left = seconds - (time.monotonic() - start)
    counts = count(graph, max(left, 0.5), network)
    overlapping = [overlap.branch_point for overlap in conditions.overlaps]
    return Evidence(graph.written, graph, counts, conditions, find_control(graph, overlapping))


def _network(graph: DecisionGraph, seconds: float) -> Network | None:
    with deep():
        try:
            return build_network(graph, Limits(time.monotonic() + seconds / 2))
        except OutOfLimits:
            return None
