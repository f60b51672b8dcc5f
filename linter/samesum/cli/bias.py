"""``samesum bias``: what choice does to a programme as a whole."""

from __future__ import annotations

import argparse
import math
import os
import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING

from samesum.cli import shared

if TYPE_CHECKING:
    from samesum.evidence.choosing.projects import Supply
    from samesum.evidence.choosing.selection import Selection
    from samesum.reading.model import Model

PROJECTS = 100_000
MOST_PROJECTS = 10**9


def add_arguments(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("file", metavar="FILE", type=Path, help="a .rulebook file")
    parser.add_argument(
        "--inputs",
        type=Path,
        metavar="CASES",
        help="simulate these projects and no others: a .yaml, .csv or .parquet file",
    )
    parser.add_argument(
        "--projects", type=_count, default=PROJECTS, metavar="N", help=f"how many projects to simulate ({PROJECTS:,})"
    )
    parser.add_argument("--seed", type=_seed, default=0, metavar="S", help="where the random numbers start (0)")
    parser.add_argument(
        "--price", type=_above_zero, metavar="P", help="what a credit is worth, in the currency of the costs"
    )
    parser.add_argument(
        "--join", type=_above_zero, metavar="K", help="also: only projects join that are credited more than K × truth"
    )
    parser.add_argument("--jobs", type=_count, metavar="N", help="how many cores work on it (all); changes no figure")
    parser.add_argument(
        "--routes", action="store_true", help="count also the routes that each way of closing leaves (takes longer)"
    )
    shared.add_json(parser)
    shared.add_seconds(parser)
    closing = parser.add_argument_group("closing", "writes the rulebook with branch points closed")
    closing.add_argument(
        "--write-closed",
        nargs="+",
        metavar="KIND:BRANCH_POINT",
        help="mandate:ID (the reference), mandate=OPTION:ID, mandate=VALUE:SETTING (also yes or no of a judgement), "
        "lowest:ID, fixed:ID, deduct:ID (so that a second look comes out even), deduct=P%%:ID, in-order:ID for "
        "overlapping cases",
    )
    closing.add_argument("-o", "--output", type=Path, metavar="OUT", help="where to (standard output)")


def run(arguments: argparse.Namespace) -> int:
    from samesum.evidence.choosing.projects import CannotDraw
    from samesum.evidence.choosing.selection import NothingTrue
    from samesum.evidence.trial.plan import Unplannable
    from samesum.reading.read import read_file

    if arguments.output is not None and not arguments.write_closed:
        return shared.refuse("-o goes with --write-closed KIND:BRANCH_POINT")
    reading = read_file(arguments.file)
    if reading.model is None or reading.problems:
        shared.report(reading.problems)
        return shared.UNUSABLE
    if reading.model.result is None:
        return shared.refuse(f"{arguments.file}: the rulebook has no result; write `result NAME [t CO2e]`")
    if arguments.write_closed:
        from samesum.cli.closing import write_closed

        return write_closed(reading, arguments)
    try:
        supply = supply_for(reading.model, arguments.inputs)
        if supply is None:
            return shared.UNUSABLE
        selection = simulated(supply, arguments)
    except (CannotDraw, Unplannable) as trouble:
        return shared.refuse(f"{arguments.file}: {trouble}")
    except NothingTrue as trouble:
        return shared.refuse(f"{arguments.file}: {trouble}")
    routes = {}
    if arguments.routes:
        from samesum.cli.closing import routes_left

        routes = routes_left(reading, selection, arguments.seconds)
    if arguments.json:
        from samesum.outputs.bias_json import bias_json
        from samesum.outputs.json_text import as_json

        shared.write(as_json(bias_json(selection, routes)))
    else:
        from samesum.outputs.bias_text import bias_text
        from samesum.outputs.page import paper_for

        shared.write(bias_text(selection, paper_for(sys.stdout), routes))
    return 0


def supply_for(model: Model, inputs: Path | None) -> Supply | None:
    """The projects to simulate with; None when the file of cases could not be used, which is then said."""
    from samesum.evidence.choosing.projects import from_batches, from_domains

    if inputs is None:
        return from_domains(model)
    from samesum.evidence.given import read_given

    given, problems = read_given(inputs, model)
    if given is None:
        shared.report(problems)
        return None
    return from_batches(model, given.batches(model))


def simulated(supply: Supply, arguments: argparse.Namespace) -> Selection:
    """The simulation that the command line asks for, with a bar on a terminal when it takes longer than a second."""
    from samesum.evidence.choosing.bench import Terms
    from samesum.evidence.choosing.selection import select

    terms = Terms(arguments.seed, arguments.price, arguments.join)
    jobs = arguments.jobs or cores()
    with progress("projects") as told:
        return select(supply, arguments.projects, terms, jobs, told)


def cores() -> int:
    """The cores that this process may use."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


@contextmanager
def progress(what: str) -> Iterator[Callable[[int, int], None]]:
    """A function that is told how much of how much is done; draws a bar on standard error after a second, when that is
    a terminal."""
    import time

    start = time.monotonic()
    if sys.stderr is None or not sys.stderr.isatty():
        yield lambda done, whole: None
        return
    drawn = False

    def told(done: int, whole: int) -> None:
        nonlocal drawn
        if time.monotonic() - start < 1.0:
            return
        drawn = True
        width = 30
        full = width * done // max(whole, 1)
        print(f"\r{'█' * full}{'·' * (width - full)} {done:,} of {whole:,} {what}", end="", file=sys.stderr, flush=True)

    try:
        yield told
    finally:
        if drawn:
            print("\r\x1b[K", end="", file=sys.stderr, flush=True)


def _count(text: str) -> int:
    digits = text.replace("_", "").replace(",", "")
    if not digits.isdecimal() or not 1 <= int(digits[:12]) <= MOST_PROJECTS or len(digits) > 12:
        raise argparse.ArgumentTypeError(f"{text!r} is no whole number from 1 to {MOST_PROJECTS:,}")
    return int(digits)


def _seed(text: str) -> int:
    if not text.isdecimal() or len(text) > 18:
        raise argparse.ArgumentTypeError(f"{text!r} is no seed; write a whole number of at most 18 digits")
    return int(text)


def _above_zero(text: str) -> float:
    try:
        value = float(text)
    except ValueError:
        value = math.nan
    if not 0 < value < math.inf:
        raise argparse.ArgumentTypeError(f"{text!r} is no number above 0")
    return value
