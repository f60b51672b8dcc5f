"""A rulebook examined, with its review record and what trial and bias say of it."""

from __future__ import annotations

import argparse
from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING

from samesum.cli import shared

if TYPE_CHECKING:
    from samesum.evidence.choosing.batches import Batch
    from samesum.evidence.choosing.selection import Selection
    from samesum.examine import Examined
    from samesum.reading.cases import Case
    from samesum.reading.model import Model
    from samesum.reading.read import Reading
    from samesum.reviewing.measured import Tried
    from samesum.reviewing.rows import Register

PROJECTS = 20_000
UNASKED_UP_TO = 300
"""Branch points, each element of an index by itself, that are simulated without ``--projects``: a few seconds."""


@dataclass(frozen=True, slots=True)
class Wanted:
    """What is to be gathered. ``inputs`` is the file of cases; ``projects`` to simulate, 0 for none, None for the usual
    number where that takes a few seconds; ``record`` whether decisions are read; ``seconds`` bounds each analysis.
    ``reading``: a line that goes before what is wrong with the cases, "" for none."""

    inputs: Path | None
    seconds: float
    projects: int | None = None
    seed: int = 0
    record: bool = True
    reading: str = ""


@dataclass(frozen=True, slots=True)
class Gathered:
    examined: Examined
    register: Register
    tried: Tried
    notes: tuple[str, ...] = field(default=())
    """Why something was left out, in a sentence each."""


def add_projects(parser: argparse.ArgumentParser) -> None:
    """The arguments of the simulation that goes with a register or a report."""
    parser.add_argument(
        "--projects",
        type=_projects,
        metavar="N",
        help="how many projects to simulate for over-issuance: those of --inputs in turn and no others, else drawn "
        f"from the domains ({PROJECTS:,}; 0 for none, and none for more than {UNASKED_UP_TO} branch points unless it "
        "is given)",
    )
    parser.add_argument("--seed", type=_projects, default=0, metavar="S", help="where its random numbers start (0)")


def _projects(text: str) -> int:
    if not text.isdecimal() or len(text) > 9:
        raise argparse.ArgumentTypeError(f"{text!r} is no whole number from 0 on")
    return int(text)


def wanted(arguments: argparse.Namespace) -> Wanted:
    return Wanted(arguments.inputs, arguments.seconds, arguments.projects, arguments.seed)


def gather_register(file: Path, asked: Wanted) -> Gathered | None:
    """The register of a rulebook; None when something could not be read, which is then said."""
    from samesum.reading.read import read_file

    return registered(read_file(file), file, asked)


def registered(reading: Reading, file: Path, asked: Wanted) -> Gathered | None:
    """The same for a text read already. ``file`` is where the review record lies."""
    from samesum.examine import examine_reading
    from samesum.reviewing.record import Record, read_record
    from samesum.reviewing.rows import register_of

    examined = examine_reading(reading, asked.seconds)
    decided, problems = read_record(file) if asked.record else (Record(""), ())
    if examined.evidence is None or problems:
        shared.report([*(examined.problems if examined.evidence is None else ()), *problems])
        return None
    from samesum.reviewing.measured import Tried, measures_of

    register = register_of(examined.evidence, reading.text, decided, asked.seconds)
    if asked.inputs is None and asked.projects == 0:
        return Gathered(examined, register, Tried())
    found = _tried(examined, asked)
    if found is None:
        return None
    tried, notes = found
    for note in notes:
        shared.report_line(f"{reading.model.file if reading.model else file}: {note}")
    return Gathered(examined, register.measured(measures_of(tried, asked.seconds / 2)), tried, tuple(notes))


def _tried(examined: Examined, asked: Wanted) -> tuple[Tried, list[str]] | None:
    """Trial on the projects given, and a simulation of the programme; None when the projects cannot be read."""
    from samesum.evidence.trial.outcome import try_batches
    from samesum.evidence.trial.plan import Unplannable
    from samesum.reviewing.measured import Tried

    evidence = examined.evidence
    assert evidence is not None
    if evidence.model.result is None or examined.problems:
        return Tried(), ["what the numbers come to is left out, because a part of the rulebook could not be read"]
    notes: list[str] = []
    trial = selection = given = None
    try:
        if asked.inputs is not None:
            given = _projects_given(asked.inputs, evidence.model, asked.reading)
            if given is None:
                return None
            batches, names, cases = given
            trial = try_batches(evidence.graph, batches, names, cases, asked.seconds, evidence=evidence)
        projects = asked.projects
        if projects is None and len(evidence.graph.branch_points) > UNASKED_UP_TO:
            points = f"{len(evidence.graph.branch_points):,} branch points, counting each element"
            notes.append(f"over-issuance is left out, because there are {points}; --projects {PROJECTS} asks for it")
            projects = 0
        if projects != 0:
            drawn_from = given[0] if given is not None else None
            selection = _simulated(evidence.model, drawn_from, projects or PROJECTS, asked.seed, notes)
    except Unplannable as trouble:
        notes.append(f"what the numbers come to is left out: {trouble}")
    return Tried(trial, selection), notes


def _projects_given(
    inputs: Path, model: Model, reading: str
) -> tuple[Sequence[Batch], Sequence[str], Sequence[Case]] | None:
    """The projects of a file of cases or of a table; None when there are mistakes in it, which are then said, under
    the line ``reading``."""
    from samesum.evidence.given import read_given

    given, problems = read_given(inputs, model)
    if given is None:
        if reading:
            shared.report_line(reading)
        shared.report(problems)
        return None
    return given.batches(model), given.names, given.cases


def _simulated(
    model: Model, batches: Sequence[Batch] | None, projects: int, seed: int, notes: list[str]
) -> Selection | None:
    """The simulation; None when there is nothing to simulate, and ``notes`` says why."""
    from samesum.cli.bias import cores
    from samesum.evidence.choosing.bench import Terms
    from samesum.evidence.choosing.projects import CannotDraw, from_batches, from_domains
    from samesum.evidence.choosing.selection import NothingTrue, select

    try:
        supply = from_domains(model) if batches is None else from_batches(model, batches)
        return select(supply, projects, Terms(seed), cores())
    except CannotDraw as trouble:
        notes.append(f"over-issuance is left out: {trouble}")
    except NothingTrue as trouble:
        notes.append(f"over-issuance is left out: {trouble}")
    return None
