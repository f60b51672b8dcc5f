"""``samesum watch``: checks again on every save, and shows what changed since the last one."""

from __future__ import annotations

import argparse
import sys
from pathlib import Path

from samesum.cli import shared


def add_arguments(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("file", metavar="FILE", type=Path, help="a .rulebook file")
    parser.add_argument(
        "--rules", metavar="DIR", type=Path, action="append", default=[], help="a folder of further rules"
    )
    shared.add_seconds(parser)


def run(arguments: argparse.Namespace) -> int:
    from samesum.cli.checking import Task, check_one
    from samesum.editor.watching import saves, stamps
    from samesum.judging.rulebooks_rules import RulesFor
    from samesum.outputs.page import paper_for
    from samesum.outputs.watched import Seen, change_text, first_text
    from samesum.reading.read import default_cache_folder, make_reader
    from samesum.reviewing.record import record_path

    file: Path = arguments.file
    if not file.is_file():
        return shared.refuse(f"{file}: there is no such file")
    reader = make_reader(default_cache_folder())  # remembers the blocks that did not change
    task = Task(arguments.seconds, tuple(arguments.rules), None)

    def look() -> Seen:
        found = check_one(file, task, reader, RulesFor(reader, task.rules))
        return Seen(found.problems, found.checked)

    def show(text: str) -> None:
        shared.write(text)
        if sys.stdout is not None:
            sys.stdout.flush()

    place = file.resolve()
    watched = (place, record_path(place), place.parent / "samesum.yaml")
    since = stamps(watched)
    seen = look()
    checked = seen
    show(first_text(seen, paper_for(sys.stdout)))
    show("Watching; Ctrl-C ends it.\n")
    try:
        for _ in saves(watched, place.parent, since):
            if file.is_file():  # else it is being put in place, and another event follows
                seen = look()
                show(change_text(checked, seen, paper_for(sys.stdout)))
                checked = seen if seen.checked is not None or checked.checked is None else checked
    except KeyboardInterrupt:  # the way to end it
        return 0
    return 0
