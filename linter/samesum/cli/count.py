"""``samesum count``: how many routes a rulebook leaves open."""

from __future__ import annotations

import argparse
import sys
from collections.abc import Mapping
from pathlib import Path
from typing import TYPE_CHECKING

from samesum.cli import shared

if TYPE_CHECKING:
    from samesum.evidence.evidence import Evidence
    from samesum.evidence.routes.witness import Value


def add_arguments(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("file", metavar="FILE", type=Path, help="a .rulebook file")
    shared.add_json(parser)
    shared.add_seconds(parser)
    parser.add_argument(
        "--list",
        metavar="N",
        type=_whole,
        default=0,
        help="also list the first N routes open to one project: the one that has most, unless --inputs names another",
    )
    parser.add_argument("--inputs", metavar="CASES", type=Path, help="a .yaml file of projects for --list")
    parser.add_argument("--case", metavar="NAME", help="which project of --inputs (the first)")


def _whole(text: str) -> int:
    if not text.isdecimal() or len(text) > 7 or int(text) < 1:
        raise argparse.ArgumentTypeError(f"{text!r} is no number of routes; write a whole number above 0")
    return int(text)


def run(arguments: argparse.Namespace) -> int:
    if (arguments.inputs or arguments.case) and not arguments.list:
        return shared.refuse("--inputs and --case say whose routes to list: add --list N")
    if arguments.case and not arguments.inputs:
        return shared.refuse("--case names a project of a file: add --inputs CASES.yaml")
    from samesum.examine import examine

    examined = examine(arguments.file, arguments.seconds)
    evidence = examined.evidence
    if evidence is None:
        shared.report(examined.problems)
        return shared.UNUSABLE
    shared.report(examined.problems)
    chosen: tuple[str, Mapping[str, Value | tuple[Value, ...]]] | None = None
    if arguments.list:
        chosen = _project(arguments, evidence)
        if chosen is None:
            return shared.UNUSABLE
    from samesum.outputs.counts import count_json, count_text
    from samesum.outputs.page import paper_for

    paper = paper_for(sys.stdout)
    answer = count_json(evidence) if arguments.json else {}
    text = "" if arguments.json else count_text(evidence, paper)
    if chosen is not None:
        from samesum.evidence.routes.listing import list_routes
        from samesum.outputs.routes import routes_json, routes_text

        name, values = chosen
        routes = list_routes(evidence.graph, values, arguments.list, arguments.seconds)
        if arguments.json:
            answer["listed"] = routes_json(routes, name)
        else:
            text += routes_text(routes, name, paper)
    if arguments.json:
        from samesum.outputs.json_text import as_json

        text = as_json(answer)
    shared.write(text)
    return 0


def _project(
    arguments: argparse.Namespace, evidence: Evidence
) -> tuple[str, Mapping[str, Value | tuple[Value, ...]]] | None:
    """The project whose routes are wanted, by name and values; None, with the reason said, when there is none."""
    if arguments.inputs is None:
        witness = evidence.counts.most_at
        if witness is None:
            shared.refuse("the project with the most routes is not known: name one with --inputs and --case")
            return None
        return "the project with the most", dict(witness.facts)
    from samesum.evidence.given import is_table
    from samesum.reading.cases import read_cases

    if is_table(arguments.inputs):
        shared.refuse(f"{arguments.inputs}: --list names the routes of one project, which a .yaml file has to hold")
        return None
    found, problems = read_cases(arguments.inputs, evidence.model)
    if problems:
        shared.report(problems)
        return None
    if arguments.case is None and found.cases:
        return f"the project {found.cases[0].name}", found.cases[0].values
    for case in found.cases:
        if case.name == arguments.case:
            return f"the project {case.name}", case.values
    from samesum.reading.words import listing, nearest

    names = [case.name for case in found.cases]
    close = nearest(arguments.case or "", names)
    hint = f"did you mean {close!r}?" if close else f"there are {listing(names, 'and')}" if names else "it has none"
    shared.refuse(f"{arguments.inputs} has no project {arguments.case!r}; {hint}")
    return None
