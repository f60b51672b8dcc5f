"""YAML files (settings, rules, cases) as a small tree with positions.

Only what such files need: mappings, lists and scalars. Scalars stay *text* (YAML 1.1 would turn ``no`` into
False, ``4.10`` into 4.1 and ``12:30`` into 750); whoever reads the tree decides what a text means. Aliases,
tags, repeated keys, several documents and nesting deeper than 50 are refused.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from samesum.problems import Problem, in_order
from samesum.spans import START, Span

DEEPEST = 50


@dataclass(frozen=True, slots=True)
class Scalar:
    """A text as written. ``quoted`` tells ``"no"`` from ``no``; ``text`` is "" for a value left empty."""

    text: str
    quoted: bool
    span: Span


@dataclass(frozen=True, slots=True)
class Listing:
    """A list, in the order written."""

    items: tuple[Node, ...]
    span: Span


@dataclass(frozen=True, slots=True)
class Entry:
    """``key: value``."""

    key: Scalar
    value: Node


@dataclass(frozen=True, slots=True)
class Fields:
    """A mapping, in the order written; no key stands twice."""

    entries: tuple[Entry, ...]
    span: Span

    def get(self, name: str) -> Node | None:
        """The value of a key, None when the key is not there."""
        return next((entry.value for entry in self.entries if entry.key.text == name), None)

    def __iter__(self) -> Iterator[Entry]:
        return iter(self.entries)


Node = Scalar | Listing | Fields


def read_yaml(path: Path, name: str = "") -> tuple[Node | None, tuple[Problem, ...]]:
    """The tree of a file, and its problems. ``name`` is the file as messages call it (``path`` unless given)."""
    name = name or str(path)
    try:
        text = path.read_bytes().decode("utf-8-sig")
    except FileNotFoundError:
        return None, (Problem(name, START, "there is no such file", "check the name and the folder", "file"),)
    except OSError as error:
        says = f"the file cannot be read: {error.strerror or 'unknown reason'}"
        return None, (Problem(name, START, says, "check the name and who may read it", "file"),)
    except UnicodeDecodeError as error:
        line = error.object[: error.start].count(b"\n") + 1
        says = "the file is not UTF-8 text"
        return None, (Problem(name, Span(line, 1, line, 1), says, "save it as UTF-8 in your editor", "file"),)
    return parse_yaml(text, name)


def parse_yaml(text: str, file: str) -> tuple[Node | None, tuple[Problem, ...]]:
    """The tree of a YAML text and everything that is wrong with it. None for an empty text, and when the text
    is so broken that nothing can be said of it. Reading stops at the first mistake in the punctuation."""
    import yaml

    builder = _Builder(file)
    # the parser in C reads some ten times faster; PyYAML can be built without it
    loader: Any = getattr(yaml, "CSafeLoader", yaml.SafeLoader)
    try:
        for event in yaml.parse(text, Loader=loader):
            if not builder.take(event):
                break
    except yaml.YAMLError as error:
        builder.problems.append(_explained(error, text, file))
        return None, in_order(builder.problems)
    return builder.root, in_order(builder.problems)


@dataclass(slots=True)
class _Open:
    """A mapping or list that has begun. ``key`` is the key whose value comes next."""

    start: Span
    mapping: bool
    items: list[Node]
    entries: list[Entry]
    seen: dict[str, Span]
    key: Scalar | None = None


class _Builder:
    """Takes the parser's events one by one; ``root`` and ``problems`` are what comes of them."""

    def __init__(self, file: str) -> None:
        self.file = file
        self.root: Node | None = None
        self.problems: list[Problem] = []
        self._stack: list[_Open] = []
        self._documents = 0

    def take(self, event: Any) -> bool:
        """One event; False when reading should stop."""
        kind = type(event).__name__
        span = _span(event)
        if kind == "DocumentStartEvent":
            self._documents += 1
            if self._documents > 1:
                self._report(span, "a second document begins here", "keep one document in a file (one `---` at most)")
                return False
        elif kind == "AliasEvent":
            self._report(span, "an alias (`*name`) stands here", "write the value out")
            self._place(Scalar("", False, span))
        elif kind in ("ScalarEvent", "MappingStartEvent", "SequenceStartEvent"):
            if event.anchor is not None:
                self._report(span, "an anchor (`&name`) stands here", "leave it out and write values out")
            if event.tag is not None:
                self._report(span, f"a tag (`{event.tag}`) stands here", "leave it out")
            if kind == "ScalarEvent":
                self._place(Scalar(event.value, event.style in ("'", '"', "|", ">"), span))
            elif len(self._stack) >= DEEPEST:
                self._report(span, f"the file is nested deeper than {DEEPEST} levels", "make it flatter")
                return False
            else:
                self._stack.append(_Open(span, kind == "MappingStartEvent", [], [], {}))
        elif kind in ("MappingEndEvent", "SequenceEndEvent"):
            made = self._stack.pop()
            whole = made.start.to(span)
            self._place(Fields(tuple(made.entries), whole) if made.mapping else Listing(tuple(made.items), whole))
        return True

    def _place(self, node: Node) -> None:
        if not self._stack:
            self.root = node
            return
        top = self._stack[-1]
        if not top.mapping:
            top.items.append(node)
        elif top.key is None:
            if isinstance(node, Scalar):
                top.key = node
            else:
                self._report(node.span, "a list or a mapping stands where a name is expected", "write a plain name")
                top.key = Scalar("", False, node.span)
        else:
            key, top.key = top.key, None
            if key.text in top.seen:
                earlier = top.seen[key.text]
                says = f"`{key.text}` stands here a second time (first on line {earlier.line})"
                self._report(key.span, says, "keep one of the two")
                return
            top.seen[key.text] = key.span
            top.entries.append(Entry(key, node))

    def _report(self, span: Span, says: str, remedy: str) -> None:
        self.problems.append(Problem(self.file, span, says, remedy, "shape"))


