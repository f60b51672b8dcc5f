"""Writing a decision into a review record without disturbing anything else in it.

The text is edited in place: lines are replaced or put in, never written anew, so that comments, order and
layout stay as people left them. Every edit is read back and compared before it is handed out.
"""

from __future__ import annotations

import json
import re
from collections.abc import Mapping

from samesum.problems import Problem
from samesum.reading.yaml_text import Entry, Fields, Node, Scalar, parse_yaml
from samesum.reviewing.record import DECISIONS, FIELDS
from samesum.spans import START, Span

_LINE_END = re.compile(r"\r\n|[\n\r\x85\u2028\u2029]")
_PLAIN = re.compile(r"[^\W\d_][\w./@-]*(?: [\w./-]+)*|\d{4}-\d\d-\d\d")
_NOT_PLAIN = frozenset(("y", "n", "yes", "no", "on", "off", "true", "false", "null", "none"))
_HEAD = """\
# Decisions of the review body, by the id of the branch point. Written by hand or by
# `samesum register --decide`, which leaves comments and order as they are.
# `says` is a fingerprint of what stood there: when the text changes, the decision is reported as stale.
"""


def with_decision(text: str, file: str, place: str, fields: Mapping[str, str]) -> tuple[str, tuple[Problem, ...]]:
    """The record's text with ``fields`` (names of ``FIELDS``) of one place set, the rest untouched.

    Gives the old text and a problem when the record is not laid out on lines of its own at that place.
    """
    node, problems = parse_yaml(text, file)
    if problems:
        return text, problems
    wanted = {name: fields[name] for name in FIELDS if name in fields}
    edited = _edited(text, node, place, wanted)
    before = _as_plain(node)
    after, _ = parse_yaml(edited, file) if edited is not None else (None, ())
    kept = before if isinstance(before, dict) else {}
    held = kept.get(DECISIONS)
    decisions = dict(held) if isinstance(held, dict) else {}
    old = decisions.get(place)
    expected = {**kept, DECISIONS: {**decisions, place: {**(old if isinstance(old, dict) else {}), **wanted}}}
    if edited is None or _as_plain(after) != expected:
        where = _span_of(node, place)
        says = f"the decision on `{place}` is laid out in a way that cannot be edited here"
        return text, (Problem(file, where, says, "write each field on a line of its own, or edit it by hand", "shape"),)
    return edited, ()


def _edited(text: str, node: Node | None, place: str, fields: Mapping[str, str]) -> str | None:
    lines = _Lines(text)
    root = node if isinstance(node, Fields) else None
    if root is None:
        if isinstance(node, Scalar) and (node.text or node.quoted):
            return None
        start = text if text.strip() else _HEAD
        return f"{_ended(start, lines.ending)}{DECISIONS}:{lines.ending}{_block(place, fields, '', lines.ending)}"
    entry = _entry(root, DECISIONS)
    if entry is None:
        return f"{_ended(text, lines.ending)}{DECISIONS}:{lines.ending}{_block(place, fields, '', lines.ending)}"
    if not isinstance(entry.value, Fields):
        if not isinstance(entry.value, Scalar) or entry.value.text or entry.value.quoted:
            return None
        indent = " " * (entry.key.span.column - 1)
        return lines.put_in_after(entry.key.span.end_line, _block(place, fields, indent, lines.ending))
    decisions = entry.value
    if lines.at(decisions.span) == "{":
        return None
    known = _entry(decisions, place)
    if known is None:
        first = decisions.entries[0]
        outer = " " * (first.key.span.column - 1)
        step = _step(decisions, first)
        block = _lines_of(place, fields, outer, outer + step, lines.ending)
        return lines.put_in_after(_last_line(decisions), block)
    return _changed(lines, known, fields)


def _changed(lines: _Lines, known: Entry, fields: Mapping[str, str]) -> str | None:
    """The fields of a place that is there already: values replaced, missing fields put in after the last."""
    if not isinstance(known.value, Fields):
        if not isinstance(known.value, Scalar) or known.value.text or known.value.quoted:
            return None
        indent = " " * (known.key.span.column + 1)
        return lines.put_in_after(known.key.span.end_line, _field_lines(fields, indent, lines.ending))
    if lines.at(known.value.span) == "{":
        return None
    edits: list[tuple[Span, str]] = []
    missing: dict[str, str] = {}
    for name, text in fields.items():
        entry = _entry(known.value, name)
        if entry is None:
            missing[name] = text
        elif not isinstance(entry.value, Scalar):
            return None
        elif entry.value.text != text or not text:
            if entry.value.span.line != entry.value.span.end_line or lines.at(entry.value.span) in ("|", ">"):
                return None
            lead = "" if entry.value.text or entry.value.quoted else " "
            edits.append((entry.value.span, lead + quoted(text)))
    indent = " " * (known.value.entries[0].key.span.column - 1)
    result = (
        lines.put_in_after(_last_line(known.value), _field_lines(missing, indent, lines.ending)) if missing else None
    )
    held = _Lines(result) if result is not None else lines
    return held.replaced(edits)


