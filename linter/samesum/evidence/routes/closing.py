"""How many routes one project keeps when a place that leaves something to somebody is closed.

Closed means: counted as a fact, whichever way it is settled. The figure is therefore the most that any
closing of that place can leave, and never more than with the place open.
"""

from __future__ import annotations

import time
from collections.abc import Sequence
from dataclasses import dataclass

from samesum.evidence.routes.counting import Side, deep, per_project
from samesum.evidence.routes.diagrams import Limits, OutOfLimits
from samesum.evidence.routes.layout import Given
from samesum.evidence.routes.network import Network
from samesum.evidence.routes.relating import build_network
from samesum.graph import DecisionGraph


@dataclass(frozen=True, slots=True)
class Bracket:
    """A whole number known to lie between ``low`` and ``high``; ``high`` is None when nothing is known above."""

    low: int
    high: int | None

    @property
    def exact(self) -> bool:
        return self.low == self.high


def figures_if_given(
    graph: DecisionGraph, asked: Sequence[tuple[str, Given]], seconds: float = 10.0
) -> tuple[Bracket, ...]:
    """For each pair of a figure of ``count`` (of one project) and what counts as a fact: the figure then.

    ``seconds`` bounds the work for all of them; what could not be counted in time is a wide bracket.
    """
    if not asked:
        return ()
    deadline = time.monotonic() + seconds
    with deep():
        try:
            network = build_network(graph, Limits(time.monotonic() + seconds / 2))
        except OutOfLimits:
            return (Bracket(0, None),) * len(asked)
        found = []
        base = network.diagrams.limits.nodes
        for place, (name, given) in enumerate(asked):
            share = (deadline - time.monotonic()) / (len(asked) - place)
            limits = network.diagrams.limits
            limits.deadline = min(deadline, time.monotonic() + max(4 * share, 0.05))
            limits.nodes = len(network.diagrams.level) + base // 2
            found.append(_bracket(network, name, given))
    return tuple(found)


def _bracket(network: Network, name: str, given: Given) -> Bracket:
    low, high = 0, None
    for loose in (True, False):
        try:
            value, exact, _ = per_project(Side(network, loose), name, given)
        except OutOfLimits:
            continue
        if exact and value is not None:
            return Bracket(value, value)
        if loose:
            high = value
        else:
            low = value or 0
    return Bracket(low, high)
