"""What there is to see where the parser stopped, and the mistake that comes of it."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Mistake:
    """What is wrong with a block; positions count from the block's start."""

    start: int
    end: int
    says: str
    remedy: str


@dataclass(frozen=True, slots=True)
class Sight:
    """What there is to see where the parser stopped.

    ``lines`` is the block without comments, lines that go on joined; ``at`` the position; ``found``
    the terminal there ("" for a character that starts none) and ``text`` how it is written; ``expected``
    the terminals that could have stood there.
    """

    lines: str
    at: int
    found: str
    text: str
    expected: frozenset[str]

    @property
    def line_start(self) -> int:
        return self.lines.rfind("\n", 0, self.at) + 1

    @property
    def line_end(self) -> int:
        end = self.lines.find("\n", self.at)
        return len(self.lines) if end < 0 else end

    @property
    def before(self) -> str:
        """The line up to here."""
        return self.lines[self.line_start : self.at]

    @property
    def rest(self) -> str:
        """The line from here on."""
        return self.lines[self.at : self.line_end]

    @property
    def first_word(self) -> str:
        words = self.lines[self.line_start : self.line_end].split(None, 1)
        return words[0] if words else ""

    @property
    def last_word(self) -> str:
        words = self.before.split()
        return words[-1] if words else ""

    def here(self, says: str, remedy: str = "", length: int = 0) -> Mistake:
        return Mistake(self.at, self.at + (length or max(1, len(self.text.rstrip("\n ")))), says, remedy)
