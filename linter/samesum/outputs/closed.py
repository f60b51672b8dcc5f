"""A rulebook's text with a branch point closed: mandated, the lowest of the options, fixed at validation, deducted.

Text and model in, text out; the rest of the file keeps its comments and layout. Every step is read again before the
next, so that what is written always parses. What each way of closing writes:

* ``mandate``: of the reference, its formula in place of the choice (also where another choice follows it, and in
  conditions that ask what it took); of another option, or one that is open only sometimes, ``choice takes …``, so that
  the reference stays in the text and ``bias`` goes on measuring against it.
* ``lowest``: ``choice takes lowest value`` (``highest`` for what is subtracted).
* a setting: a constant, or ``takes …`` with another value than the one it stands at in comparisons; a judgement:
  ``takes yes`` or ``no``.
* ``fixed``: ``fixed at validation`` on the choice.
* ``deduct``: a constant that is ``not in reference``, and every option's formula × (1 − constant).
* ``in order``: ``cases in order``, so that of overlapping conditions the first that holds counts.
"""

from __future__ import annotations

import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction

from samesum.outputs.closed_conditions import without_takes
from samesum.outputs.closed_text import (
    CannotClose,
    Replacement,
    above,
    comments_in,
    formulas,
    header_end,
    instead,
    parted,
    replaced,
    spliced,
    text_at,
    with_phrase,
)
from samesum.reading import model as m
from samesum.reading import walk
from samesum.reading.read import Reader, Reading, read
from samesum.reading.words import listing, nearest


@dataclass(frozen=True, slots=True)
class Closing:
    """``id``: a branch point without an element's number, a setting or a judgement. ``option``: what is mandated (""
    for the reference). ``share``: what is deducted (below zero: added). ``subtracted``: the quantity counts against the
    credits, so that its highest value credits least."""

    kind: str
    id: str
    option: str = ""
    share: float = 0.0
    subtracted: bool = False


def closed(reading: Reading, closing: Closing, reader: Reader) -> Reading:
    """The rulebook with one place closed, read again. Raises ``CannotClose``."""
    assert reading.model is not None
    setting = next((each for each in reading.model.settings if each.name == closing.id), None)
    if setting is not None:
        return again(reading, _setting_fixed(reading, setting, closing), reader)
    judgement = next((each for each in reading.model.judgements if each.name == closing.id), None)
    if judgement is not None:
        return again(reading, _judgement_read(reading, judgement, closing), reader)
    quantity, body = find_body(reading.model, closing.id)
    if closing.kind == "in order":
        return again(reading, _in_order(reading, body, closing), reader)
    if not isinstance(body, m.Choice):
        raise CannotClose(f"{closing.id} is no choice, and cannot be closed by `{closing.kind}`")
    if body.takes and closing.kind in ("fixed", "deduct"):
        raise CannotClose(f"nobody chooses at {closing.id}: the rulebook takes {body.takes} there")
    if closing.kind == "fixed":
        return again(reading, _fixed(reading, body), reader)
    if closing.kind == "deduct":
        return again(reading, _deducted(reading, quantity, body, closing), reader)
    if closing.kind == "lowest":
        extreme = m.HIGHEST if closing.subtracted else m.LOWEST
        return again(reading, _taken(reading, body, extreme), reader)
    if closing.kind == "mandate":
        return _mandated(reading, quantity, body, closing, reader)
    raise CannotClose(f"there is no way of closing called `{closing.kind}`")


def again(reading: Reading, lines: Sequence[str], reader: Reader) -> Reading:
    """What was written, read again. Raises ``CannotClose`` when it does not read."""
    assert reading.model is not None
    found = read("\n".join(lines), reading.model.file, reader=reader)
    if found.model is None or found.problems:
        first = found.problems[0]
        raise CannotClose(f"line {first.span.line} of what would be written does not read: {first.says}")
    return found


