"""Block → tree, by lark. An unchanged block is never parsed twice in one process."""

from __future__ import annotations

import hashlib
import os
import stat
from collections import OrderedDict
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, cast

from lark import Lark, Token, UnexpectedCharacters, UnexpectedToken
from lark import __version__ as lark_version

from samesum.reading import tree
from samesum.reading.building import Building, Indentation, UnevenIndent
from samesum.reading.explain import Upset, explain
from samesum.reading.layout import logical_lines
from samesum.reading.sight import Mistake
from samesum.shipped import shipped_folder

REMEMBERED_BLOCKS = 20_000


@dataclass(slots=True)
class Memory:
    """Blocks already parsed, by their text: bounded, oldest out first. ``parsed`` counts the blocks that
    were really parsed, for whoever wants to see that an edit parses one."""

    known: OrderedDict[str, tree.Declaration | Mistake] = field(default_factory=OrderedDict)
    parsed: int = 0


@dataclass(frozen=True, slots=True)
class Parser:
    lark: Lark


def parse_block(text: str, parser: Parser, memory: Memory) -> tree.Declaration | Mistake:
    """The tree of one block, or the one mistake that keeps it from having one.

    Takes the block's text as it stands in the file; positions in what it gives count from the
    start of that text.
    """
    known = memory.known.get(text)
    if known is not None:
        memory.known.move_to_end(text)
        return known
    memory.parsed += 1
    found = cast("tree.Declaration | Mistake", _parse(text, "block", parser))
    memory.known[text] = found
    if len(memory.known) > REMEMBERED_BLOCKS:
        memory.known.popitem(last=False)
    return found


def parse_condition(text: str, parser: Parser) -> tree.Tree | Mistake:
    """The tree of a condition that stands alone, such as a lint rule's ``where``."""
    return cast("tree.Tree | Mistake", _parse(text.replace("\n", " "), "condition", parser))


def _parse(text: str, start: str, parser: Parser) -> object:
    lines = logical_lines(text) + ("\n" if start == "block" else "")
    try:
        return parser.lark.parse(lines, start=start)
    except UnevenIndent as uneven:
        return explain(lines, Upset("UNEVEN", "", uneven.position, frozenset()))
    except UnexpectedToken as upset:
        token = cast(Token, upset.token)
        expected = frozenset(upset.accepts or upset.expected)
        position = len(lines) if token.type == "$END" or token.start_pos is None else token.start_pos
        return explain(lines, Upset(token.type, str(token), position, expected))
    except UnexpectedCharacters as upset:
        position = cast(int, upset.pos_in_stream)
        return explain(lines, Upset("", upset.char, position, frozenset(upset.allowed or ())))


# --- making the parser -----------------------------------------------------------------------


def make_parser(cache_folder: Path | None) -> Parser:
    """The parser for ``grammar/rulebook.lark``.

    Takes the folder to keep the prepared grammar in (None: keep nothing). The folder is made with
    access for its owner alone; where it cannot be written or belongs to somebody else, the grammar
    is prepared anew.
    """
    grammar = (shipped_folder("grammar") / "rulebook.lark").read_text(encoding="utf-8")
    kept = _cache_file(grammar, cache_folder) if cache_folder is not None else None
    whole = kept is not None and _is_whole(kept)
    if kept is not None and not whole:
        kept.unlink(missing_ok=True)
    lark = Lark(grammar, cache=str(kept) if kept is not None else False, **parser_options())
    if kept is not None and not whole:
        _write_seal(kept)
    return Parser(lark)


def parser_options() -> dict[str, Any]:
    return {
        "parser": "lalr",
        "lexer": "contextual",
        "start": ["block", "condition"],
        "postlex": Indentation(),
        "transformer": Building(),
        "maybe_placeholders": False,
    }


def _cache_file(grammar: str, folder: Path) -> Path | None:
    try:
        folder.mkdir(mode=0o700, parents=True, exist_ok=True)
        found = folder.stat()
    except OSError:
        return None
    others = stat.S_IWGRP | stat.S_IWOTH
    if hasattr(os, "getuid") and (found.st_uid != os.getuid() or found.st_mode & others):
        return None
    if not os.access(folder, os.W_OK):
        return None
    import sys

    key = hashlib.sha256(f"{lark_version} {sys.version} {grammar}".encode()).hexdigest()[:32]
    return folder / f"grammar-{key}"


def _seal(kept: Path) -> Path:
    return kept.with_suffix(".sha256")


def _is_whole(kept: Path) -> bool:
    """Whether the kept grammar is byte for byte what was written."""
    try:
        return hashlib.sha256(kept.read_bytes()).hexdigest() == _seal(kept).read_text(encoding="ascii")
    except (OSError, UnicodeDecodeError):
        return False


def _write_seal(kept: Path) -> None:
    try:
        digest = hashlib.sha256(kept.read_bytes()).hexdigest()
        beside = kept.with_suffix(f".{os.getpid()}")
        beside.write_text(digest, encoding="ascii")
        beside.replace(_seal(kept))
    except OSError:
        return