def _entry(fields: Fields, name: str) -> Entry | None:
    return next((entry for entry in fields if entry.key.text == name), None)


def _step(decisions: Fields, first: Entry) -> str:
    """How far the fields of a place stand to the right of its id."""
    for entry in decisions:
        if isinstance(entry.value, Fields) and entry.value.entries:
            width = entry.value.entries[0].key.span.column - entry.key.span.column
            if width > 0:
                return " " * width
    return "  "


def _block(place: str, fields: Mapping[str, str], indent: str, ending: str) -> str:
    return _lines_of(place, fields, indent + "  ", indent + "    ", ending)


def _lines_of(place: str, fields: Mapping[str, str], outer: str, inner: str, ending: str) -> str:
    return f"{outer}{quoted(place)}:{ending}{_field_lines(fields, inner, ending)}"


def _field_lines(fields: Mapping[str, str], indent: str, ending: str) -> str:
    return "".join(f"{indent}{name}: {quoted(text)}{ending}" for name, text in fields.items())


def quoted(text: str) -> str:
    """A YAML scalar that every reader takes as this text: plain where that is safe, else in double quotes."""
    if _PLAIN.fullmatch(text) and text.casefold() not in _NOT_PLAIN and text.isprintable():
        return text
    # beyond ASCII, double quotes of JSON and YAML agree but for invisible signs, which are escaped
    return "".join(
        sign if sign.isprintable() else f"\\u{ord(sign):04x}" if ord(sign) < 0x10000 else f"\\U{ord(sign):08x}"
        for sign in json.dumps(text, ensure_ascii=False)
    )


def _last_line(node: Node) -> int:
    """The line on which a node's last content stands."""
    match node:
        case Fields(entries=entries) if entries:
            last = entries[-1]
            return max(last.key.span.end_line, _last_line(last.value))
        case Fields(span=span) | Scalar(span=span):
            pass
        case _:
            span = node.items[-1].span if node.items else node.span
            return _last_line(node.items[-1]) if node.items else span.end_line
    return span.end_line - 1 if span.end_column == 1 and span.end_line > span.line else span.end_line


def _as_plain(node: Node | None) -> object:
    match node:
        case Fields(entries=entries):
            return {entry.key.text: _as_plain(entry.value) for entry in entries}
        case Scalar(text=text):
            return text
        case None:
            return ""
        case _:
            return [_as_plain(item) for item in node.items]


def _span_of(node: Node | None, place: str) -> Span:
    held = node.get(DECISIONS) if isinstance(node, Fields) else None
    entry = _entry(held, place) if isinstance(held, Fields) else None
    if entry is not None:
        return entry.key.span
    return held.span if held is not None else START


def _ended(text: str, ending: str) -> str:
    return text if not text or text.endswith(("\n", "\r")) else text + ending


class _Lines:
    """A text as the YAML parser counts its lines."""

    def __init__(self, text: str) -> None:
        self.text = text
        self.starts = [0, *(match.end() for match in _LINE_END.finditer(text))]
        self.ending = "\r\n" if "\r\n" in text else "\n"

    def place(self, line: int, column: int) -> int:
        return self.starts[line - 1] + column - 1 if line <= len(self.starts) else len(self.text)

    def at(self, span: Span) -> str:
        """The sign that a node begins with."""
        start = self.place(span.line, span.column)
        return self.text[start : start + 1]

    def put_in_after(self, line: int, block: str) -> str:
        """The text with ``block`` (whole lines) after a line."""
        if line < len(self.starts):
            at = self.starts[line]
            return self.text[:at] + block + self.text[at:]
        return _ended(self.text, self.ending) + block

    def replaced(self, edits: list[tuple[Span, str]]) -> str:
        """The text with each span's text exchanged."""
        text = self.text
        for span, new in sorted(edits, key=lambda edit: edit[0], reverse=True):
            start, end = self.place(span.line, span.column), self.place(span.end_line, span.end_column)
            text = text[:start] + new + text[end:]
        return text
