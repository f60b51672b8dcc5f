"""``samesum check``: the places where the number is left to whoever applies the rulebook."""

from __future__ import annotations

import argparse
import sys
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from samesum.cli import shared

if TYPE_CHECKING:
    from samesum.outputs.checks import Checked


def add_arguments(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("files", metavar="FILE", nargs="+", type=Path, help=".rulebook files")
    shared.add_json(parser)
    shared.add_seconds(parser)
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


def run(arguments: argparse.Namespace) -> int:
    from samesum.examine import examine
    from samesum.judging.findings import at_or_above
    from samesum.judging.rulebooks_rules import RulesFor
    from samesum.outputs.checks import Checked
    from samesum.reading.read import default_cache_folder, make_reader

    reader = make_reader(default_cache_folder())
    chooser = RulesFor(reader, arguments.rules)
    checked: list[Checked] = []
    status = 0
    reported: set[object] = set()
    for path in dict.fromkeys(arguments.files):
        chosen = chooser.rulebook(path)
        if chosen.problems:
            shared.report(problem for problem in chosen.problems if problem not in reported)
            reported.update(chosen.problems)
            status = shared.UNUSABLE
            continue
        examined = examine(path, arguments.seconds, chosen.rules, reader)
        if examined.evidence is None or examined.judged is None:
            shared.report(examined.problems)
            status = shared.UNUSABLE
            continue
        limit = arguments.fail_on or chosen.fail_on or "warning"
        if any(at_or_above(finding.severity, limit) for finding in examined.judged.findings):
            status = max(status, 1)
        checked.append(Checked(str(path), examined.evidence, examined.judged, chosen.rules))
    if checked:
        _write(checked, arguments.json)
    return status


def _write(checked: Sequence[Checked], as_json: bool) -> None:
    from samesum.outputs import checks

    if as_json:
        from samesum.outputs.json_text import as_json as text_of

        shared.write(text_of(checks.check_json(checked)))
    else:
        from samesum.outputs.page import paper_for

        shared.write(checks.check_text(checked, paper_for(sys.stdout)))
