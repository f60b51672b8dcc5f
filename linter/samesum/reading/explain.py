"""A parser's upset, in a writer's words."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Upset:
    """Where the parser stopped: the terminal found ("" for a character that starts none), its text, its
    position and the terminals that could have stood there."""

    found: str
    text: str
    position: int
    expected: frozenset[str]


@dataclass(frozen=True, slots=True)
class Mistake:
    """What is wrong with a block; positions count from the block's start."""

    start: int
    end: int
    says: str
    remedy: str


def explain(text: str, lines: str, upset: Upset) -> Mistake:
    return Mistake(upset.position, upset.position + max(1, len(upset.text)), f"found {upset.found} {upset.text!r}, expected {sorted(upset.expected)}", "")
