"""The whole flow in one short function: text → model → graph → evidence → findings.

The only module that knows all stages.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from samesum.problems import Problem

if TYPE_CHECKING:
    from samesum.evidence.evidence import Evidence
    from samesum.reading.read import Reading


@dataclass(frozen=True, slots=True)
class Examined:
    """One rulebook as far as it could be examined. ``evidence`` is None when problems stand in the way."""

    reading: Reading
    evidence: Evidence | None

    @property
    def problems(self) -> tuple[Problem, ...]:
        return self.reading.problems


def examine(path: Path, seconds: float = 10.0) -> Examined:
    """A rulebook file, read and examined. ``seconds`` bounds the analysis, not the reading.

    A unit mismatch does not stand in the way: the expression is left out, and lint rules report it.
    """
    from samesum.reading.read import read_file

    reading = read_file(path)
    usable = reading.model is not None and all(problem.kind == "unit" for problem in reading.problems)
    if not usable or reading.model is None:
        return Examined(reading, None)
    from samesum.evidence.gather import gather
    from samesum.graph import build

    return Examined(reading, gather(build(reading.model), seconds))
