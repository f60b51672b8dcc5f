"""Reading a rulebook: text → model and problems. The line of stages is ``read``."""

from __future__ import annotations

import os
from dataclasses import dataclass
from pathlib import Path

from samesum.problems import Problem, in_order
from samesum.reading.blocks import Block, blocks_of, glance
from samesum.reading.model import Model
from samesum.reading.names import Placed
from samesum.reading.resolve import Recall, Unreadable, resolve
from samesum.reading.sight import Mistake
from samesum.reading.syntax import Memory, Parser, make_parser, parse_block
from samesum.reading.tree import Place
from samesum.reading.units import UnitTable, load_units
from samesum.spans import START, Span

LARGEST_FILE = 4_000_000
_TOO_LONG = f"the file is longer than {LARGEST_FILE:,} characters"


@dataclass(frozen=True, slots=True)
class Reading:
    """``model`` is None when no block could be read; ``problems`` are in order; ``text`` is what was read,
    with line ends made plain."""

    model: Model | None
    problems: tuple[Problem, ...]
    text: str


@dataclass(frozen=True, slots=True)
class Reader:
    """What is prepared once and used for many texts. Nothing in it changes what a text means."""

    parser: Parser
    units: UnitTable
    memory: Memory
    recall: Recall


def default_cache_folder() -> Path | None:
    """The user's own cache folder for samesum; None when there is no home to put it in."""
    base = os.environ.get("XDG_CACHE_HOME", "")
    if base and Path(base).is_absolute():
        return Path(base) / "samesum"
    try:
        return Path.home() / ".cache" / "samesum"
    except RuntimeError:
        return None


def make_reader(cache_folder: Path | None = None) -> Reader:
    """A reader that keeps its prepared grammar in ``cache_folder`` (None: nowhere)."""
    return Reader(make_parser(cache_folder), load_units(), Memory(), Recall())


def read(text: str, file: str, cache_folder: Path | None = None, reader: Reader | None = None) -> Reading:
    """The model of a rulebook's text and every problem in it.

    ``file`` is the name that problems carry. Give a ``reader`` to read many texts, or one again and
    again: it remembers blocks that have not changed.
    """
    if reader is None:
        reader = make_reader(cache_folder or default_cache_folder())
    text = text.removeprefix("\ufeff").replace("\r\n", "\n")
    if len(text) > LARGEST_FILE:
        return _unusable(file, _TOO_LONG, "a rulebook is text for people")
    blocks = blocks_of(text)
    trees, unreadable, problems = _parse(blocks, file, reader)
    if not trees and not unreadable:
        return _unusable(file, "the file holds no rulebook", 'start it with `rulebook "TITLE", draft "VERSION"`', text)
    model, more = resolve(file, trees, unreadable, reader.units, reader.recall)
    return Reading(model if trees else None, in_order([*problems, *more] if trees else problems), text)


def read_file(path: Path, cache_folder: Path | None = None, reader: Reader | None = None) -> Reading:
    """Like ``read``, from a file in UTF-8. A file that cannot be read is a problem, too."""
    file = str(path)
    try:
        if path.is_dir():
            return _unusable(file, "this is a folder, not a file", "name the rulebook inside it")
        if path.stat().st_size > 4 * LARGEST_FILE:
            return _unusable(file, _TOO_LONG, "a rulebook is text for people")
        raw = path.read_bytes()
    except FileNotFoundError:
        return _unusable(file, "there is no such file")
    except OSError as trouble:
        return _unusable(file, f"the file cannot be read: {trouble.strerror or trouble}")
    except ValueError:
        return _unusable(file, "this is no file name")
    try:
        text = raw.decode("utf-8")
    except UnicodeDecodeError as trouble:
        before = raw[: trouble.start].decode("utf-8")
        line, column = before.count("\n") + 1, len(before) - before.rfind("\n")
        says = "the file is not in UTF-8 from here on"
        at = Span(line, column, line, column + 1)
        return Reading(None, (Problem(file, at, says, "save it as UTF-8 text", "file"),), "")
    return read(text, file, cache_folder, reader)


def _unusable(file: str, says: str, remedy: str = "", text: str = "") -> Reading:
    return Reading(None, (Problem(file, START, says, remedy, "file"),), text)


def _parse(
    blocks: tuple[Block, ...], file: str, reader: Reader
) -> tuple[list[Placed], list[Unreadable], list[Problem]]:
    trees: list[Placed] = []
    unreadable: list[Unreadable] = []
    problems: list[Problem] = []
    for block in blocks:
        place = Place.of(block.text, block.line)
        found = parse_block(block.text, reader.parser, reader.memory)
        if isinstance(found, Mistake):
            problems.append(Problem(file, place.span(found.start, found.end), found.says, found.remedy, "syntax"))
            kind, name = glance(block.text)
            unreadable.append(Unreadable(kind, name, place.span(0, 1)))
        else:
            trees.append(Placed(found, place, len(block.text)))
    return trees, unreadable, problems
