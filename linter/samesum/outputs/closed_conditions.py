"""Conditions that ask which option a choice took, once that is no question any more."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass

from samesum.outputs.closed_text import (
    CannotClose,
    Replacement,
    comments_in,
    extent,
    instead,
    parted,
    replaced,
    spliced,
    text_at,
)
from samesum.reading import model as m
from samesum.reading import walk
from samesum.reading.read import Reader, Reading

Answer = Callable[[str], "bool | str"]
Again = Callable[[Reading, Sequence[str], Reader], Reading]


@dataclass(frozen=True, slots=True)
class _Place:
    """A condition that asks: in a branch of ``body``, or of the whole rulebook's applicability."""

    condition: m.Condition
    body: m.Body | None
    branch: m.When | m.Option | None
    applies: m.Applies | None = None


def without_takes(reading: Reading, name: str, answer: Answer, reader: Reader, again: Again) -> Reading:
    """The rulebook without ``NAME takes …``. ``answer`` says of an option: always, never, or the condition to ask
    instead. Raises ``CannotClose`` where nothing sensible would be left."""
    while True:
        assert reading.model is not None
        place = next(_places(reading.model, name), None)
        if place is None:
            return reading
        lines = reading.text.split("\n")
        left = _left(place.condition, name, answer, lines)
        if isinstance(left, str):
            made = spliced(lines, [(place.condition.span, left)])
        elif place.applies is not None:
            made = _applies(lines, place.applies, left)
        elif isinstance(place.branch, m.Option):
            made = _option(lines, place, left)
        else:
            assert isinstance(place.body, m.Cases) and isinstance(place.branch, m.When)
            made = _branch(lines, place.body, place.branch, left)
        reading = again(reading, made, reader)


def _places(model: m.Model, name: str) -> Iterator[_Place]:
    for applies in model.applies:
        if _asks(applies.condition, name):
            yield _Place(applies.condition, None, None, applies)
    for quantity in model.quantities:
        for body in walk.bodies(quantity.body):
            for branch in walk.branches(body):
                condition = walk.condition_of(branch)
                if condition is not None and _asks(condition, name):
                    yield _Place(condition, body, branch)


def _asks(condition: m.Condition, name: str) -> bool:
    return any(isinstance(each, m.Takes) and each.quantity == name for each in walk.inside(condition))


def _left(condition: m.Condition, name: str, answer: Answer, lines: Sequence[str]) -> bool | str:
    """What is left of a condition: true, false, or a text."""
    match condition:
        case m.Takes(quantity=asked, option=option) if asked == name:
            return answer(option)
        case m.Not(part=part) if _asks(part, name):
            inner = _left(part, name, answer, lines)
            return (not inner) if isinstance(inner, bool) else f"not ({inner})"
        case m.All(parts=parts) | m.Some(parts=parts) if _asks(condition, name):
            decisive = isinstance(condition, m.Some)
            kept = []
            for part in parts:
                inner = _left(part, name, answer, lines)
                if inner is decisive:
                    return decisive
                if isinstance(inner, str):
                    kept.append(f"({inner})" if isinstance(part, m.Some | m.All) and len(parts) > 1 else inner)
            return (" or " if decisive else " and ").join(kept) if kept else not decisive
    return text_at(lines, condition.span)


def _applies(lines: Sequence[str], applies: m.Applies, left: bool) -> list[str]:
    if not left:
        raise CannotClose("no project would meet `applies when` any more")
    first, last = applies.about.span.line, applies.about.span.end_line
    return replaced(lines, [Replacement(first, last, tuple(comments_in(lines, first, last, 0)))])


def _option(lines: Sequence[str], place: _Place, left: bool) -> list[str]:
    option, body = place.branch, place.body
    assert isinstance(option, m.Option) and body is not None and option.only_when is not None
    if not left:
        if len(walk.branches(body)) == 1:
            raise CannotClose(f"the only option, {option.name}, could never be taken any more")
        return replaced(lines, [_dropped(lines, option)])
    span = option.only_when.span
    text = lines[span.line - 1]
    before = re.sub(r",\s*only\s+when\s*\Z", "", text[: span.column - 1])
    if span.line != span.end_line or before == text[: span.column - 1]:
        raise CannotClose(f"the option {option.name} has its `only when` over several lines; write it on one")
    return replaced(lines, [Replacement(span.line, span.line, (before + text[span.end_column - 1 :],))])


def _branch(lines: Sequence[str], body: m.Cases, branch: m.When, left: bool) -> list[str]:
    others = [each for each in body.branches if each is not branch]
    if not left:
        if not others:
            raise CannotClose("a `cases` would have no branch left")
        if len(others) == 1 and others[0].condition is None:
            return replaced(lines, [instead(lines, body, others[0].body)])
        return replaced(lines, [_dropped(lines, branch)])
    place = body.branches.index(branch)
    before = [each for each in body.branches[:place] if each.condition is not None]
    after = list(body.branches[place + 1 :])
    rivals = before if body.in_order else [each for each in others if each.condition is not None]
    if not rivals:
        return replaced(lines, [instead(lines, body, branch.body)])
    if not body.in_order:
        # It always holds, beside others that hold for some: an overlap, as it was.
        assert branch.condition is not None
        return spliced(lines, [(branch.condition.span, "1 = 1")])
    text, comment = parted(lines[branch.span.line - 1])
    indent = len(text) - len(text.lstrip(" "))
    head = " " * indent + "otherwise" + (f"  {comment}" if comment else "")
    changes = [Replacement(branch.span.line, branch.span.end_line, (head,))]
    return replaced(lines, [*changes, *(_dropped(lines, each) for each in after)])


def _dropped(lines: Sequence[str], branch: m.When | m.Option) -> Replacement:
    first, last = branch.span.line, max(branch.span.end_line, extent(branch.body)[1])
    return Replacement(first, last, tuple(comments_in(lines, first, last, branch.span.column - 1)))
