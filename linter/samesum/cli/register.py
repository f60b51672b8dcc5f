"""``samesum register``: the list of branch points, and the review body's decisions on it."""

from __future__ import annotations

import argparse
import sys
from pathlib import Path
from typing import TYPE_CHECKING

from samesum.cli import gathered, shared

if TYPE_CHECKING:
    from samesum.examine import Examined
    from samesum.reviewing.rows import Register

FORMS = ("table", "csv", "xlsx", "markdown", "json", "html")
_BY_SUFFIX = {
    ".csv": "csv", ".xlsx": "xlsx", ".md": "markdown", ".json": "json", ".html": "html", ".htm": "html",
    ".txt": "table",
}  # fmt: skip


def add_arguments(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("file", metavar="FILE", type=Path, help="a .rulebook file")
    parser.add_argument("--as", dest="form", choices=FORMS, help="the form of the list (table, or what -o ends in)")
    shared.add_as_json(parser)
    parser.add_argument("-o", "--output", type=Path, metavar="OUT", help="write to this file instead")
    parser.add_argument("--all", action="store_true", help="in the table, show also what facts alone decide")
    shared.add_inputs(parser)
    gathered.add_projects(parser)
    shared.add_seconds(parser)
    decide = parser.add_argument_group("deciding", "writes the decision into NAME.review.yaml beside FILE")
    decide.add_argument(
        "--decide",
        nargs=2,
        metavar=("ID", "DECISION"),
        help="a branch point (or any declared name) and: open, accepted, to-be-closed",
    )
    decide.add_argument("--reason", help="why it was decided so")
    decide.add_argument("--by", metavar="NAME", help="who decided")
    decide.add_argument("--on", metavar="DATE", help="when, as 2026-05-31 (today)")


def run(arguments: argparse.Namespace) -> int:
    if arguments.decide is None and (arguments.reason or arguments.by or arguments.on):
        return shared.refuse("--reason, --by and --on go with --decide ID DECISION")
    if arguments.decide is not None:
        from samesum.cli.decide import decide

        return decide(arguments)
    form = _form(arguments)
    if form is None:
        return shared.UNUSABLE
    if form == "xlsx" and arguments.output is None and (sys.stdout is None or sys.stdout.isatty()):
        return shared.refuse("a workbook is no text for a terminal; name a file with -o OUT.xlsx")
    found = gathered.gather_register(arguments.file, gathered.wanted(arguments))
    if found is None:
        return shared.UNUSABLE
    return shared.deliver(written(found.register, found.examined, form, arguments), arguments.output)


def _form(arguments: argparse.Namespace) -> str | None:
    """The form that is asked for, by name or by what -o ends in; None, with the reason said, when there is none."""
    form = shared.chosen_form(arguments.form, arguments.json)
    if form != "":
        return form
    ending = arguments.output.suffix.lower() if arguments.output is not None else ""
    if ending in _BY_SUFFIX or not ending:
        return _BY_SUFFIX.get(ending, "table")
    from samesum.reading.words import listing

    known = listing(list(dict.fromkeys(_BY_SUFFIX)), "and")
    shared.refuse(f"{arguments.output}: no form of the register ends in {ending}; known are {known}, or say --as FORM")
    return None


def written(register: Register, examined: Examined, form: str, arguments: argparse.Namespace) -> str | bytes:
    """The register in one of ``FORMS``."""
    match form:
        case "csv":
            from samesum.outputs.register_csv import register_csv

            return register_csv(register)
        case "xlsx":
            from samesum.outputs.register_xlsx import register_xlsx

            return register_xlsx(register)
        case "markdown":
            from samesum.outputs.register_markdown import register_markdown

            return register_markdown(register)
        case "json":
            from samesum.outputs.json_text import as_json
            from samesum.outputs.register_json import register_json

            return as_json(register_json(register))
        case "html":
            from samesum.outputs.report.page import register_page

            return register_page(register, examined.reading.text, len(examined.problems))
    from samesum.outputs.page import Paper, paper_for
    from samesum.outputs.register_table import register_text

    paper = paper_for(sys.stdout) if arguments.output is None else Paper(96, False)
    return register_text(register, paper, arguments.all)
