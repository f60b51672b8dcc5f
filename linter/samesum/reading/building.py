"""What the parser calls on its way: indentation made into terminals, rules made into the tree."""

from __future__ import annotations

import unicodedata
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Any, cast

from lark import Token, Transformer
from lark.exceptions import LarkError
from lark.lark import PostLex

from samesum.reading import tree

# --- indentation -----------------------------------------------------------------------------


class UnevenIndent(LarkError):
    def __init__(self, position: int) -> None:
        super().__init__("uneven indentation")
        self.position = position


class Indentation(PostLex):
    """Makes _INDENT and _DEDENT from the spaces at the start of lines."""

    always_accept = ("_NEWLINE", "NAME")

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
                    raise UnevenIndent(at)
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
    elif token.type == "CLAUSE_NUMBER":
        text = text.split(None, 1)[1]
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
                answers = ("YES", "NO") if kind == "settled" else ()
                words += _words([item], "NAME", "STRING", "CLAUSE_NUMBER", *answers)
            elif isinstance(item, tuple):
                words += item
        numbers = _nodes(items, tree.Literal) if kind not in ("cost", "only_when") else ()
        expression = items[-1] if kind in ("cost", "only_when") else None
        start = _start(items[0])
        last = items[-1]
        end = words[-1].end if isinstance(last, tuple) else _end(last)
        return tree.Phrase(start, end, kind, words, numbers, expression)

    return build


class Building(Transformer[Token, Any]):
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
    withheld = _phrase("withheld")
    settled = _phrase("settled")

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

    def settled_choice(self, items: list[Any]) -> tree.ChoiceTree:
        takes = _words(items[2:4], "NAME")
        [listed] = (item for item in items if isinstance(item, _Phrases))
        phrases = tuple(part for part in listed.items if isinstance(part, tree.Phrase))
        end = _end(phrases[-1]) if phrases else _end(takes[-1])
        return tree.ChoiceTree(_start(items[0]), end, None, phrases, _nodes(items, tree.OptionTree), takes)

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
