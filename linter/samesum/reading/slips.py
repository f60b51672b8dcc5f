"""Common slips, each recognised where the parser stopped and answered with a sentence of its own.

Each function takes the ``Sight`` and gives the mistake, or None when the slip is another one. The order
of ``SLIPS`` is the order in which they are tried: from what is certain to what is likely.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping

from samesum.reading.habits import HABITS, PHRASE_STARTS
from samesum.reading.sight import Mistake, Sight
from samesum.reading.words import RESERVED, nearest

_OPERATORS = frozenset(("PLUS", "STAR", "SLASH", "CARET"))
_BODIES = frozenset(("EQUAL", "CASES", "CHOICE"))

_SIGNS: Mapping[str, tuple[str, str]] = {
    **dict.fromkeys("“”„‟«»", ("this is a printer's quotation mark", 'write the plain one: "')),
    **dict.fromkeys("‘’‚`'´", ("this mark does not quote a text", 'put texts in plain quotation marks: "')),
    **dict.fromkeys("−–—‐‑", ("this dash is no minus sign", "write the plain one: -")),
    **dict.fromkeys("×·∙•⋅", ("this sign is not a multiplication", "write *")),
    "÷": ("this sign is not a division", "write /"),
    ":": ("a colon means nothing here", "leave it out"),
    **dict.fromkeys("²³", ("a small raised number is no power", "write ^ 2 or ^ 3")),
    "≤": ("≤ is written with two signs", "write <="),
    "≥": ("≥ is written with two signs", "write >="),
    "≠": ("≠ is written with two signs", "write <>"),
    "!": ("`!` is no sign of the language", "write <> for unequal and `not` for the contrary"),
    "&": ("`&` is no sign of the language", "write `and`"),
    "|": ("`|` is no sign of the language", "write `or`"),
    ";": ("a semicolon separates nothing here", "write a comma"),
    ".": ("a point stands here on its own", "numbers start with a digit, as in 0.5; phrases are separated by commas"),
    "$": ("a currency sign is no unit", "write the currency's letters in square brackets, as in 40 [USD]"),
    "€": ("a currency sign is no unit", "write the currency's letters in square brackets, as in 40 [EUR]"),
    "£": ("a currency sign is no unit", "write the currency's letters in square brackets, as in 40 [GBP]"),
    "{": ("curly brackets mean nothing here", "write round brackets for a calculation, square ones for a unit"),
    "}": ("curly brackets mean nothing here", "write round brackets for a calculation, square ones for a unit"),
    "_": ("a name starts with a letter", "put a letter in front"),
}
# Lines on which no `=` gives a value.
_NO_FORMULA = frozenset(("when", "otherwise", "applies", "cases", "choice", "option"))
_PAIRS: Mapping[str, str] = {
    "=<": "<=", "=>": ">=", "><": "<>", "**": "^", "&&": "and", "||": "or",
}  # fmt: skip
_FORMS: Mapping[str, str] = {
    "clause": "clause 7.1.2(b)",
    "rounded": "rounded down to 1",
    "at": "at most 4",
    "one": "one of A, B or C",
    "yes": "yes or no",
    "mean": "mean 120 spread 30",
    "fixed": "fixed at validation",
    "open": "open each period",
    "errors": "errors correlated 0.5",
    "only": "only when CONDITION",
    "up": "up to 10",
}
_SLIPPED_WORDS: Mapping[str, str] = {
    "if": "when", "else": "otherwise", "elif": "when", "elseif": "when", "default": "otherwise", "unless": "when not",
    "case": "when", "switch": "cases", "choose": "choice", "choices": "choice", "options": "option",
    "alternative": "option", "variable": "fact", "parameter": "fact", "input": "fact", "decision": "choice",
    "formula": "quantity", "equals": "=", "times": "*", "minus": "-", "plus": "+", "per_index": "per",
    "program": "programme", "judgment": "judgement", "equal": "=", "until": "up to", "below": "up to", "under": "up to",
    "version": "draft", "percent": "%",
}  # fmt: skip


def tab(sight: Sight) -> Mistake | None:
    if sight.lines[sight.at : sight.at + 1] != "\t":
        return None
    return sight.here("a tab stands here", "write spaces; blocks are indented with spaces", 1)


def strange_space(sight: Sight) -> Mistake | None:
    sign = sight.lines[sight.at : sight.at + 1]
    if sight.found or not sign or not (sign.isspace() or not sign.isprintable()) or sign == "\n":
        return None
    name = "a carriage return" if sign == "\r" else f"the invisible character U+{ord(sign):04X}"
    return sight.here(f"{name} stands here", "delete it and write a plain space", 1)


def open_text(sight: Sight) -> Mistake | None:
    if sight.found or not sight.text.startswith('"'):
        return None
    end = max(len(sight.rest.rstrip()), 1)
    return Mistake(sight.at, sight.at + end, "this quotation mark has no partner on its line", 'close the text with "')


def double_sign(sight: Sight) -> Mistake | None:
    """``=<``, ``=>``, ``><`` and ``**``."""
    for start in (sight.at, sight.at - 1):
        pair = sight.lines[max(0, start) : max(0, start) + 2]
        write = _PAIRS.get(pair)
        if write is not None and start >= 0:
            return Mistake(start, start + 2, f"`{pair}` is no sign of the language", f"write `{write}`")
    return None


def bracket(sight: Sight) -> Mistake | None:
    """Round brackets without a partner."""
    opened: list[int] = []
    text = re.sub(r'"[^"\n]*"', lambda quoted: " " * len(quoted[0]), sight.before)
    for at, sign in enumerate(text):
        if sign == "(":
            opened.append(at)
        elif sign == ")" and opened:
            opened.pop()
    if sight.found == "RIGHT_BRACKET" and not opened:
        return sight.here("this round bracket closes nothing", "leave it out, or open one before")
    if opened and sight.rest.count(")") - sight.rest.count("(") < len(opened):
        closes = "RIGHT_BRACKET" in sight.expected
        ends = sight.found in ("_NEWLINE", "$END", "COMMA", "CASES", "OPTION", "WHEN", "OTHERWISE", "CHOICE", "EQUAL")
        if closes or ends:
            start = sight.line_start + opened[-1]
            return Mistake(start, start + 1, "this round bracket is never closed", "close it with )")
    return None


def square_bracket(sight: Sight) -> Mistake | None:
    if sight.text.startswith("[") and sight.found != "UNIT":
        end = max(len(sight.rest.rstrip()), 1)
        return Mistake(sight.at, sight.at + end, "this square bracket is never closed", "close the unit with ]")
    if sight.text.startswith("]"):
        return sight.here("this square bracket closes nothing", "units stand in square brackets, as in [t CO2e/ha]", 1)
    return None


def sign(sight: Sight) -> Mistake | None:
    known = _SIGNS.get(sight.text[:1]) if not sight.found else None
    if sight.text[:1] == ":" and sight.rest[1:].strip():
        if "COMMA" in sight.expected and sight.first_word in ("fact", "setting", "judgement", "index"):
            return sight.here("a colon means nothing here", "write a comma", 1)
        if "EQUAL" in sight.expected and sight.first_word not in _NO_FORMULA:
            return sight.here("a colon means nothing here", "write `=`", 1)
    return sight.here(*known, length=1) if known is not None else None


def not_indented(sight: Sight) -> Mistake | None:
    """What belongs under a declaration, written in column one."""
    if sight.line_start == 0 or sight.lines[sight.line_start : sight.line_start + 1] in (" ", "\n", ""):
        return None
    if sight.before.strip():
        return None
    return sight.here("this line belongs under the one before and is not indented", "put four spaces in front of it")


def too_deep(sight: Sight) -> Mistake | None:
    if sight.found != "_INDENT":
        return None
    above = sight.lines[: sight.line_start].rstrip().rsplit("\n", 1)[-1].split()
    under = f" under `{above[0]}`" if above else ""
    says = f"this line is indented, but nothing stands{under} here"
    return _whole_line(sight, says, "start it where the line above starts")


def uneven(sight: Sight) -> Mistake | None:
    if sight.found != "UNEVEN":
        return None
    says = "this line starts below none of the lines above"
    return _whole_line(sight, says, "start it exactly where a line above starts")


def nothing_under(sight: Sight) -> Mistake | None:
    """A line that must have something under it and has not."""
    if sight.found == "_NEWLINE" and "_INDENT" not in sight.expected:
        return None
    starts = _line_above(sight) if sight.found == "_DEDENT" else sight.line_start
    word = sight.lines[starts:].split(None, 1)[0] if sight.lines[starts:].strip() else ""
    if sight.found not in ("_NEWLINE", "$END", "_DEDENT") and "_INDENT" not in sight.expected:
        return None
    needs = {
        "cases": ("`cases` has no branch", "write `when …` on the next line, indented, and under it what it gives"),
        "choice": ("this choice has no option", "write `option …` on the next line, indented"),
        "when": ("nothing is said for this `when`", "write `= …` on the next line, indented"),
        "otherwise": ("nothing is said for `otherwise`", "write `= …` on the next line, indented"),
        "option": ("nothing is said for this option", "write `= …` on the next line, indented"),
        "quantity": (
            "this quantity has no body",
            "write `= …`, `cases` or `choice by …` on the next line, indented",
        ),
    }.get(word)
    if needs is None or not (sight.expected & ({"_INDENT"} | _BODIES)):
        return None
    start = starts + len(sight.lines[starts:]) - len(sight.lines[starts:].lstrip())
    end = sight.lines.find("\n", start)
    return Mistake(start, len(sight.lines[:end].rstrip()) if end >= 0 else len(sight.lines.rstrip()), *needs)


def _line_above(sight: Sight) -> int:
    above = sight.lines[: sight.line_start].rstrip()
    return above.rfind("\n") + 1


def formula_on_the_line(sight: Sight) -> Mistake | None:
    """``quantity x [t] = …`` and ``when … = …`` on one line."""
    if sight.found != "EQUAL" or sight.first_word not in ("quantity", "option", "when", "otherwise", "choice", "cases"):
        return None
    return sight.here("a formula stands on a line of its own", "move it to the next line, indented")


def second_body(sight: Sight) -> Mistake | None:
    if sight.found not in _BODIES or sight.before.strip() or sight.expected & (_BODIES | {"OPTION", "WHEN"}):
        return None
    block = sight.lines.split(None, 1)[0]
    if block != "quantity":
        return sight.here(f"a `{block}` has no body", "what is calculated is declared with `quantity`")
    return sight.here("a body stands here already", "a quantity, a branch and an option have one body each")


def slipped_word(sight: Sight) -> Mistake | None:
    """A word of another language, or one in capitals."""
    if not sight.text[:1].isalpha():
        return None
    word = sight.text
    write = _SLIPPED_WORDS.get(word.lower())
    if write is not None and (word.lower() not in RESERVED):
        return sight.here(f"`{word}` is no word of the language", f"write `{write}`")
    small = word.lower()
    if small != word and small.upper() in sight.expected:
        return sight.here(f"`{word}` starts with a capital letter", f"write `{small}`: the language's words are small")
    return None


def broken_name(sight: Sight) -> Mistake | None:
    """Names with spaces, hyphens, or a digit in front; units without brackets."""
    if "NAME" in sight.expected and "MINUS" not in sight.expected:
        if sight.found == "NUMBER" and re.match(r"[0-9][\w.]*[^\W\d]", sight.rest):
            word = re.match(r"[\w.]+", sight.rest)
            length = len(word[0]) if word else 1
            return sight.here("a name starts with a letter", "put a letter in front of the digits", length)
        return None
    if "UNIT" not in sight.expected or "COMMA" not in sight.expected or _OPERATORS & sight.expected:
        return None
    if sight.found == "MINUS" and re.match(r"-\s*\w", sight.rest) and re.search(r"\w\Z", sight.before):
        following = re.split(r"[^\w]", sight.rest[1:].lstrip())[0]
        name = f"{sight.last_word}_{following}"
        return sight.here("a name holds letters, digits and _ only", f"write `{name}`")
    if sight.found == "NAME":
        if sight.last_word[:1].isdigit():
            return sight.here(f"`{sight.text}` follows the number without anything between them",
                              f"a unit goes in square brackets: [{sight.text}]")  # fmt: skip
        if re.match(r"\w+\s*(\[|$)", sight.rest) and re.search(r"\w\s+\Z", sight.before):
            if "[" in sight.rest:
                return sight.here("a name is one word", f"write `{sight.last_word}_{sight.text}`")
            return sight.here(
                f"`{sight.text}` stands between the name and the end of the line",
                f"a unit goes in square brackets: [{sight.text}]; a name is one word: {sight.last_word}_{sight.text}",
            )
        return sight.here(f"`{sight.text}` follows the name without brackets or comma",
                          f"a unit goes in square brackets: [{sight.text}]; a phrase comes after a comma; "
                          f"a name is one word: {sight.last_word}_{sight.text}")  # fmt: skip
    return None


def unit_without_brackets(sight: Sight) -> Mistake | None:
    if sight.found != "NAME" or "UNIT" not in sight.expected or not re.search(r"[0-9]\s*\Z", sight.before):
        return None
    if nearest(sight.text, ["and", "or", "to", "over", "is", "spread", "up"]) or sight.text in RESERVED:
        return None
    return sight.here(f"`{sight.text}` follows the number without anything between them",
                      f"a unit goes in square brackets, [{sight.text}]; a factor comes after *")  # fmt: skip


def missing_comma(sight: Sight) -> Mistake | None:
    starts = sight.found in PHRASE_STARTS or (sight.found == "STRING" and "STRING" not in sight.expected)
    if "COMMA" not in sight.expected or not starts or not sight.before.strip():
        return None
    what = "the text in quotes" if sight.found == "STRING" else f"`{sight.text}`"
    return sight.here(f"a comma is missing before {what}", f"write `, {sight.text}`")


def unfinished_phrase(sight: Sight) -> Mistake | None:
    """A phrase of several words that breaks off or goes another way."""
    phrase = sight.before[sight.before.rfind(",") + 1 :].split()
    if not phrase or len(sight.expected - {"CLAUSE_NUMBER", "_NEWLINE"}) > 2:
        return None
    form = _FORMS.get(phrase[0], "")
    if sight.first_word == "index" and sight.expected <= {"TO", "PERCENT", "UNIT"}:
        form = "at most 4"
    if sight.first_word == "choice" and sight.expected <= {"BY", "FOLLOWS", "TAKES"}:
        form = "choice by developer`, `choice follows QUANTITY` or `choice takes OPTION"
    if not form:
        return None
    found = f"`{sight.text}` cannot stand here" if sight.text else "the line ends too early"
    return sight.here(found, f"write it as in `{form}`", 0 if sight.text else 1)


def missing_quotes(sight: Sight) -> Mistake | None:
    if sight.expected & {"NAME", "NUMBER", "COMMA"} or "STRING" not in sight.expected or sight.found == "STRING":
        return None
    if sight.found in ("_NEWLINE", "$END", "COMMA", "_DEDENT") or sight.expected & _BODIES or not sight.last_word:
        return None
    return sight.here(f"what follows `{sight.last_word}` is a text and stands in quotation marks", 'write it as "…"')


def value_list(sight: Sight) -> Mistake | None:
    """``one of A, B or C`` written otherwise."""
    if re.search(r"\bone\s+of\b[^,]*(,[^,]*)*\Z", sight.before) is None:
        return None
    if sight.expected <= {"COMMA", "OR", "NAME"} and "OR" in sight.expected:
        return sight.here("the list of values has no `or` before its last", "write it as in `one of A, B or C`")
    if sight.found == "OR" and "COMMA" in sight.expected:
        return sight.here("the list of values has a second `or`", "write commas before the last: `one of A, B or C`")
    if sight.expected <= {"NAME", "OR"} and sight.found in PHRASE_STARTS | {"_NEWLINE"}:
        return sight.here("the list of values has no `or` before its last", "write it as in `one of A, B or C`")
    return None


def late_note(sight: Sight) -> Mistake | None:
    if sight.found != "STRING" or sight.before.strip():
        return None
    return sight.here("a note stands directly under the first line of its declaration", "move it up")


def missing_operator(sight: Sight) -> Mistake | None:
    if not _OPERATORS & sight.expected or sight.found not in ("NAME", "NUMBER", "LEFT_BRACKET", "UNIT"):
        return None
    if sight.found == "UNIT":
        remedy = "a name has its unit from its declaration: leave it out"
        return sight.here("a unit stands behind a number only", remedy)
    known = [word.lower() for word in sight.expected if word.isalpha() and word.lower() in RESERVED]
    close = nearest(sight.text, known)
    if close:
        return sight.here(f"`{sight.text}` cannot stand here", f"did you mean `{close}`?")
    remedy = "write + - * / or ^ between the two, or join a name with _"
    return sight.here(f"a sign is missing before `{sight.text}`", remedy)


def missing_name(sight: Sight) -> Mistake | None:
    if sight.expected - {"_NEWLINE"} != {"NAME"} or not sight.last_word:
        return None
    if sight.last_word == "by" and sight.first_word != "table":
        return sight.here("`by` does not say who decides", "write `by developer`, `by verifier` or `by programme`")
    return sight.here(f"the name after `{sight.last_word}` is missing", "write it before this")


def _whole_line(sight: Sight, says: str, remedy: str) -> Mistake:
    start = sight.at + len(sight.rest) - len(sight.rest.lstrip())
    return Mistake(start, max(start + 1, sight.at + len(sight.rest.rstrip())), says, remedy)


SLIPS: tuple[Callable[[Sight], Mistake | None], ...] = (
    tab,
    strange_space,
    open_text,
    double_sign,
    *HABITS,
    square_bracket,
    bracket,
    sign,
    uneven,
    not_indented,
    nothing_under,
    formula_on_the_line,
    second_body,
    too_deep,
    slipped_word,
    value_list,
    broken_name,
    unit_without_brackets,
    missing_comma,
    unfinished_phrase,
    missing_quotes,
    late_note,
    missing_operator,
    missing_name,
)