def find_body(model: m.Model, id: str) -> tuple[m.Quantity, m.Body]:
    """The quantity and the body of a branch point. Raises ``CannotClose`` when there is none."""
    name, *steps = id.split("/")
    quantity = next((each for each in model.quantities if each.name == name.partition("@")[0]), None)
    body = quantity.body if quantity is not None else None
    for step in steps:
        branch = next((each for each in walk.branches(body) if each.name == step), None) if body is not None else None
        body = branch.body if branch is not None else None
    if quantity is None or body is None or not walk.branches(body):
        inputs = [*(each.name for each in model.settings), *(each.name for each in model.judgements)]
        known = [*inputs, *_ids(model)]
        close = nearest(id, known)
        raise CannotClose(f"there is no branch point {id}" + (f"; did you mean `{close}`?" if close else ""))
    return quantity, body


def _ids(model: m.Model) -> Iterator[str]:
    def inside(body: m.Body, id: str) -> Iterator[str]:
        if walk.branches(body):
            yield id
        for branch in walk.branches(body):
            yield from inside(branch.body, f"{id}/{branch.name}")

    for quantity in model.quantities:
        yield from inside(quantity.body, quantity.name)


def unused_name(model: m.Model, wanted: str) -> str:
    """A name that nothing has yet."""
    inputs = {each.name for each in model.facts} | {each.name for each in model.settings}
    worked = {each.name for each in model.constants} | {each.name for each in model.quantities}
    others = {each.name for each in model.judgements} | {each.name for each in model.tables}
    taken = inputs | worked | others | {each.name for each in model.indices}
    name, number = wanted, 2
    while name in taken:
        name, number = f"{wanted}_{number}", number + 1
    return name


# --- the simple ones -----------------------------------------------------------------------------


def _fixed(reading: Reading, body: m.Choice) -> list[str]:
    lines = reading.text.split("\n")
    if body.timing == "validation":
        return lines
    first, last = body.span.line, header_end(lines, body.span.line)
    made = lines[first - 1 : last]
    for number, line in enumerate(made):
        text = parted(line)[0]
        fixed = re.sub(r"\bopen\s+each\s+period\b", "fixed at validation", text)
        if fixed != text:
            made[number] = fixed + line[len(text) :]
            return replaced(lines, [Replacement(first, last, tuple(made))])
    made[-1] = with_phrase(made[-1], "fixed at validation")
    return replaced(lines, [Replacement(first, last, tuple(made))])


def _in_order(reading: Reading, body: m.Body, closing: Closing) -> list[str]:
    if not isinstance(body, m.Cases):
        raise CannotClose(f"{closing.id} is no `cases`; only overlapping conditions can be taken in order")
    lines = reading.text.split("\n")
    line = lines[body.span.line - 1]
    if body.in_order:
        return lines
    at = body.span.column - 1 + len("cases")
    return replaced(lines, [Replacement(body.span.line, body.span.line, (line[:at] + " in order" + line[at:],))])


def _setting_fixed(reading: Reading, setting: m.Setting, closing: Closing) -> list[str]:
    """A constant, where the value is the one that counts in comparisons; else the setting with what it takes."""
    if closing.kind != "mandate":
        raise CannotClose(f"{setting.name} is a value that somebody sets: write `mandate=VALUE:{setting.name}`")
    from samesum.evidence.choosing.latitudes import middle

    lines = reading.text.split("\n")
    first = setting.about.span.line
    last = header_end(lines, first)
    value = closing.option.strip()
    if not isinstance(setting.domain, m.Range):
        known = ("yes", "no") if isinstance(setting.domain, m.YesNo) else setting.domain.values
        if value and value not in known:
            raise CannotClose(f"{setting.name} cannot be {value}; its values are {listing(known, 'and')}")
        return _with_taken(lines, first, last, value or known[0])
    unit = f" [{setting.unit.text}]" if setting.unit.text else ""
    stands = middle(setting.domain)
    if value and not _is_number(value, stands, setting):
        return _with_taken(lines, first, last, value)
    percent = not setting.unit.text and setting.domain.high is not None and setting.domain.high <= 1
    value = f"{float(stands) * (100 if percent else 1):.12g}{' %' if percent else ''}{unit}"
    text = f"constant {setting.name}{unit} = {value}"
    if setting.about.clause:
        plain = re.fullmatch(r'[^\s,"#]+', setting.about.clause)
        text += f", clause {setting.about.clause if plain else chr(34) + setting.about.clause + chr(34)}"
    comments = comments_in(lines, first, last, 0)
    return replaced(lines, [Replacement(first, last, (*comments, text))])


