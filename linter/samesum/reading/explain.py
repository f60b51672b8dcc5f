"""A parser's upset, in a writer's words: what was found, what was expected, and the nearest word."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from samesum.reading.habits import PHRASE_STARTS
from samesum.reading.phrases import ALLOWED, WRITTEN
from samesum.reading.sight import Mistake, Sight
from samesum.reading.slips import SLIPS
from samesum.reading.words import DECLARATIONS, PHRASE_WORDS, listing, nearest


@dataclass(frozen=True, slots=True)
class Upset:
    """Where the parser stopped: the terminal found ("" for a character that starts none), its text, its
    position and the terminals that could have stood there."""

    found: str
    text: str
    position: int
    expected: frozenset[str]


_SIGN_WORDS: Mapping[str, str] = {
    "EQUAL": "`=`", "LESS": "`<`", "LESS_OR_EQUAL": "`<=`", "MORE": "`>`", "MORE_OR_EQUAL": "`>=`", "UNEQUAL": "`<>`",
    "PLUS": "`+`", "MINUS": "`-`", "STAR": "`*`", "SLASH": "`/`", "CARET": "`^`", "PERCENT": "`%`",
    "COMMA": "a comma", "LEFT_BRACKET": "`(`", "RIGHT_BRACKET": "`)`", "NAME": "a name", "NUMBER": "a number",
    "STRING": "a text in quotation marks", "UNIT": "a unit in square brackets", "CLAUSE_NUMBER": "`clause`",
    "_NEWLINE": "the end of the line", "$END": "the end", "_INDENT": "an indented line",
    "_DEDENT": "the end of this part",
}  # fmt: skip
# Sets of terminals that together are one thing to a writer, largest first.
_TOGETHER: tuple[tuple[frozenset[str], str], ...] = (
    (frozenset(("LESS", "LESS_OR_EQUAL", "MORE", "MORE_OR_EQUAL", "EQUAL", "UNEQUAL")), "a comparison sign"),
    (frozenset(("PLUS", "MINUS", "STAR", "SLASH", "CARET")), "a sign of calculation"),
    (frozenset(("PLUS", "MINUS", "STAR", "SLASH")), "a sign of calculation"),
    (frozenset(("LEFT_BRACKET", "MINUS", "NAME", "NUMBER", "NOT")), "a number, a name or a condition"),
    (frozenset(("LEFT_BRACKET", "MINUS", "NAME", "NUMBER")), "a number, a name or a calculation"),
    (frozenset(("MINUS", "NUMBER")), "a number"),
    (frozenset(("IS", "TAKES")), "`is` or `takes`"),
)


_WORDS = frozenset(PHRASE_WORDS)


def word_of(terminal: str) -> str:
    """A terminal in a writer's words."""
    return _SIGN_WORDS.get(terminal, f"`{terminal.lower()}`")


def explain(lines: str, upset: Upset) -> Mistake:
    """The one mistake in a block that the parser could not read.

    Takes the block without comments, lines that go on joined, and where the parser stopped.
    """
    position = upset.position
    if upset.found in ("_NEWLINE", "$END"):
        position = len(lines[:position].rstrip())
    text = "" if upset.found in ("_NEWLINE", "$END") else upset.text
    # A word of the language where it cannot stand comes as a name.
    found = text.upper() if upset.found == "NAME" and text in _WORDS else upset.found
    sight = Sight(lines, position, found, text, upset.expected)
    for slip in SLIPS:
        mistake = slip(sight)
        if mistake is not None:
            return _inside(mistake, lines)
    return _inside(_first_word(sight) or _expected(sight), lines)


def _inside(mistake: Mistake, lines: str) -> Mistake:
    """The mistake on one line of the block, at least one character wide."""
    start = min(mistake.start, len(lines))
    line_end = lines.find("\n", start)
    line_end = len(lines) if line_end < 0 else line_end
    return Mistake(start, max(start + 1, min(mistake.end, line_end)), mistake.says, mistake.remedy)


def _first_word(sight: Sight) -> Mistake | None:
    """A block that starts with no word of the language."""
    if sight.before.strip() or "QUANTITY" not in sight.expected:
        return None
    close = nearest(sight.text, DECLARATIONS)
    joined = next((word for word in DECLARATIONS if sight.text.startswith(word)), "")
    second = sight.rest[len(sight.text) :].lstrip()[:1]
    if joined and sight.text != joined and not second.isalpha():
        remedy = f"write a space after `{joined}`"
        return sight.here("this line starts no declaration", remedy, len(sight.text))
    remedy = f"did you mean `{close}`?" if close else f"it starts with {listing(DECLARATIONS)}"
    if sight.text.startswith('"'):
        remedy = "a note stands under its declaration, indented"
    length = len(sight.rest.split(None, 1)[0]) if sight.rest.strip() else 1
    return sight.here("this line starts no declaration", remedy, length)


def _expected(sight: Sight) -> Mistake:
    """What was found, and everything that could have stood there, in the language's words."""
    words = _listed(sight)
    found = _found(sight)
    close = ""
    if sight.text[:1].isalpha():
        close = nearest(sight.text, sorted(term.lower() for term in sight.expected if term not in _SIGN_WORDS))
    if close:
        return sight.here(f"{found} cannot stand here", f"did you mean `{close}`?")
    if sight.found in ("_NEWLINE", "$END"):
        return sight.here("the line ends too early", f"write {listing(words)}" if words else "", 1)
    return sight.here(f"{found} cannot stand here", f"write {listing(words)}" if words else "leave it out")


def _found(sight: Sight) -> str:
    if sight.found in ("_DEDENT", "_INDENT"):
        return "this line"
    if sight.found == "STRING":
        return "a text in quotation marks"
    if sight.found == "UNIT":
        return f"the unit {sight.text}"
    return f"`{sight.text}`"


def _listed(sight: Sight) -> list[str]:
    left = set(sight.expected) - {"_NEWLINE", "_DEDENT", "$END", "CLAUSE_NUMBER"}
    if "by" not in ALLOWED.get(sight.first_word, ("by",)) and sight.first_word != "table":
        left.discard("BY")
    if "per" not in ALLOWED.get(sight.first_word, ("per",)):
        left.discard("PER")
    words: list[str] = []
    if {"CLAUSE", "SOURCE", "BIAS"} <= left:
        left -= PHRASE_STARTS | {"MINUS", "NUMBER", "STRING", "NOT"}
        kind = sight.first_word if sight.first_word in ALLOWED else ""
        words += [WRITTEN[each] for each in ALLOWED[kind]] if kind else ["a phrase such as `clause …`"]
    for together, word in _TOGETHER:
        if together <= left:
            left -= together
            words.append(word)
    order = list(_SIGN_WORDS)
    rest = sorted(left, key=lambda term: (order.index(term) if term in order else -1, term))
    words += [word_of(term) for term in rest]
    return words
