"""The command ``samesum``: finds the sub-command, and ends without a traceback whatever happens to the output.

Light on purpose: a sub-command's module is imported when it is called, so that ``--help`` and a slip in
the command's name answer at once.
"""

from __future__ import annotations

import argparse
import os
import sys
from collections.abc import Sequence
from importlib import import_module
from typing import Protocol, cast

from samesum import __version__

COMMANDS = {
    "check": "find the places where the number is left to whoever applies the rulebook",
    "count": "count the routes that a rulebook leaves open",
    "trial": "try a rulebook out on projects: what they get on every route, and what is proved",
    "bias": "show what choosing does to a programme as a whole, and what closing a choice leaves",
    "register": "list the branch points with their evidence, and keep the review body's decisions",
    "compare": "say what a new draft opens and closes, and whether it leaves more to somebody",
    "report": "draw up one page to read, print and hand on",
    "watch": "check again on every save, and show what changed",
}

CAUTION = (
    "samesum supports the people who write and review methodologies. It does not replace accredited\n"
    "validation and verification, nor a programme's own rules."
)


class Command(Protocol):
    """What every sub-command's module has."""

    def add_arguments(self, parser: argparse.ArgumentParser) -> None: ...

    def run(self, arguments: argparse.Namespace) -> int: ...


def main(argv: Sequence[str] | None = None) -> int:
    """Runs a command line (without the program's name); gives the exit status: 0 nothing to object to, 1 findings
    at or above the failing severity, 2 the input or the call could not be used."""
    words = list(sys.argv[1:] if argv is None else argv)
    _tolerant_output()
    # numpy starts threads for linear algebra as it is imported; nothing here uses them, and they cost 60 ms.
    os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
    try:
        try:
            status = _dispatch(words)
        except SystemExit as end:  # argparse ends this way, after --help and after a mistake in the call
            status = end.code if isinstance(end.code, int) else 2
        if sys.stdout is not None:
            sys.stdout.flush()
        return status
    except BrokenPipeError:
        _drop_output()
        return 0
    except KeyboardInterrupt:
        _say("samesum: stopped")
        return 130
    except OSError as error:
        _drop_output()
        _say(f"samesum: the output could not be written: {error.strerror or error}")
        return 2


def _dispatch(words: list[str]) -> int:
    name = words[0] if words else ""
    if name in COMMANDS:
        command = cast(Command, import_module(f"samesum.cli.{name}"))
        parser = argparse.ArgumentParser(
            prog=f"samesum {name}", description=_sentence(COMMANDS[name]), epilog=CAUTION, allow_abbrev=False
        )
        command.add_arguments(parser)
        return command.run(parser.parse_args(words[1:]))
    parser = argparse.ArgumentParser(
        prog="samesum",
        description="Does a quantification rulebook give the same number whoever applies it?",
        epilog="commands:\n"
        + "".join(f"  {name:<10}{what}\n" for name, what in COMMANDS.items())
        + "\n`samesum COMMAND --help` tells more about one of them.\n\n"
        + CAUTION,
        formatter_class=argparse.RawDescriptionHelpFormatter,
        usage="samesum COMMAND FILE ... [options]",
        allow_abbrev=False,
    )
    parser.add_argument("--version", action="version", version=f"samesum {__version__}")
    parser.add_argument("command", nargs="?", metavar="COMMAND", help="what to do: " + ", ".join(COMMANDS))
    if not words:
        parser.print_help()
        return 0
    known = parser.parse_args(words[:1])
    from samesum.reading.words import nearest

    close = nearest(known.command, COMMANDS)
    hint = f"did you mean `{close}`?" if close else "the commands are " + ", ".join(COMMANDS)
    _say(f"samesum: there is no command `{known.command}`; {hint}")
    return 2


def _sentence(text: str) -> str:
    return text[0].upper() + text[1:] + "."


def _say(line: str) -> None:
    if sys.stderr is not None:
        try:
            print(line, file=sys.stderr)
        except OSError:
            return


def _tolerant_output() -> None:
    """A letter that the terminal cannot show must not end the program."""
    for stream in (sys.stdout, sys.stderr):
        reconfigure = getattr(stream, "reconfigure", None)
        if reconfigure is not None:
            reconfigure(errors="replace")


def _drop_output() -> None:
    """Nobody reads any more: let the interpreter flush into nothing when it ends."""
    try:
        descriptor = sys.stdout.fileno()
    except (OSError, ValueError, AttributeError):
        return
    nowhere = os.open(os.devnull, os.O_WRONLY)
    os.dup2(nowhere, descriptor)
    os.close(nowhere)
