"""Text → top-level blocks: each starts in column one and is parsed on its own."""

from __future__ import annotations

import re
from dataclasses import dataclass

# A line that starts a block: something other than a space, a tab or a comment in column one. What only
# ever stands inside a declaration does not start one: its indentation was forgotten.
_FIRST = re.compile(r'^(?!(?:option|when|otherwise|choice|cases)\b)[^\s#="]', re.MULTILINE)


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
    lines = block.split("\n")
    while len(lines) > 1 and (not lines[-1].strip() or lines[-1].lstrip().startswith("#")):
        lines.pop()
    return "\n".join(lines).rstrip()
