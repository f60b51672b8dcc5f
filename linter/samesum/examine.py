"""The whole flow in one short function: text → model → graph → evidence → findings.

The only module that knows all stages.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING

from samesum.problems import Problem

if TYPE_CHECKING:
    from samesum.evidence.evidence import Evidence
    from samesum.evidence.given import Given
    from samesum.evidence.trial.outcome import TrialEvidence
    from samesum.judging.judge import Judged
    from samesum.judging.rules import RuleSet
    from samesum.reading.read import Reader, Reading


@dataclass(frozen=True, slots=True)
class Examined:
    """One rulebook as far as it could be examined. ``evidence`` is None when problems stand in the way;
    ``judged`` is None then, and when no rules were given."""

    reading: Reading
    evidence: Evidence | None
    judged: Judged | None = None

    @property
    def problems(self) -> tuple[Problem, ...]:
        return self.reading.problems


def examine(
    path: Path,
    seconds: float = 10.0,
    rules: RuleSet | None = None,
    reader: Reader | None = None,
    inputs: Path | None = None,
) -> Examined:
    """A rulebook file, read, examined and, where ``rules`` are given, judged. ``seconds`` bounds the analysis, not
    the reading. ``reader`` may be handed in when several files are read. ``inputs``: projects to try it on (a file
    of cases or a table); mistakes in them are problems like any other.

    A unit mismatch does not stand in the way: the expression is left out, and lint rules report it.
    """
    from samesum.reading.read import read_file

    reading = read_file(path, reader=reader)
    if inputs is None or reading.model is None:
        return examine_reading(reading, seconds, rules)
    from samesum.evidence.given import read_given

    given, problems = read_given(inputs, reading.model)
    if given is None:
        return Examined(replace(reading, problems=(*reading.problems, *problems)), None)
    return examine_reading(reading, seconds, rules, given)


def examine_reading(
    reading: Reading, seconds: float = 10.0, rules: RuleSet | None = None, given: Given | None = None
) -> Examined:
    """What was read, examined: ``examine`` for a text that stands in no file, or was read already."""
    usable = reading.model is not None and all(problem.kind == "unit" for problem in reading.problems)
    if not usable or reading.model is None:
        return Examined(reading, None)
    from samesum.evidence.gather import gather
    from samesum.graph import build

    evidence = gather(build(reading.model), seconds)
    if rules is None:
        return Examined(reading, evidence)
    from samesum.evidence.subjects.all_subjects import subjects_of
    from samesum.judging.judge import judge

    trial = _tried(evidence, given, seconds) if given and given.names and reading.model.result is not None else None
    subjects = subjects_of(evidence, reading.problems, seconds / 2, trial)
    return Examined(reading, evidence, judge(reading.model.file, subjects, rules))


def _tried(evidence: Evidence, given: Given, seconds: float) -> TrialEvidence | None:
    """What projects show; None where a part that the result needs could not be read (lint rules report that)."""
    from samesum.evidence.trial.outcome import try_batches
    from samesum.evidence.trial.plan import Unplannable

    try:
        batches = given.batches(evidence.graph.model)
        return try_batches(evidence.graph, batches, given.names, given.cases, seconds, evidence=evidence)
    except Unplannable:
        return None
