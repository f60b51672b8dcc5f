"""``samesum check``: the places where the number is left to whoever applies the rulebook."""

from __future__ import annotations

import argparse
import sys
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from samesum.cli import shared

if TYPE_CHECKING:
    from samesum.cli.checking import Outcome
    from samesum.judging.rules import Rule

FORMS = ("text", "json", "sarif", "junit")


def add_arguments(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("files", metavar="FILE", nargs="+", type=Path, help=".rulebook files")
    parser.add_argument("--as", dest="form", choices=FORMS, help="the form of the answer (text)")
    shared.add_as_json(parser)
    parser.add_argument("--sarif", metavar="OUT", type=Path, help="also write SARIF 2.1.0, for code-scanning services")
    parser.add_argument("--junit", metavar="OUT", type=Path, help="also write JUnit XML, for dashboards")
    shared.add_seconds(parser)
    shared.add_inputs(parser)
    parser.add_argument("--jobs", metavar="N", type=_jobs, default=1, help="check N files at once (1)")
    parser.add_argument(
        "--fail-on",
        choices=("error", "warning", "note"),
        default=None,
        help="the severity from which on findings make the exit status 1 (warning, or what samesum.yaml says)",
    )
    parser.add_argument(
        "--rules",
        metavar="DIR",
        type=Path,
        action="append",
        default=[],
        help="a folder of further rules; may be given several times",
    )


def _jobs(text: str) -> int:
    value = int(text) if text.isdecimal() and len(text) < 5 else 0
    if not value:
        raise argparse.ArgumentTypeError(f"{text!r} is no number of jobs; write a whole number from 1 on")
    return value


def run(arguments: argparse.Namespace) -> int:
    from samesum.cli.checking import Task, check_all

    asked = shared.chosen_form(arguments.form, arguments.json)
    if asked is None:
        return shared.UNUSABLE
    paths = list(dict.fromkeys(arguments.files))
    task = Task(arguments.seconds, tuple(arguments.rules), arguments.fail_on, arguments.inputs)
    outcomes: list[Outcome] | None
    if arguments.jobs > 1:
        from concurrent.futures.process import BrokenProcessPool

        try:
            outcomes = check_all(paths, task, arguments.jobs)
        except BrokenProcessPool:
            return shared.refuse("one of the processes was ended from outside; try fewer --jobs")
    else:
        outcomes = check_all(paths, task, 1)
    shared.report(dict.fromkeys(problem for outcome in outcomes for problem in outcome.problems))
    status = 1 if any(outcome.fails for outcome in outcomes) else 0
    if any(outcome.checked is None for outcome in outcomes):
        status = shared.UNUSABLE
    for form, output in (("sarif", arguments.sarif), ("junit", arguments.junit)):
        if output is not None:
            status = max(status, shared.deliver(_written(outcomes, form, arguments), output))
    shared.write(_written(outcomes, asked or "text", arguments))
    return status


def _written(outcomes: Sequence[Outcome], form: str, arguments: argparse.Namespace) -> str:
    checked = [outcome.checked for outcome in outcomes if outcome.checked is not None]
    if form in ("sarif", "junit"):
        rules, problems = _rules(outcomes, arguments.rules), [p for outcome in outcomes for p in outcome.problems]
        if form == "sarif":
            from samesum.outputs.json_text import as_json
            from samesum.outputs.sarif import sarif

            return as_json(sarif(checked, rules, problems))
        from samesum.outputs.junit import junit

        limits = {str(outcome.path): outcome.fail_on for outcome in outcomes}
        return junit(checked, rules, problems, limits)
    if not checked:
        return ""
    from samesum.outputs import checks

    if form == "json":
        from samesum.outputs.json_text import as_json

        return as_json(checks.check_json(checked))
    from samesum.outputs.page import paper_for

    return checks.check_text(checked, paper_for(sys.stdout))


def _rules(outcomes: Sequence[Outcome], extra: Sequence[Path]) -> dict[str, tuple[Rule, ...]]:
    """The rules that each file was judged by."""
    from samesum.judging.rulebooks_rules import RulesFor
    from samesum.reading.read import default_cache_folder, make_reader

    chooser = RulesFor(make_reader(default_cache_folder()), extra)
    return {
        str(outcome.path): chooser.rulebook(outcome.path).rules.rules
        for outcome in outcomes
        if outcome.checked is not None
    }
