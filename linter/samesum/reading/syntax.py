"""Block → tree, by lark. An unchanged block is never parsed twice in one process."""

from __future__ import annotations

import hashlib
import os
import stat
import unicodedata
from collections import OrderedDict
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, cast

from lark import Lark, Token, Transformer, UnexpectedCharacters, UnexpectedToken
from lark import __version__ as lark_version
from lark.exceptions import LarkError
from lark.lark import PostLex

from samesum.reading import tree
from samesum.reading.explain import Upset, explain
from samesum.reading.layout import logical_lines
from samesum.reading.slips import Mistake
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
    lines = logical_lines(text)
    try:
        return parser.lark.parse(lines + "\n" if start == "block" else lines, start=start)
    except _UnevenIndent as uneven:
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
    if kept is not None and not _is_whole(kept):
        kept.unlink(missing_ok=True)
    lark = Lark(grammar, cache=str(kept) if kept is not None else False, **_options())
    if kept is not None and not _seal(kept).exists():
        _write_seal(kept)
    return Parser(lark)


def _options() -> dict[str, Any]:
    return {
        "parser": "lalr",
        "lexer": "contextual",
        "start": ["block", "condition"],
        "postlex": _Indentation(),
        "transformer": _Building(),
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


# --- indentation -----------------------------------------------------------------------------


class _UnevenIndent(LarkError):
    def __init__(self, position: int) -> None:
        super().__init__("uneven indentation")
        self.position = position


class _Indentation(PostLex):
    """Makes _INDENT and _DEDENT from the spaces at the start of lines."""

    always_accept = ("_NEWLINE",)

    def process(self, stream: Iterator[Token]) -> Iterator[Token]:
        levels = [0]
        for token in stream:
            yield token
            if token.type != "_NEWLINE":
                continue
            spaces = len(token) - 1 - token.rindex("\n")
            at = cast(int, token.end_pos)
            if spaces > levels[-1]:
                levels.append(spaces)
                yield Token("_INDENT", "", start_pos=at, end_pos=at)
            while spaces < levels[-1]:
                levels.pop()
                if spaces > levels[-1]:
                    raise _UnevenIndent(at)
                yield Token("_DEDENT", "", start_pos=at, end_pos=at)


# --- building the tree -----------------------------------------------------------------------


def _start(item: Token | tree.Node) -> int:
    return cast(int, item.start_pos) if isinstance(item, Token) else item.start


def _end(item: Token | tree.Node) -> int:
    return cast(int, item.end_pos) if isinstance(item, Token) else item.end


def _word(token: Token) -> tree.Word:
    text = str(token)
    if token.type == "STRING":
        text = text[1:-1].strip()
    elif token.type == "UNIT":
        text = " ".join(text[1:-1].split())
    return tree.Word(_start(token), _end(token), unicodedata.normalize("NFC", text))


def _words(items: list[Any], *types: str) -> tuple[tree.Word, ...]:
    return tuple(_word(item) for item in items if isinstance(item, Token) and item.type in types)


def _nodes(items: list[Any], kind: type[Any]) -> tuple[Any, ...]:
    return tuple(item for item in items if isinstance(item, kind))


def _has(items: list[Any], type_: str) -> bool:
    return any(isinstance(item, Token) and item.type == type_ for item in items)


def _reach(items: list[Any]) -> tuple[int, int]:
    return _start(items[0]), _end(items[-1])


def _pairs(items: list[Any]) -> tuple[tuple[str, tree.Tree], ...]:
    return tuple((str(items[at]), items[at + 1]) for at in range(1, len(items), 2))


def _phrase(kind: str) -> Callable[[Any, list[Any]], tree.Phrase]:
    def build(self: object, items: list[Any]) -> tree.Phrase:
        words: tuple[tree.Word, ...] = ()
        for item in items:
            if isinstance(item, Token):
                words += _words([item], "NAME", "STRING", "CLAUSE_NUMBER")
            elif isinstance(item, tuple):
                words += item
        numbers = _nodes(items, tree.Literal) if kind not in ("cost", "only_when") else ()
        expression = items[-1] if kind in ("cost", "only_when") else None
        start = _start(items[0])
        last = items[-1]
        end = words[-1].end if isinstance(last, tuple) else _end(last)
        return tree.Phrase(start, end, kind, words, numbers, expression)

    return build


class _Building(Transformer[Token, Any]):
    """One method a rule of the grammar, by the rule's name; each takes the parts of the rule."""

    # declarations

    def _declaration(self, items: list[Any]) -> tree.Declaration:
        first: Token = items[0]
        head = next((item for item in items if isinstance(item, _Head)), None)
        listed = [part for item in items if isinstance(item, _Phrases) for part in item.items]
        end = _end(first)
        for item in items[1:]:
            if isinstance(item, _Under):
                break
            if isinstance(item, (Token, tree.Node)):
                end = max(end, _end(item))
            elif isinstance(item, _Head):
                end = max(end, item.end)
            elif item.items:
                end = max(end, _end(item.items[-1]))
        phrases = [part for part in listed if isinstance(part, tree.Phrase)]
        keys = [part for part in listed if isinstance(part, tree.Word)]
        if head is not None:
            phrases = [*head.phrases, *phrases]
        if first.type == "TABLE":
            keys = [*(word for part in phrases if part.kind == "by" for word in part.words), *keys]
            keys.sort(key=lambda word: word.start)
            phrases = [part for part in phrases if part.kind != "by"]
        under = next((item for item in items if isinstance(item, _Under)), _Under(()))
        expression = next((item for item in items[1:] if isinstance(item, tree.Tree)), None)
        name = head.name if head is not None else next(iter(_words(items[1:2], "NAME", "STRING")), None)
        return tree.Declaration(
            start=_start(first),
            end=end,
            kind=str(first),
            name=name,
            units=head.units if head is not None else (),
            phrases=tuple(phrases),
            keys=tuple(keys),
            expression=expression,
            notes=tuple(item for item in under.items if isinstance(item, tree.Word)),
            rows=tuple(item for item in under.items if isinstance(item, tree.RowTree)),
            body=next((item for item in under.items if isinstance(item, tree.BodyTree)), None),
        )

    rulebook = result = periods = applies = index = fact = setting = judgement = constant = table = _declaration

    def quantity(self, items: list[Any]) -> tree.Declaration:
        under = [item for item in items[2:] if isinstance(item, (tree.Word, tree.BodyTree))]
        return self._declaration([*items[:3], _Under(tuple(under))])

    def head(self, items: list[Any]) -> _Head:
        return _Head(
            _word(items[0]), _words(items, "UNIT"), tuple(_nodes(items, tree.Phrase)), max(_end(item) for item in items)
        )

    def notes(self, items: list[Any]) -> _Under:
        return _Under(tuple(item for item in items if isinstance(item, tree.Word)))

    def rows(self, items: list[Any]) -> _Under:
        return _Under(tuple(item for item in items if isinstance(item, (tree.Word, tree.RowTree))))

    def note(self, items: list[Any]) -> tree.Word:
        return _word(items[0])

    def row(self, items: list[Any]) -> tree.RowTree:
        value = items[-1] if not isinstance(items[-1], Token) else items[-2]
        return tree.RowTree(_start(items[0]), _end(value), _nodes(items, tree.Label), value)

    def label_name(self, items: list[Any]) -> tree.Label:
        return tree.Label(*_reach(items), _word(items[0]))

    def band_up_to(self, items: list[Any]) -> tree.Label:
        return tree.Label(*_reach(items), None, None, items[-1])

    def band_between(self, items: list[Any]) -> tree.Label:
        return tree.Label(*_reach(items), None, items[1], items[-1])

    def band_above(self, items: list[Any]) -> tree.Label:
        return tree.Label(*_reach(items), None, items[1], None)

    # phrases

    def phrases(self, items: list[Any]) -> _Phrases:
        return _Phrases(tuple(item for item in items if isinstance(item, tree.Node)))

    table_phrases = phrases

    def key(self, items: list[Any]) -> tree.Word:
        return _word(items[0])

    def names(self, items: list[Any]) -> tuple[tree.Word, ...]:
        return _words(items, "NAME")

    def literal(self, items: list[Any]) -> tree.Literal:
        number = next(item for item in items if item.type == "NUMBER")
        unit = next(iter(_words(items, "UNIT")), None)
        return tree.Literal(*_reach(items), str(number), _has(items, "MINUS"), _has(items, "PERCENT"), unit)

    number = literal
    clause = _phrase("clause")
    source = _phrase("source")
    draft = _phrase("draft")
    rounded = _phrase("rounded")
    at_most = _phrase("at_most")
    range = _phrase("range")
    one_of = _phrase("one_of")
    yes_no = _phrase("yes_no")
    by = _phrase("by")
    per = _phrase("per")
    wording = _phrase("wording")
    spread = _phrase("spread")
    fixed = _phrase("fixed")
    open = _phrase("open")
    correlated = _phrase("correlated")
    only_when = _phrase("only_when")
    error = _phrase("error")
    bias = _phrase("bias")
    cost = _phrase("cost")
    reference = _phrase("reference")

    # bodies

    def formula(self, items: list[Any]) -> tree.FormulaTree:
        return tree.FormulaTree(_start(items[0]), _end(items[1]), items[1])

    def cases(self, items: list[Any]) -> tree.CasesTree:
        ordered = _has(items, "ORDER")
        end = _end(items[2]) if ordered else _end(items[0])
        return tree.CasesTree(_start(items[0]), end, ordered, _nodes(items, tree.WhenTree))

    def when(self, items: list[Any]) -> tree.WhenTree:
        body = next(item for item in items[2:] if isinstance(item, tree.BodyTree))
        return tree.WhenTree(_start(items[0]), _end(items[1]), items[1], body)

    def otherwise(self, items: list[Any]) -> tree.WhenTree:
        body = next(item for item in items if isinstance(item, tree.BodyTree))
        return tree.WhenTree(_start(items[0]), _end(items[0]), None, body)

    def choice(self, items: list[Any]) -> tree.ChoiceTree:
        phrases = (items[1], *items[2].items)
        return tree.ChoiceTree(_start(items[0]), _end(phrases[-1]), None, phrases, _nodes(items, tree.OptionTree))

    def follow(self, items: list[Any]) -> tree.ChoiceTree:
        phrases = items[3].items
        end = _end(phrases[-1]) if phrases else _end(items[2])
        return tree.ChoiceTree(_start(items[0]), end, _word(items[2]), phrases, _nodes(items, tree.OptionTree))

    def option(self, items: list[Any]) -> tree.OptionTree:
        phrases = items[2].items
        body = next(item for item in items if isinstance(item, tree.BodyTree))
        end = _end(phrases[-1]) if phrases else _end(items[1])
        return tree.OptionTree(_start(items[0]), end, _word(items[1]), phrases, body)

    # expressions and conditions

    def condition(self, items: list[Any]) -> Any:
        return items[0]

    def either(self, items: list[Any]) -> tree.Either:
        return tree.Either(*_reach(items), tuple(items[::2]))

    def both(self, items: list[Any]) -> tree.Both:
        return tree.Both(*_reach(items), tuple(items[::2]))

    def negated(self, items: list[Any]) -> tree.Negated:
        return tree.Negated(*_reach(items), items[1])

    def compared(self, items: list[Any]) -> tree.Compared:
        return tree.Compared(*_reach(items), items[0], _pairs(items))

    def is_value(self, items: list[Any]) -> tree.IsValue:
        last = items[-1]
        values = last if isinstance(last, tuple) else (_word(last),)
        return tree.IsValue(_start(items[0]), values[-1].end, items[0], values, _has(items, "NOT"))

    def takes(self, items: list[Any]) -> tree.TakesOption:
        return tree.TakesOption(*_reach(items), items[0], _word(items[2]))

    def sum(self, items: list[Any]) -> tree.Chain:
        return tree.Chain(*_reach(items), items[0], _pairs(items))

    product = sum

    def minus(self, items: list[Any]) -> tree.Minus:
        return tree.Minus(*_reach(items), items[1])

    def power(self, items: list[Any]) -> tree.Power:
        return tree.Power(*_reach(items), items[0], items[2])

    def use(self, items: list[Any]) -> tree.Use:
        return tree.Use(*_reach(items), _word(items[0]))

    def call(self, items: list[Any]) -> tree.Call:
        return tree.Call(*_reach(items), _word(items[0]), tuple(items[2::2]))

    def reduction(self, items: list[Any]) -> tree.Reduce:
        return tree.Reduce(*_reach(items), _word(items[0]), items[2], _word(items[4]))

    def grouped(self, items: list[Any]) -> tree.Grouped:
        return tree.Grouped(*_reach(items), items[1], next(iter(_words(items, "UNIT")), None))


@dataclass(frozen=True, slots=True)
class _Head:
    name: tree.Word
    units: tuple[tree.Word, ...]
    phrases: tuple[tree.Phrase, ...]
    end: int


@dataclass(frozen=True, slots=True)
class _Phrases:
    items: tuple[tree.Node, ...]


@dataclass(frozen=True, slots=True)
class _Under:
    """What stands under a declaration's first line."""

    items: tuple[tree.Node, ...]


__all__ = ["Memory", "Mistake", "Parser", "make_parser", "parse_block", "parse_condition"]
