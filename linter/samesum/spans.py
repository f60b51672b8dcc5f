"""Where something stands in a rulebook's text. Imports nothing of ours."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, order=True, slots=True)
class Span:
    """A stretch of text: 1-based lines and columns in code points, the end column exclusive."""

    line: int
    column: int
    end_line: int
    end_column: int

    def to(self, other: Span) -> Span:
        """The stretch from the start of this one to the end of ``other``."""
        return Span(self.line, self.column, other.end_line, other.end_column)


START = Span(1, 1, 1, 1)
