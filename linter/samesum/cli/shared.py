"""What several commands share: arguments, problems on standard error, output."""

from __future__ import annotations

import argparse
import sys
from collections.abc import Iterable
from pathlib import Path
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from samesum.problems import Problem

UNUSABLE = 2


def add_seconds(parser: argparse.ArgumentParser) -> None:
    parser.add_argument(
        "--seconds",
        type=_seconds,
        default=10.0,
        metavar="N",
        help="how long the analysis of one file may take (10); what is not settled by then is said to be open",
    )


def add_json(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("--json", action="store_true", help="write one JSON object instead of text for people")


def add_as_json(parser: argparse.ArgumentParser) -> None:
    """``--json`` where there is ``--as`` too."""
    parser.add_argument("--json", action="store_true", help="the same as --as json")


def chosen_form(form: str | None, json: bool) -> str | None:
    """What ``--as`` or ``--json`` ask for, "" when neither does; None, which is said, when they ask for two things."""
    if json and form not in (None, "json"):
        refuse(f"--as {form} and --json ask for two forms at once; leave one of them out")
        return None
    return "json" if json else form or ""


def _seconds(text: str) -> float:
    try:
        value = float(text)
    except ValueError:
        value = 0.0
    if not 0 < value < 1e7:
        raise argparse.ArgumentTypeError(f"{text!r} is no time in seconds; write a number above 0")
    return value


def report(problems: Iterable[Problem]) -> None:
    """Problems on standard error, one a line: ``file:line:column: what is wrong; what to write instead``."""
    from samesum.outputs.page import clean

    if sys.stderr is None:
        return
    for problem in problems:
        remedy = f"; {problem.remedy}" if problem.remedy else ""
        place = f"{problem.file}:{problem.span.line}:{problem.span.column}"
        print(clean(f"{place}: {problem.says}{remedy}"), file=sys.stderr)


def refuse(says: str) -> int:
    """A call that cannot be carried out: one line on standard error, and the exit status."""
    from samesum.outputs.page import clean

    if sys.stderr is not None:
        print(clean(f"samesum: {says}"), file=sys.stderr)
    return UNUSABLE


def write(text: str) -> None:
    """Standard output, whole; nothing when it is closed."""
    if sys.stdout is not None:
        sys.stdout.write(text)


def add_inputs(parser: argparse.ArgumentParser) -> None:
    parser.add_argument(
        "--inputs",
        type=Path,
        metavar="CASES",
        help="projects to try the rulebook on, a .yaml, .csv or .parquet file: adds what they show",
    )


def write_line(text: str) -> None:
    """One line for people on standard output, control characters made visible."""
    from samesum.outputs.page import clean

    write(clean(text) + "\n")


def report_line(text: str) -> None:
    """One line on standard error that is no complaint."""
    from samesum.outputs.page import clean

    if sys.stderr is not None:
        print(clean(text), file=sys.stderr)


def deliver(content: str | bytes, output: Path | None) -> int:
    """To a file, which is whole at every moment, or to standard output; gives the exit status."""
    if output is None:
        if isinstance(content, str):
            write(content)
        elif sys.stdout is not None:
            sys.stdout.flush()
            sys.stdout.buffer.write(content)
        return 0
    from samesum.reviewing.whole_file import write_whole

    try:
        write_whole(output, content.encode() if isinstance(content, str) else content)
    except (OSError, ValueError) as error:
        return refuse(f"{output} cannot be written: {getattr(error, 'strerror', None) or error}")
    return 0
