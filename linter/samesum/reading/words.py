"""Words: the reserved ones, the nearest one, and lists as a writer reads them."""

from __future__ import annotations

import unicodedata
from collections.abc import Iterable
from typing import Literal

FUNCTIONS = ("abs", "ceil", "exp", "floor", "ln", "max", "mean", "min", "position", "round", "sqrt", "sum")
DECLARATIONS = (
    "applies", "constant", "fact", "index", "judgement", "periods", "quantity", "result", "rulebook", "setting",
    "table",
)  # fmt: skip
DECIDERS: tuple[Literal["developer", "verifier", "programme"], ...] = ("developer", "verifier", "programme")
PHRASE_WORDS = (
    "above", "and", "applies", "at", "bias", "by", "cases", "choice", "clause", "constant", "correlated", "cost",
    "developer", "draft", "each", "error", "errors", "fact", "fixed", "follows", "in", "index", "is", "judgement",
    "most", "no", "not", "of", "one", "only", "open", "option", "or", "order", "otherwise", "over", "per", "period",
    "periods", "programme", "quantity", "reference", "result", "rounded", "rulebook", "setting", "source", "table",
    "takes", "to", "up", "validation", "verifier", "when", "yes",
)  # fmt: skip
RESERVED = frozenset(FUNCTIONS) | frozenset(PHRASE_WORDS)


def listing(words: Iterable[str], last: str = "or") -> str:
    """``a``, ``a or b``, ``a, b or c``."""
    items = list(words)
    if len(items) < 2:
        return "".join(items)
    return f"{', '.join(items[:-1])} {last} {items[-1]}"


def nearest(word: str, known: Iterable[str]) -> str:
    """The known word that ``word`` is most likely a slip of, "" when none is near.

    Near is at most one slip for every three letters (a letter wrong, missing, too many, or two
    swapped); small and capital letters, and accents, count half a slip together.
    """
    if len(word) > 60:
        return ""
    best = (len(word) / 3 + 0.51, "")
    plain = _plain(word)
    for other in known:
        if abs(len(other) - len(word)) > best[0]:
            continue
        distance = _slips(plain, _plain(other)) + (0.5 if word.casefold() != other.casefold() else 0.15)
        if other != word and (distance, other) < best:
            best = (distance, other)
    return best[1]


def _plain(word: str) -> str:
    letters = unicodedata.normalize("NFD", word.casefold())
    return "".join(letter for letter in letters if letter.isalnum() or letter == "_")


def _slips(one: str, other: str) -> int:
    """Edit distance with swaps of neighbours (the restricted form of Damerau and Levenshtein)."""
    before: list[int] = []
    row = list(range(len(other) + 1))
    for i, letter in enumerate(one, 1):
        now = [i]
        for j, opposite in enumerate(other, 1):
            cost = min(row[j] + 1, now[j - 1] + 1, row[j - 1] + (letter != opposite))
            if i > 1 and j > 1 and letter == other[j - 2] and one[i - 2] == opposite:
                cost = min(cost, before[j - 2] + 1)
            now.append(cost)
        before, row = row, now
    return row[-1]