def _is_number(value: str, stands: Fraction | str | bool, setting: m.Setting) -> bool:
    """Whether what was asked for is the number that the setting stands at. A unit of its own is left to the reader of
    rulebooks."""
    found = re.fullmatch(r"([-+]?[0-9_.]+(?:[eE][-+]?[0-9]+)?) ?(%?) ?(?:\[(.*)\]|(.*))", value)
    if found is None or (found[3] or found[4] or "") not in ("", setting.unit.text):
        return False
    try:
        number = Fraction(found[1]) / (100 if found[2] else 1)
    except ValueError:
        return False
    return number == stands


_TAKES = re.compile(r",\s*takes\s+[^,]*?(?=\s*(?:,|$))")


def _with_taken(lines: list[str], first: int, last: int, value: str) -> list[str]:
    """A declaration with what it takes at its end, in place of what it took before; a unit behind a number gets its
    brackets."""
    found = re.fullmatch(r"([-+]?[0-9][0-9_.]*) ?([A-Za-z][^\[\]]*)", value)
    said = f"{found[1]} [{found[2].strip()}]" if found else value
    made = list(lines[first - 1 : last])
    for number, line in enumerate(made):
        text = parted(line)[0]
        before = _TAKES.search(re.sub(r'"[^"]*"', lambda quoted: "_" * len(quoted[0]), text))
        if before is not None:
            made[number] = f"{text[: before.start()]}, takes {said}{text[before.end() :]}{line[len(text) :]}"
            return replaced(lines, [Replacement(first, last, tuple(made))])
    made[-1] = with_phrase(made[-1], f"takes {said}")
    return replaced(lines, [Replacement(first, last, tuple(made))])


def _judgement_read(reading: Reading, judgement: m.Judgement, closing: Closing) -> list[str]:
    if closing.kind != "mandate":
        raise CannotClose(f"{judgement.name} is a judgement: write `mandate=yes:{judgement.name}` or `mandate=no:…`")
    if closing.option not in ("", "yes", "no"):
        raise CannotClose(f"{judgement.name} is read as yes or no, not as {closing.option}")
    lines = reading.text.split("\n")
    first = judgement.about.span.line
    return _with_taken(lines, first, header_end(lines, first), closing.option or "yes")


def _taken(reading: Reading, body: m.Choice, takes: str) -> list[str]:
    """The choice with what everybody takes in place of who chooses; its options stay as they are."""
    lines = reading.text.split("\n")
    first, last = body.span.line, header_end(lines, body.span.line)
    indent = " " * (body.span.column - 1)
    text = f"{indent}choice takes {takes}"
    if body.correlated is not None:
        text += f", errors correlated {float(body.correlated):.10g}"
    if first == last:
        comment = parted(lines[first - 1])[1]
        return replaced(lines, [Replacement(first, last, (text + (f"  {comment}" if comment else ""),))])
    comments = comments_in(lines, first, last, body.span.column - 1)
    return replaced(lines, [Replacement(first, last, (*comments, text))])


