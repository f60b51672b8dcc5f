"""``samesum trial``: what projects get on every route, who moves it, and what is proved for all of them."""

from __future__ import annotations

import argparse
import sys
import time
from collections.abc import Mapping, Sequence
from fractions import Fraction
from pathlib import Path
from typing import TYPE_CHECKING

from samesum.cli import shared

if TYPE_CHECKING:
    from samesum.evidence.choosing.batches import Batch
    from samesum.evidence.trial.outcome import TrialEvidence
    from samesum.evidence.trial.working import Line
    from samesum.graph import DecisionGraph
    from samesum.reading.cases import Case


def add_arguments(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("file", metavar="FILE", type=Path, help="a .rulebook file")
    parser.add_argument(
        "--inputs", metavar="CASES", type=Path, required=True, help="projects: a .yaml, .csv or .parquet file"
    )
    shared.add_json(parser)
    shared.add_seconds(parser)
    parser.add_argument(
        "--tolerance",
        metavar="SHARE",
        type=_share,
        default=Fraction(0),
        help="how far results may lie apart and still count as the same, as in `0.5 %%` or 0.005 (0)",
    )
    parser.add_argument(
        "--explain",
        metavar="ROUTE",
        help="print the calculation step by step: lowest, highest, reference, or branches as in soil=plots,methane=2",
    )
    parser.add_argument("--case", metavar="NAME", help="only the project of this name")


def _share(text: str) -> Fraction:
    from samesum.reading.numbers import exact

    number, percent, rest = text.strip().partition("%")
    value = (
        None
        if rest or not number.strip().replace(".", "").replace("_", "").replace("e-", "").isdigit()
        else exact(number.strip())
    )
    if value is None or value < 0:
        raise argparse.ArgumentTypeError(f"{text!r} is no share; write it as in `0.5 %` or 0.005")
    return value / 100 if percent else value


def run(arguments: argparse.Namespace) -> int:
    from samesum.reading.read import read_file

    reading = read_file(arguments.file)
    if reading.model is None or any(problem.kind != "unit" for problem in reading.problems):
        shared.report(reading.problems)
        return shared.UNUSABLE
    from samesum.evidence.trial.plan import Unplannable
    from samesum.graph import build

    model = reading.model
    if model.result is None:
        return shared.refuse(f"{arguments.file}: the rulebook has no result, so there is no number to try out")
    from samesum.evidence.given import is_table
    from samesum.evidence.subjects.declared import needed_mismatches

    shared.report(reading.problems)
    if needed_mismatches(model, reading.problems):
        return shared.refuse(
            f"{arguments.file}: no number can be worked out until the mistakes in the units are mended"
        )
    graph = build(model)
    try:
        if is_table(arguments.inputs):
            return _tables(graph, arguments)
        return _cases(graph, arguments)
    except Unplannable as unplannable:
        return shared.refuse(f"{arguments.file}: the number cannot be worked out: {unplannable}")


def _cases(graph: DecisionGraph, arguments: argparse.Namespace) -> int:
    from samesum.evidence.choosing.batches import batches_of
    from samesum.reading.cases import read_cases

    cases, problems = read_cases(arguments.inputs, graph.written)
    if problems:
        shared.report(problems)
        return shared.UNUSABLE
    wanted: Sequence[Case] = cases.cases
    if arguments.case is not None:
        wanted = [case for case in wanted if case.name == arguments.case]
        if not wanted:
            from samesum.reading.words import nearest

            close = nearest(arguments.case, [case.name for case in cases.cases])
            return shared.refuse(
                f"no project is called {arguments.case}" + (f"; did you mean {close}?" if close else "")
            )
    if arguments.explain:
        return _explain(graph, wanted, arguments)
    return _try(graph, batches_of(graph.model, wanted), [case.name for case in wanted], wanted, arguments)


def _tables(graph: DecisionGraph, arguments: argparse.Namespace) -> int:
    from samesum.evidence.choosing.batches import batches_of_columns
    from samesum.reading.columns import read_columns

    if arguments.explain or arguments.case:
        return shared.refuse("--explain and --case need the projects in a .yaml file")
    columns, problems = read_columns(arguments.inputs, graph.written)
    if columns is None:
        shared.report(problems)
        return shared.UNUSABLE
    return _try(graph, batches_of_columns(graph.model, columns), columns.names, (), arguments)


def _try(
    graph: DecisionGraph,
    batches: Sequence[Batch],
    names: Sequence[str],
    cases: Sequence[Case],
    arguments: argparse.Namespace,
) -> int:
    from samesum.evidence.trial.outcome import try_batches

    bar = _Bar()
    evidence = try_batches(graph, batches, names, cases, arguments.seconds, arguments.tolerance, progress=bar.at)
    bar.done()
    if arguments.json:
        from samesum.outputs.trial_json import trial_json

        for piece in trial_json(evidence):
            shared.write(piece)
        return _status(evidence)
    from samesum.outputs.page import paper_for
    from samesum.outputs.trial_text import trial_text

    shared.write(trial_text(evidence, paper_for(sys.stdout), _workings(evidence)))
    return _status(evidence)


def _status(evidence: TrialEvidence) -> int:
    """1 when a worked example does not come out, so that a pipeline notices."""
    return 0 if all(example.agrees for example in evidence.examples) else 1


def _workings(evidence: TrialEvidence) -> Mapping[str, Sequence[Line]]:
    """The calculation of each worked example that does not come out."""
    from samesum.evidence.trial.plan import resized
    from samesum.evidence.trial.working import working

    found = {}
    for example in evidence.examples:
        if not example.agrees:
            graph = resized(evidence.graph.model, _sizes(example.inputs, evidence.graph))
            found[example.case] = working(graph, example.inputs, dict(example.route))
    return found


def _sizes(values: Mapping[str, object], graph: DecisionGraph) -> dict[str, int]:
    found = {}
    for fact in graph.model.facts:
        value = values.get(fact.name)
        if fact.index and isinstance(value, tuple):
            found[fact.index] = len(value)
    return found


def _explain(graph: DecisionGraph, cases: Sequence[Case], arguments: argparse.Namespace) -> int:
    from samesum.evidence.trial.outcome import explained
    from samesum.outputs.page import paper_for
    from samesum.outputs.trial_text import working_text

    for case in cases:
        found = explained(graph, case, arguments.explain)
        if isinstance(found, str):
            return shared.refuse(found)
        shared.write(working_text(case.name, found.lines, found.says, paper_for(sys.stdout)) + "\n")
    return 0


class _Bar:
    """A progress bar on standard error, shown on a terminal once a second has passed."""

    def __init__(self) -> None:
        self._start = time.monotonic()
        self._shown = False

    def at(self, done: int, total: int) -> None:
        stream = sys.stderr
        if stream is None or not stream.isatty() or time.monotonic() - self._start < 1 or not total:
            return
        self._shown = True
        filled = round(30 * done / total)
        stream.write(f"\r{'█' * filled}{'░' * (30 - filled)} {done:,} of {total:,} projects")
        stream.flush()

    def done(self) -> None:
        if self._shown and sys.stderr is not None:
            sys.stderr.write("\r" + " " * 70 + "\r")
            sys.stderr.flush()
