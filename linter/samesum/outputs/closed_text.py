"""Lines of a rulebook's text and where a body stands in them: what ``closed`` cuts and pastes with.

Everything outside the part that is replaced stays byte for byte, and no comment is ever dropped: one that stood on a
line that goes stands on a line of its own afterwards.
"""

from __future__ import annotations

import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

from samesum.reading import model as m
from samesum.reading import walk
from samesum.spans import Span

_STRING_OR_COMMENT = re.compile(r'"[^"\n]*"|#.*')


class CannotClose(Exception):
    """A branch point cannot be closed in this way; says why and what to do, in a writer's words."""


@dataclass(frozen=True, slots=True)
class Replacement:
    """Lines ``first`` to ``last`` (from 1, both included; ``last`` < ``first`` puts lines in between)."""

    first: int
    last: int
    lines: tuple[str, ...]


def parted(line: str) -> tuple[str, str]:
    """A line's own text and the comment behind it."""
    for piece in _STRING_OR_COMMENT.finditer(line):
        if piece[0][0] == "#":
            return line[: piece.start()].rstrip(), piece[0]
    return line.rstrip(), ""


def replaced(lines: Sequence[str], changes: Sequence[Replacement]) -> list[str]:
    """The lines with all replacements made; they must not overlap."""
    made = list(lines)
    for each in sorted(changes, key=lambda change: change.first, reverse=True):
        made[each.first - 1 : max(each.last, each.first - 1)] = each.lines
    return made


def spliced(lines: Sequence[str], edits: Sequence[tuple[Span, str]]) -> list[str]:
    """The lines with the text at each span replaced; spans must not overlap."""
    text = "\n".join(lines)
    starts = [0]
    for line in lines:
        starts.append(starts[-1] + len(line) + 1)
    for span, new in sorted(edits, key=lambda edit: edit[0], reverse=True):
        start = starts[span.line - 1] + span.column - 1
        end = starts[span.end_line - 1] + span.end_column - 1
        text = text[:start] + new + text[end:]
    return text.split("\n")


def text_at(lines: Sequence[str], span: Span) -> str:
    """The text of a span on one line, comments taken out."""
    if span.line == span.end_line:
        return lines[span.line - 1][span.column - 1 : span.end_column - 1]
    first = parted(lines[span.line - 1])[0][span.column - 1 :]
    middle = [parted(line)[0].strip() for line in lines[span.line : span.end_line - 1]]
    return " ".join([first.strip(), *middle, lines[span.end_line - 1][: span.end_column - 1].strip()])


def extent(body: m.Body) -> tuple[int, int]:
    """The first and last line of a body."""
    last = body.span.end_line
    for branch in walk.branches(body):
        last = max(last, branch.span.end_line, extent(branch.body)[1])
    return body.span.line, last


def formulas(body: m.Body) -> Iterator[m.Formula]:
    """Every formula anywhere in a body."""
    for each in walk.bodies(body):
        if isinstance(each, m.Formula):
            yield each


def moved(lines: Sequence[str], first: int, last: int, by: int) -> list[str]:
    """Lines moved to the right (or left, below zero), as far as there is room."""
    made = []
    for line in lines[first - 1 : last]:
        if not line.strip():
            made.append(line)
        elif by >= 0:
            made.append(" " * by + line)
        else:
            room = len(line) - len(line.lstrip(" "))
            made.append(line[min(-by, room) :])
    return made


def comments_in(lines: Sequence[str], first: int, last: int, indent: int) -> list[str]:
    """The comments on these lines, each on a line of its own."""
    found = []
    for line in lines[first - 1 : last]:
        comment = parted(line)[1]
        if comment:
            found.append(" " * indent + comment)
    return found


def instead(lines: Sequence[str], body: m.Body, kept: m.Body) -> Replacement:
    """One part of a body in place of the whole: moved to where the body stands, with the comments of the rest."""
    first, last = extent(body)
    start, end = extent(kept)
    indent = body.span.column - 1
    return Replacement(
        first,
        last,
        (
            *comments_in(lines, first, start - 1, indent),
            *moved(lines, start, end, indent - (kept.span.column - 1)),
            *comments_in(lines, end + 1, last, indent),
        ),
    )


def header_end(lines: Sequence[str], line: int) -> int:
    """The last line of what starts on ``line`` and goes on after a comma."""
    while line < len(lines) and parted(lines[line - 1])[0].endswith(","):
        line += 1
    return line


def with_phrase(line: str, phrase: str) -> str:
    """A line with one more phrase at its end, before its comment."""
    text, comment = parted(line)
    return f"{text}, {phrase}" + (f"  {comment}" if comment else "")


def above(lines: Sequence[str], line: int) -> int:
    """The line before which something new stands well: above the comments that belong to ``line``."""
    while line > 1 and lines[line - 2].startswith("#"):
        line -= 1
    return line
