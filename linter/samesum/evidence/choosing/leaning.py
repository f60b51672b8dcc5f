"""Whether more of what a choice gives credits more, or less."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from samesum.evidence.choosing.bench import Alone, Array, Terms, alone, prepare, ways_in
from samesum.evidence.choosing.latitudes import Latitude
from samesum.evidence.choosing.projects import Supply, projects_of, stretches

_PROBE = 0.1
_MIXED = 0.01


def leaning(supply: Supply, latitude: Latitude, terms: Terms) -> int:
    """1 when more of what a choice gives credits more, −1 when it credits less (an emission), 0 when both happen (in
    more than 1 % of the projects that it matters to) or nothing does."""
    more = less = 0
    for stretch in stretches(supply, 4096 * max(1, len(supply.sources))):
        bench = prepare(projects_of(supply, stretch, terms.seed), stretch.number, (), terms, 1)
        one = alone(bench, latitude, -_PROBE)
        for point in one.points:
            forced = ways_in(bench.program, point)
            raised = one.credited({**forced})
            one.deduction = 0.0
            difference = (raised - one.credited({**forced})) * np.sign(valued(one, point, forced))
            one.deduction = -_PROBE
            more += int(np.count_nonzero(difference > 0))
            less += int(np.count_nonzero(difference < 0))
    if min(more, less) > _MIXED * (more + less) or more == less:
        return 0
    return 1 if more > less else -1


def valued(one: Alone, point: str, forced: Mapping[str, Any]) -> Array:
    """What the choice gives in each project, on its reference: below zero, a tenth more of it is less."""
    bench = one.bench
    values = bench.values(one.world(forced, {}), bench.truth_values, (*forced, point))
    found = np.broadcast_to(np.asarray(values[bench.program.selects[point]], dtype=np.float64), bench.truth.shape)
    return np.nan_to_num(found)
