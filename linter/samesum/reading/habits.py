"""Habits of ordinary writing: what people write who have read methodologies and no programs.

Like the common slips in ``slips.py``, but each looks at the whole phrase around the place where the parser
stopped, so that the remedy can be the line as it should be.
"""

from __future__ import annotations

import re

from samesum.reading.numbers import without_comma
from samesum.reading.sight import Mistake, Sight
from samesum.reading.words import DECIDERS, DECLARATIONS, RESERVED, listing

PHRASE_STARTS = frozenset((
    "CLAUSE", "CLAUSE_NUMBER", "SOURCE", "DRAFT", "ROUNDED", "AT", "ONE", "YES", "BY", "PER", "MEAN", "FIXED", "OPEN",
    "ERRORS", "ONLY", "ERROR", "BIAS", "COST", "REFERENCE", "TAKES",
))  # fmt: skip
_NUMBER = r"-?[0-9][0-9_.]*(?:[eE][+-]?[0-9]+)?(?:\s*%)?(?:\s*\[[^\]\n]*\])?"
_NAME = r"[^\W\d]\w*"
_THAN = r"(?:\s+than)?(?P<equal>\s+or\s+equal(?:\s+to)?)?"
_COMPARED = re.compile(
    rf"(?P<left>{_NAME})\s+(?P<says>(?:(?:is|are)\s+)?(?P<no>not\s+)?(?:"
    rf"(?P<most>at\s+most|up\s+to)|(?P<least>at\s+least)"
    rf"|(?P<more>above|exceeds|(?:more|greater|larger|higher){_THAN})"
    rf"|(?P<less>below|(?:less|lower|smaller|fewer){_THAN.replace('equal>', 'equally>')})))"
    rf"\s+(?P<right>{_NUMBER}|{_NAME})"
)
_BETWEEN = re.compile(
    rf"(?P<left>{_NAME})\s+(?P<says>(?:(?:is|are)\s+)?between)\s+(?P<low>{_NUMBER}|{_NAME})\s+(?:and|to)\s+"
    rf"(?P<high>{_NUMBER}|{_NAME})"
)
_IS_NUMBER = re.compile(rf"(?P<left>{_NAME})\s+(?P<says>(?:is|are)(?P<no>\s+not)?)\s+(?P<right>{_NUMBER})")
_CONTRARY = {">": "<=", "<": ">=", ">=": "<", "<=": ">"}
# Two numbers with a comma between its thousands, or for its decimals, once the comma was read as one between phrases.
_WITH_COMMA = re.compile(r"(?<![\w.@])([0-9][0-9_]*),([0-9][0-9_.]*(?:,[0-9]{3})*)")


def comparison_in_words(sight: Sight) -> Mistake | None:
    """``is above``, ``at least``, ``between … and …`` and ``is`` before a number, in a condition."""
    starts = re.match(r"\s*(?:when|applies)\b|.*\bonly\s+when\b", sight.before)
    if starts is None:
        return None
    line = sight.before + sight.rest
    at = len(sight.before)
    for form in (_BETWEEN, _COMPARED, _IS_NUMBER):
        for found in form.finditer(line, starts.end()):
            if not found.start("says") <= at <= found.end():
                continue
            start = sight.line_start + found.start("says")
            says = f"`{' '.join(found['says'].split())}` is no comparison of numbers"
            return Mistake(start, start + len(found["says"]), says, f"write `{_with_signs(found)}`")
    return None


def _with_signs(found: re.Match[str]) -> str:
    parts = found.groupdict()
    if "low" in parts:
        return f"{_in_the_unit_of(parts['low'], parts['high'])} <= {parts['left']} <= {parts['high']}"
    if "more" not in parts:
        sign = "<>" if parts["no"] else "="
    else:
        more = parts["more"] or parts["least"]
        equal = parts["least"] or parts["most"] or parts["equal"] or parts["equally"]
        sign = (">" if more else "<") + ("=" if equal else "")
        sign = _CONTRARY[sign] if parts["no"] else sign
    return f"{parts['left']} {sign} {parts['right']}"


