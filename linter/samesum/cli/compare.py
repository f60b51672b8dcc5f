"""``samesum compare``: what a new draft opens and closes."""

from __future__ import annotations

import argparse
import sys
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from samesum.cli import gathered, shared

if TYPE_CHECKING:
    from samesum.reviewing.compare import Comparison, Moved


LEAVES_MORE = (
    "A draft leaves more when a place to decide is new, has more options or values, has an option whose condition is "
    "gone or lets more projects through, or can be moved by more people; when, of two options, the estimates lie "
    "further apart (by the standard deviation of their difference, worked out from the stated errors and their "
    "correlation) or the biases do; when an error is stated no longer; when a project has no result any more, or more "
    "routes. What the rulebook takes now in place of something else, and a cost that changed, are listed and leave "
    "nothing more: a cost moves no number, only what is tried first."
)


def add_arguments(parser: argparse.ArgumentParser) -> None:
    parser.description = f"{parser.description} {LEAVES_MORE}"
    parser.add_argument(
        "files",
        metavar="FILE",
        nargs="+",
        help="OLD and NEW; each may be REV:FILE, a file in a revision of git (HEAD~1:tide.rulebook)",
    )
    parser.add_argument(
        "--since", metavar="REV", help="compare each FILE with itself in this revision of git; new files are let pass"
    )
    parser.add_argument(
        "--allow",
        metavar="NAME",
        action="append",
        default=[],
        help="a branch point or figure that may leave more than before; may be given several times",
    )
    parser.add_argument(
        "--inputs",
        metavar="CASES",
        type=Path,
        action="append",
        default=[],
        help="projects for both drafts, a .yaml, .csv or .parquet file; given twice, for OLD and for NEW: adds spread "
        "and over-issuance",
    )
    gathered.add_projects(parser)
    shared.add_json(parser)
    shared.add_seconds(parser)


def run(arguments: argparse.Namespace) -> int:
    pairs: list[tuple[str, str]]
    if arguments.since is None:
        if len(arguments.files) != 2:
            return shared.refuse("compare takes two files, OLD and NEW; or --since REV with any number of files")
        pairs = [(arguments.files[0], arguments.files[1])]
    else:
        pairs = [(f"{arguments.since}:{file}", file) for file in dict.fromkeys(arguments.files)]
    if len(arguments.inputs) > 2:
        return shared.refuse("--inputs is given once for both drafts, or twice, for OLD and for NEW")
    status = 0
    found: list[Comparison] = []
    for old, new in pairs:
        made = _compared(old, new, arguments)
        if isinstance(made, int):
            status = max(status, made)
        else:
            found.append(made)
            status = max(status, 1 if made.grew else 0)
    if found and _unknown(arguments.allow, found):
        return shared.UNUSABLE
    if found:
        _write(found, arguments)
    return status


def _compared(old: str, new: str, arguments: argparse.Namespace) -> Comparison | int:
    """One comparison; an exit status when there is nothing to compare (0 for a new file)."""
    from samesum.reviewing.compare import compare

    before = _gathered(old, arguments, arguments.inputs[:1], lenient=arguments.since is not None)
    if before is None or isinstance(before, int):
        return shared.UNUSABLE if before is None else before
    after = _gathered(new, arguments, arguments.inputs[-1:])
    if after is None or isinstance(after, int):
        return shared.UNUSABLE
    measured: tuple[Moved, ...] = ()
    if arguments.inputs:
        from samesum.reviewing.measured import moved

        measured = moved(before.tried, after.tried)
    return compare(before.register, after.register, arguments.allow, arguments.seconds, measured)


def _gathered(
    name: str, arguments: argparse.Namespace, inputs: Sequence[Path], lenient: bool = False
) -> gathered.Gathered | int | None:
    """What is known of a file or a revision; None when it could not be read, which is then said. ``lenient``:
    a file that is not in the revision is new, and gives the exit status 0."""
    from samesum.cli.revisions import former_text, is_revision
    from samesum.reading.read import read, read_file

    if is_revision(name):
        revision, _, file = name.partition(":")
        former = former_text(revision, Path(file))
        if former.text is None:
            if former.absent and lenient and Path(file).is_file():
                shared.report_line(f"{file}: new since {revision}, nothing to compare with")
                return 0
            shared.refuse(former.says)
            return None
        reading = read(former.text, name)
    else:
        reading = read_file(Path(name))
    projects = arguments.projects if inputs else 0
    cases = inputs[0] if inputs else None
    more = "" if len(arguments.inputs) == 2 else "; --inputs may be given twice, once for OLD and once for NEW"
    told = f"{cases}, as read for {name}{more}:"
    asked = gathered.Wanted(cases, arguments.seconds, projects, arguments.seed, record=False, reading=told)
    return gathered.registered(reading, Path(name.rpartition(":")[2]), asked)


def _unknown(allowed: Sequence[str], found: Sequence[Comparison]) -> bool:
    """Whether ``--allow`` names what is in no draft; says so."""
    from samesum.reading.words import nearest
    from samesum.reviewing.compare import known_names

    known = {name for each in found for name in known_names(each)}
    for name in allowed:
        if name not in known:
            close = nearest(name, sorted(known))
            hint = f"did you mean `{close}`?" if close else "name a branch point or a figure of `samesum count`"
            shared.refuse(f"--allow {name}: neither draft has it; {hint}")
            return True
    return False


def _write(found: Sequence[Comparison], arguments: argparse.Namespace) -> None:
    from samesum.outputs import comparison

    if arguments.json:
        from samesum.outputs.json_text import as_json

        answers = [comparison.comparison_json(each) for each in found]
        many = {"comparisons": answers, "grew": any(each.grew for each in found)}
        shared.write(as_json(answers[0] if arguments.since is None else many))
    else:
        from samesum.outputs.page import paper_for

        shared.write(comparison.comparison_text(found, paper_for(sys.stdout)))
