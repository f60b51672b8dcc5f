"""A page for people: wrapped to the terminal, in colour only on a terminal, safe to print.

Everything that comes from a rulebook goes through ``clean``, so that no control character of a name or a
note reaches the terminal.
"""

from __future__ import annotations

import os
import re
import shutil
import unicodedata
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TextIO

CAUTION = (
    "samesum supports the people who write and review methodologies. It does not replace accredited validation "
    "and verification, nor the programme's own rules."
)
WIDEST = 96
NARROWEST = 24
_BEFORE_PERCENT = re.compile(r"(?<=\d) (?=%)")

_JOINERS = "\u200c\u200d"  # some alphabets are not readable without them
_STYLES = {"strong": "1", "quiet": "2", "bad": "1;31", "warn": "33", "good": "32", "link": "36"}


@dataclass(frozen=True, slots=True)
class Paper:
    """What is written on: columns, and whether colours are wanted."""

    width: int = 80
    colour: bool = False


def paper_for(stream: TextIO | None, environment: Mapping[str, str] = os.environ) -> Paper:
    """The paper of an output stream. Colours only on a terminal, never with NO_COLOR set or TERM=dumb."""
    terminal = stream is not None and stream.isatty()
    columns = shutil.get_terminal_size((80, 24)).columns if terminal else _whole(environment.get("COLUMNS", ""), 80)
    wanted = terminal and not environment.get("NO_COLOR") and environment.get("TERM") != "dumb"
    return Paper(min(max(columns, NARROWEST), WIDEST), wanted)


def _whole(text: str, otherwise: int) -> int:
    return int(text) if text.isdecimal() and len(text) < 6 and int(text) > 0 else otherwise


def clean(text: str) -> str:
    """The text on one line, control and direction-changing characters made visible as ``�``."""
    return "".join(
        sign if sign in _JOINERS or unicodedata.category(sign) not in ("Cc", "Cf", "Cs", "Zl", "Zp") else "�"
        for sign in text
    )


def width_of(text: str) -> int:
    """Columns that a text takes on a terminal."""
    return sum(
        0 if unicodedata.combining(sign) else 2 if unicodedata.east_asian_width(sign) in "WF" else 1 for sign in text
    )


def wrapped(text: str, width: int) -> list[str]:
    """The text in lines of at most ``width`` columns, broken at spaces; a longer word stands alone, whole."""
    lines: list[str] = []
    line = ""
    for word in _BEFORE_PERCENT.sub("\u00a0", text).replace("\n", " ").split(" "):
        if not word:
            continue
        word = word.replace("\u00a0", " ")
        if line and width_of(line) + 1 + width_of(word) > width:
            lines.append(line)
            line = word
        else:
            line = f"{line} {word}" if line else word
    return [*lines, line] if line else lines


@dataclass(slots=True)
class Page:
    """Lines gathered for one output; ``text`` is the whole."""

    paper: Paper
    lines: list[str] = field(default_factory=list)

    def styled(self, text: str, style: str) -> str:
        return f"\x1b[{_STYLES[style]}m{text}\x1b[0m" if self.paper.colour and text else text

    def blank(self) -> None:
        if self.lines and self.lines[-1]:
            self.lines.append("")

    def line(self, text: str, style: str = "", indent: int = 0) -> None:
        """One line, never broken: a place to jump to."""
        shown = clean(text)
        self.lines.append(" " * indent + (self.styled(shown, style) if style else shown))

    def paragraph(self, text: str, indent: int = 0, style: str = "", hanging: int = 0) -> None:
        """Wrapped text; lines after the first are moved in by ``hanging`` more."""
        for number, line in enumerate(wrapped(clean(text), self.paper.width - indent - hanging)):
            moved = indent + (hanging if number else 0)
            self.lines.append(" " * moved + (self.styled(line, style) if style else line))

    def entry(self, label: str, text: str, indent: int = 0, column: int = 10, style: str = "quiet") -> None:
        """``label   text`` with the text wrapped beside its label, or below it where the page is narrow."""
        if self.paper.width - indent - column < 28:
            self.lines.append(" " * indent + self.styled(label, style))
            self.paragraph(text, indent + 2)
            return
        lines = wrapped(clean(text), self.paper.width - indent - column) or [""]
        head = self.styled(label, style) + " " * max(1, column - width_of(label))
        self.lines.append((" " * indent + head + lines[0]).rstrip())
        self.lines.extend(" " * (indent + column) + line for line in lines[1:])

    def heading(self, text: str) -> None:
        """A title with a rule after it, in lines where the page is narrow."""
        *above, shown = wrapped(clean(text), self.paper.width) or [""]
        room = self.paper.width - width_of(shown) - 1
        self.blank()
        self.lines += [self.styled(line, "strong") for line in above]
        self.lines.append(self.styled(shown, "strong") + (" " + self.styled("─" * room, "quiet") if room > 2 else ""))

    @property
    def text(self) -> str:
        return "\n".join(self.lines).rstrip("\n") + "\n"