def equal_twice(sight: Sight) -> Mistake | None:
    """``==`` and ``!=``, before a name, yes, no or a number."""
    for start in (sight.at, sight.at - 1):
        pair = sight.lines[max(0, start) : max(0, start) + 2]
        if start < 0 or pair not in ("==", "!="):
            continue
        left = re.search(rf"({_NAME})\s*\Z", sight.lines[:start])
        right = re.match(rf"\s*({_NAME})(?![\w(])", sight.lines[start + 2 : sight.line_end])
        says = f"`{pair}` is no sign of the language"
        sign, word = ("=", "is") if pair == "==" else ("<>", "is not")
        if left is None or right is None:
            return Mistake(start, start + 2, says, f"write `{sign}`")
        if right[1].lower() in ("yes", "no", "true", "false"):
            holds = (right[1].lower() in ("yes", "true")) == (pair == "==")
            return Mistake(start, start + 2, says, f"write `{left[1]}`" if holds else f"write `not {left[1]}`")
        remedy = f"write `{left[1]} {word} {right[1]}` where {right[1]} is a named value, `{sign}` between numbers"
        return Mistake(start, start + 2, says, remedy)
    return None


def several_clauses(sight: Sight) -> Mistake | None:
    """``clause 4.2 and 4.3``, ``clause 4.2, 4.3`` and ``clause Annex 2``."""
    listed = re.search(r"\bclause\s+([^\s,\"]+(?:\s*,\s*[0-9][\w.()]*)+)\s*\Z", sight.before)
    if listed is not None and "TO" in sight.expected:
        start = sight.line_start + listed.start(1)
        return Mistake(start, start + len(listed[1]), "a clause is one word or a text", f'write `clause "{listed[1]}"`')
    begun = re.search(r"\bclause\s+([^,\"\n]+)\Z", sight.before)
    if begun is None or sight.found in PHRASE_STARTS or sight.found in ("STRING", "UNIT", "EQUAL", "COMMA"):
        return None
    if "COMMA" not in sight.expected or not sight.rest.strip():
        return None
    whole = (begun[1] + re.split(r"[,\"]", sight.rest)[0]).strip()
    start = sight.line_start + begun.start(1)
    return Mistake(start, start + len(whole), "a clause is one word or a text", f'write `clause "{whole}"`')


def number_with_comma(sight: Sight) -> Mistake | None:
    """``20,000`` and ``0,5``, whether the parser stops at the comma, behind it or behind the whole number."""
    number = None
    head = re.search(r"[0-9][0-9_]*(?:,[0-9]{3})*,?\Z", sight.before)
    if head is not None and sight.found == ("NUMBER" if head[0].endswith(",") else "COMMA"):
        number = _WITH_COMMA.match(sight.before + sight.rest, head.start())
    if number is None and "TO" in sight.expected:
        number = re.search(_WITH_COMMA.pattern + r"\s*(?:%|\[[^\]]*\]|\s)*\Z", sight.before)
    if number is None:
        return None
    start = sight.line_start + number.start()
    end = start + len(f"{number[1]},{number[2]}")
    return Mistake(start, end, "a number has no comma", without_comma(number[1], number[2]))


def _in_the_unit_of(low: str, high: str) -> str:
    """The lower end of a range with the % or unit that is written behind the upper end only."""
    behind = re.search(r"%|\[[^\]]*\]", high)
    return f"{low} {behind[0]}" if behind is not None and re.fullmatch(r"-?[0-9][0-9_.eE+-]*", low) else low


def _with_to(low: str, high: str) -> str:
    return f"write `{_in_the_unit_of(low, high)} to {high}`"


def range_otherwise(sight: Sight) -> Mistake | None:
    """``1-10``, ``1–10``, ``1..10``, ``from 1 to 10`` and ``between 1 and 10`` as a domain."""
    low = re.search(rf"({_NUMBER})\s*\Z", sight.before)
    high = re.match(rf"\s*(?:[-–—]|\.\.+)\s*({_NUMBER})", sight.rest)
    in_domain = "TO" in sight.expected or (not sight.found and sight.first_word in ("fact", "setting"))
    if low is not None and high is not None and in_domain:
        start = sight.line_start + low.start()
        says = "a range is written with `to`"
        return Mistake(start, sight.at + high.end(), says, _with_to(low[1].strip(), high[1]))
    words = re.match(rf"(?:from|between)\s+({_NUMBER})\s*(?:to|and|[-–—])\s*({_NUMBER})", sight.rest)
    if words is not None and "NUMBER" in sight.expected and "ONE" in sight.expected:
        says = f"`{sight.text}` is not said of a range"
        return Mistake(sight.at, sight.at + words.end(), says, _with_to(words[1].strip(), words[2]))
    if sight.text in ("true", "false") and "YES" in sight.expected and "ONE" in sight.expected:
        return sight.here(f"`{sight.text}` is no word of the language", "write `yes or no`")
    return None


