"""A mistake in the input, as a value. Imports nothing of ours but spans."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass

from samesum.spans import Span


@dataclass(frozen=True, slots=True)
class Problem:
    """One mistake that keeps a file from being used.

    ``says`` is what is wrong in the trade's words, ``remedy`` what to write instead ("" when
    nothing better can be said than ``says``). ``kind`` is ``syntax``, ``name``, ``unit``, ``shape``,
    ``cycle``, ``file`` or ``value``; unit mismatches are also evidence that lint rules look at.
    """

    file: str
    span: Span
    says: str
    remedy: str = ""
    kind: str = "syntax"

    def sort_key(self) -> tuple[str, Span, str, str]:
        """The one total order in which problems are reported."""
        return (self.file, self.span, self.kind, self.says)


def in_order(problems: Iterable[Problem]) -> tuple[Problem, ...]:
    """Sorted and without repeats."""
    return tuple(sorted(set(problems), key=Problem.sort_key))
