"""The lay-out of a block: comments taken out, lines that go on joined. Same length as before, so
every position stays what it was."""

from __future__ import annotations

import re

_STRING_OR_COMMENT = re.compile(r'"[^"\n]*"|#[^\n]*')
# A string, a bracket, or a line end together with the empty lines and the indentation after it.
_PIECES = re.compile(r'"[^"\n]*"|[()]|\n[ \n]*')
# What a line that goes on from the one before starts with: no line starts with it otherwise.
_GOES_ON = re.compile(r"[-+*/^),<>]|(?:and|or|over)\b")
# What starts a line of its own even where a round bracket is still open before it.
_STARTS_ANEW = re.compile(r'[="]|(?:option|when|otherwise|choice|cases)\b')
# What a line that goes on ends with.
_UNFINISHED = re.compile(r"(?:[-+*/^(,<>]|\b(?:and|or|not|over))\Z")


def logical_lines(text: str) -> str:
    """``text`` with spaces for comments and for the line ends inside a line that goes on.

    A line goes on inside round brackets, after a comma or an operator at its end, and when the
    next line starts with an operator. Strings stay as they are.
    """
    without = _STRING_OR_COMMENT.sub(lambda piece: piece[0] if piece[0][0] == '"' else " " * len(piece[0]), text)
    parts: list[str] = []
    last = 0
    depth = 0
    for piece in _PIECES.finditer(without):
        found = piece[0]
        if found == "(":
            depth += 1
        elif found == ")":
            depth = max(0, depth - 1)
        elif found[0] == "\n" and piece.end() < len(without):
            line = without[last : piece.start()].rstrip()
            anew = _STARTS_ANEW.match(without, piece.end()) is not None
            open_ended = depth > 0 or _UNFINISHED.search(line, max(0, len(line) - 5)) is not None
            if (open_ended and not anew) or _GOES_ON.match(without, piece.end()) is not None:
                parts.append(without[last : piece.start()] + " " * len(found))
            else:
                parts.append(without[last : piece.end()])
                depth = 0
            last = piece.end()
    parts.append(without[last:])
    return "".join(parts)