def decider_in_words(sight: Sight) -> Mistake | None:
    """``by the developer``, ``by verifier and developer``; a decider without ``by``."""
    if sight.found in ("_NEWLINE", "$END") or sight.first_word not in ("choice", "setting", "judgement"):
        return None
    if sight.text in DECIDERS and "BY" in sight.expected and sight.last_word != "by":
        return sight.here(f"`{sight.text}` stands without `by`", f"write `by {sight.text}`")
    begun = re.search(r"\bby\s+(\w[^,\"]*)\Z", sight.before)
    if begun is None or sight.found in PHRASE_STARTS or not sight.text[:1].isalpha():
        return None
    whole = (begun[1] + re.split(r"[,\":]", sight.rest)[0]).strip()
    named = [word for word in re.findall(r"\w+", whole) if word in DECIDERS]
    says = "two cannot decide the same" if len(named) > 1 else "who decides is said in one word"
    which = named if len(named) == 1 else DECIDERS
    start = sight.line_start + begun.start(1)
    return Mistake(start, start + len(whole), says, f"write {listing([f'`by {each}`' for each in which])}")


def name_of_several_words(sight: Sight) -> Mistake | None:
    """``option kitchen test``, ``option kitchen-test``, ``option "kitchen test"``, ``one of dry wood or coal``."""
    first = sight.first_word
    if sight.found == "STRING" and "NAME" in sight.expected and sight.last_word in (*DECLARATIONS, "option", "of"):
        words = re.findall(r"\w+", sight.text)
        if words and words[0][:1].isalpha():
            says = "a name is one word" if len(words) > 1 else "a name stands without quotation marks"
            return sight.here(says, f"write `{'_'.join(words)}`")
    if first == "option":
        begun = re.search(rf"option\s+({_NAME})\s*\Z", sight.before)
        following = re.match(r"(?:\s*-?\s*\w+)*", sight.rest)
    else:
        begun = re.search(rf"\bone\s+of\s(?:.*,)?\s*(?:or\s+)?({_NAME})\s*\Z", sight.before)
        following = re.match(r"(?:\s*-?\s*(?!or\b)\w+)*", sight.rest)
    if begun is None or following is None or begun[1] in RESERVED or "COMMA" not in sight.expected:
        return None
    if sight.found in PHRASE_STARTS or not (sight.text[:1].isalnum() or sight.found == "MINUS"):
        return None
    words = [begun[1], *re.findall(r"\w+", following[0])]
    start = sight.line_start + begun.start(1)
    if len(words) < 2 or any(word in RESERVED for word in words):
        return None
    return Mistake(start, sight.at + following.end(), "a name is one word", f"write `{'_'.join(words)}`")


def row_without_sign(sight: Sight) -> Mistake | None:
    """``wood 3.2`` and ``wood, 3.2`` in a table."""
    if not sight.lines.startswith("table") or sight.line_start == 0 or "=" in sight.before + sight.rest:
        return None
    number = re.match(rf"(?:-\s+|is\s+)?({_NUMBER})\s*\Z", sight.rest)
    label = sight.before.strip().rstrip(",").rstrip()
    if number is None or not label or sight.expected & {"PERCENT", "TO"}:
        return None
    return sight.here("`=` is missing before the number", f"write `{label} = {number[1]}`", len(sight.rest.rstrip()))


def counted_with_a_word(sight: Sight) -> Mistake | None:
    """``periods 7 years`` and ``at most 5 households``."""
    begun = re.search(r"\b(periods|at\s+most)\s+([0-9_]+)\s+\Z", sight.before)
    if begun is None or sight.found in PHRASE_STARTS or not sight.text[:1].isalpha():
        return None
    return sight.here("a count has no unit", f"write `{' '.join(begun[1].split())} {begun[2]}`")


HABITS = (
    comparison_in_words,
    equal_twice,
    several_clauses,
    number_with_comma,
    range_otherwise,
    decider_in_words,
    row_without_sign,
    name_of_several_words,
    counted_with_a_word,
)
