"""All evidence about one rulebook, as one value that judging and outputs read."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from samesum.evidence.routes.conditions import Conditions
from samesum.evidence.routes.control import Control
from samesum.evidence.routes.counting import Counts
from samesum.graph import DecisionGraph
from samesum.reading.model import Model


@dataclass(frozen=True, slots=True)
class Evidence:
    """What was computed. ``control`` is by general id of the branch points."""

    model: Model
    graph: DecisionGraph
    counts: Counts
    conditions: Conditions
    control: Mapping[str, Control]
