"""``samesum report``: one page to read, print and hand on."""

from __future__ import annotations

import argparse
from pathlib import Path

from samesum.cli import shared


def add_arguments(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("file", metavar="FILE", type=Path, help="a .rulebook file")
    parser.add_argument("-o", "--output", type=Path, metavar="OUT.html", help="where to (standard output)")
    shared.add_inputs(parser)
    shared.add_seconds(parser)


def run(arguments: argparse.Namespace) -> int:
    from samesum.cli.gathered import gather_register
    from samesum.outputs.report.page import Extra, report_page

    gathered = gather_register(arguments.file, arguments.inputs, arguments.seconds)
    if gathered is None:
        return shared.UNUSABLE
    examined, register = gathered
    return shared.deliver(report_page(register, examined.reading.text, Extra()), arguments.output)
