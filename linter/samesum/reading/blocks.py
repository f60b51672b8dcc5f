"""Text → top-level blocks: each starts in column one and is parsed on its own."""

from __future__ import annotations

import re
from dataclasses import dataclass

from samesum.reading.words import DECLARATIONS, nearest

# A line that starts a block: something other than a space, a tab or a comment in column one. What only
# ever stands inside a declaration does not start one: its indentation was forgotten.
_FIRST = re.compile(r'^(?!(?:option|when|otherwise|choice|cases)\b)[^\s#="]', re.MULTILINE)


_NAMELESS = ("rulebook", "result", "periods", "applies")
_FIRST_WORDS = re.compile(r"(\S+)(?:\s+([^\W\d_]\w*))?")
_JOINED = re.compile(rf"({'|'.join(DECLARATIONS)})([^\W\d_]\w*)")


@dataclass(frozen=True, slots=True)
class Block:
    """``text`` ends with its last word (or what follows it on that line); ``line`` is 1-based."""

    text: str
    line: int


def blocks_of(text: str) -> tuple[Block, ...]:
    """The blocks in order. What stands before the first one is a block too when it is more than
    empty lines and comments."""
    starts = [match.start() for match in _FIRST.finditer(text)]
    found = []
    line = 1
    head = text[: starts[0]] if starts else text
    if any(each.strip() and not each.lstrip().startswith("#") for each in head.split("\n")):
        found.append(Block(_trimmed(head), 1))
    line += head.count("\n")
    for start, end in zip(starts, [*starts, len(text)][1:], strict=True):
        whole = text[start:end]
        found.append(Block(_trimmed(whole), line))
        line += whole.count("\n")
    return tuple(found)


def _trimmed(block: str) -> str:
    """Without the empty lines and comment lines at its end, which belong to what comes next."""
    text = block.rstrip()
    start = text.rfind("\n") + 1
    while start and text[start:].lstrip().startswith("#"):
        text = text[:start].rstrip()
        start = text.rfind("\n") + 1
    return text


def glance(block: str) -> tuple[str, str]:
    """What a block that cannot be read most likely declares: its kind and its name, "" where there is none.

    Sees through a slip in the first word and through a missing space after it.
    """
    words = _FIRST_WORDS.match(block)
    if words is None:
        return "", ""
    kind, name = words[1], words[2] or ""
    if kind not in DECLARATIONS:
        joined = _JOINED.match(kind)
        if joined is not None and not name:
            kind, name = joined[1], joined[2]
        else:
            kind = nearest(kind, DECLARATIONS) or kind
    return kind, "" if kind in _NAMELESS else name
