"""``samesum count``: how many routes a rulebook leaves open."""

from __future__ import annotations

import argparse
import sys
from pathlib import Path

from samesum.cli import shared


def add_arguments(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("file", metavar="FILE", type=Path, help="a .rulebook file")
    shared.add_json(parser)
    shared.add_seconds(parser)


def run(arguments: argparse.Namespace) -> int:
    from samesum.examine import examine

    examined = examine(arguments.file, arguments.seconds)
    if examined.evidence is None:
        shared.report(examined.problems)
        return shared.UNUSABLE
    from samesum.outputs.counts import count_json, count_text

    if arguments.json:
        from samesum.outputs.json_text import as_json

        shared.write(as_json(count_json(examined.evidence)))
    else:
        from samesum.outputs.page import paper_for

        shared.write(count_text(examined.evidence, paper_for(sys.stdout)))
    return 0