def _deducted(reading: Reading, quantity: m.Quantity, body: m.Choice, closing: Closing) -> list[str]:
    """The constant above the quantity, and each formula of each option × (1 − constant)."""
    assert reading.model is not None
    lines = reading.text.split("\n")
    what, sign = ("deduction", "-") if closing.share >= 0 else ("addition", "+")
    name = unused_name(reading.model, f"{closing.id.replace('/', '_')}_{what}")
    edits = []
    for option in body.options:
        for formula in formulas(option.body):
            start = text_at(lines, formula.span)
            inner = start.removeprefix("=").strip()
            edits.append((formula.span, f"= ({inner}) * (1 {sign} {name})"))
    made = spliced(lines, edits)
    clause = quantity.about.clause
    said = f', clause {clause}' if re.fullmatch(r'[^\s,"#]+', clause) else ""
    constant = (
        f"constant {name} = {100 * abs(closing.share):.3f} %, not in reference{said},"
        ' source "samesum bias"'
    )
    at = above(made, quantity.about.span.line)
    return replaced(made, [Replacement(at, at - 1, (constant, ""))])


# --- mandate ---------------------------------------------------------------------------------------


def _mandated(
    reading: Reading, quantity: m.Quantity, body: m.Choice, closing: Closing, reader: Reader
) -> Reading:
    option = chosen_option(body, closing.option, closing.id)
    own = body is quantity.body
    reference = chosen_option(body, "", closing.id) is option
    if reference and option.only_when is None and (own or not errors_said(option)):
        try:
            kept = reading
            if own:
                kept = without_takes(kept, quantity.name, lambda asked: asked == option.name, reader, again)
                kept = _followers_mandated(kept, quantity.name, option.name, reader)
            return one_option(kept, closing.id, option.name, reader)
        except CannotClose:
            pass  # what hangs on the choice cannot be written without it
    return again(reading, _taken(reading, body, option.name), reader)


def chosen_option(body: m.Choice, name: str, id: str) -> m.Option:
    """The option of that name, or the one that counts as the reference. Raises ``CannotClose``."""
    if not name:
        from samesum.evidence.subjects.pointwise import preferred

        return body.options[preferred(body.options, list(range(len(body.options))))]
    for option in body.options:
        if option.name == name:
            return option
    close = nearest(name, [option.name for option in body.options])
    raise CannotClose(f"{id} has no option {name}" + (f"; did you mean `{close}`?" if close else ""))


def _followers_mandated(reading: Reading, name: str, option: str, reader: Reader) -> Reading:
    while True:
        assert reading.model is not None
        following = next(
            (
                id
                for id in _ids(reading.model)
                for body in (find_body(reading.model, id)[1],)
                if isinstance(body, m.Follows) and body.quantity == name
            ),
            None,
        )
        if following is None:
            return reading
        reading = one_option(reading, following, option, reader)


def one_option(reading: Reading, id: str, name: str, reader: Reader) -> Reading:
    """One option's body in place of a choice, or of what follows one; what it says of its error stays said."""
    assert reading.model is not None
    quantity, body = find_body(reading.model, id)
    option = next(each for each in walk.branches(body) if each.name == name)
    assert isinstance(option, m.Option)
    lines = reading.text.split("\n")
    errs = errors_said(option)
    if errs and body is not quantity.body:
        raise CannotClose(f"the error of {name} at {id} has no place but at the option")
    if not errs:
        return again(reading, replaced(lines, [instead(lines, body, option.body)]), reader)
    end = header_end(lines, quantity.about.span.line)
    header = Replacement(end, end, (with_phrase(lines[end - 1], errs),))
    return again(reading, replaced(lines, [header, instead(lines, body, option.body)]), reader)


def errors_said(option: m.Option) -> str:
    """The phrases by which a quantity states what the option stated of its error; "" when it stated nothing."""
    said = []
    if option.error:
        said.append(f"error {100 * float(option.error):.10g} %")
    if option.bias:
        said.append(f"bias {100 * float(option.bias):.10g} %")
    return ", ".join(said)