def _span(event: Any) -> Span:
    start, end = event.start_mark, event.end_mark
    return Span(start.line + 1, start.column + 1, end.line + 1, end.column + 1)


_MEANINGS = (
    ("nesting depth", f"the file is nested deeper than {DEEPEST} levels", "make it flatter"),
    ("cannot start any token", "a character stands here that cannot begin a value",
     "indent with spaces, not tabs, and put a text that begins with a sign in quotes"),
    ("mapping values are not allowed", "a second `:` stands here",
     "put the text in quotes, or the part after the first `:` on lines of its own"),
    ("could not find expected ':'", "a `:` is missing after a name", "write `name: value`"),
    ("did not find expected key", "this line does not line up with the ones above",
     "check the indentation and that quotes are closed"),
    ("did not find expected '-' indicator", "this line does not line up with the list above",
     "begin each item with `- ` in the same column"),
    ("did not find expected ',' or", "a list or mapping in brackets is not closed", "close the bracket"),
    ("unexpected end of stream", "a quote is opened and never closed", "close the quote"),
    ("escape", "a backslash inside double quotes is not understood", "use single quotes"),
)  # fmt: skip


def _explained(error: Any, text: str, file: str) -> Problem:
    """The parser's complaint in a writer's words."""
    mark = getattr(error, "problem_mark", None) or getattr(error, "context_mark", None)
    complaint = " ".join(str(getattr(error, name, "") or "") for name in ("problem", "context", "reason"))
    if mark is not None:
        span = Span(mark.line + 1, mark.column + 1, mark.line + 1, mark.column + 2)
    else:
        line = text.count("\n") + 1
        span = Span(line, 1, line, 1)
        for number, content in enumerate(text.split("\n"), start=1):
            control = next(
                (at for at, sign in enumerate(content) if not sign.isprintable() and sign not in "\t\r"), None
            )
            if control is not None:
                span = Span(number, control + 1, number, control + 2)
                return Problem(file, span, "a control character stands here", "delete it", "syntax")
    for sign, says, remedy in _MEANINGS:
        if sign in complaint:
            return Problem(file, span, says, remedy, "syntax")
    return Problem(
        file, span, "the file is not well-formed YAML here", "check indentation, quotes and colons", "syntax"
    )
