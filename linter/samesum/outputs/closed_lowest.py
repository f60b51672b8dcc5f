"""A choice closed by taking the option that credits least: all are worked out, the lowest counts."""

from __future__ import annotations

from collections.abc import Sequence

from samesum.outputs.closed import again, declaration, errors_said, find_body, unused_name
from samesum.outputs.closed_conditions import without_takes
from samesum.outputs.closed_text import (
    Replacement,
    comments_in,
    extent,
    moved,
    parted,
    replaced,
    spliced,
    text_at,
)
from samesum.reading import model as m
from samesum.reading import walk
from samesum.reading.read import Reader, Reading


def lowest(
    reading: Reading, quantity: m.Quantity, body: m.Choice, id: str, subtracted: bool, reader: Reader
) -> Reading:
    """A quantity for each option, and the lowest of them (the highest of what is subtracted) in place of the choice.

    An option with ``only when`` counts where its condition holds. What follows the choice, or asks what it took, asks
    which option was the lowest. Where nothing states an error and nothing follows, the formulas themselves stand in
    ``min(…)``.
    """
    assert reading.model is not None
    lines = reading.text.split("\n")
    own = body is quantity.body
    asked = own and _is_asked(reading.model, quantity.name)
    plain = all(isinstance(option.body, m.Formula) and not errors_said(option) for option in body.options)
    if plain and not asked:
        terms = {option.name: formula_text(lines, option.body) for option in body.options}
    else:
        wanted = {option.name: f"{id.replace('/', '_')}_{option.name}" for option in body.options}
        terms = {option: unused_name(reading.model, name) for option, name in wanted.items()}
        new: list[str] = []
        for option in body.options:
            new += ["", *_worked_out(reading.model, lines, quantity, option, terms[option.name])]
        after = quantity.about.span.end_line
        reading = again(reading, replaced(lines, [Replacement(after + 1, after, tuple(new))]), reader)
        if asked:
            name = quantity.name
            reading = without_takes(reading, name, lambda option: f"{name} = {terms[option]}", reader, again)
            reading = _followers(reading, name, terms, reader)
    assert reading.model is not None
    quantity, found = find_body(reading.model, id)
    assert isinstance(found, m.Choice)
    lines = reading.text.split("\n")
    first, last = extent(found)
    indent = found.span.column - 1
    function = "max" if subtracted else "min"
    made = [*comments_in(lines, first, last, indent), *_lowest(found.options, terms, function, lines, indent, ())]
    return again(reading, replaced(lines, [Replacement(first, last, tuple(made))]), reader)


def _is_asked(model: m.Model, name: str) -> bool:
    """Whether anything follows the choice or asks what it took."""
    conditions = [each.condition for each in model.applies]
    for quantity in model.quantities:
        for body in walk.bodies(quantity.body):
            if isinstance(body, m.Follows) and body.quantity == name:
                return True
            conditions += [found for each in walk.branches(body) if (found := walk.condition_of(each)) is not None]
    return any(isinstance(each, m.Takes) and each.quantity == name for one in conditions for each in walk.inside(one))


def formula_text(lines: Sequence[str], body: m.Body) -> str:
    """A formula's expression as it is written."""
    return text_at(lines, body.span).removeprefix("=").strip()


def _worked_out(model: m.Model, lines: Sequence[str], quantity: m.Quantity, option: m.Option, name: str) -> list[str]:
    """An option as a quantity of its own; its comments stay where the choice was."""
    errs = errors_said(option)
    if isinstance(option.body, m.Formula):
        return [declaration(quantity, name, errs), f"    = {formula_text(lines, option.body)}"]
    start, end = extent(option.body)
    bare = [parted(line)[0] for line in moved(lines, start, end, 4 - (option.body.span.column - 1))]
    inner = [line for line in bare if line.strip()]
    if not errs:
        return [declaration(quantity, name), *inner]
    plain = unused_name(model, f"{name}_worked_out")
    return [declaration(quantity, name, errs), f"    = {plain}", "", declaration(quantity, plain), *inner]


def _followers(reading: Reading, name: str, terms: dict[str, str], reader: Reader) -> Reading:
    """What follows the choice: the branch of the option that was the lowest."""
    assert reading.model is not None
    edits = []
    for quantity in reading.model.quantities:
        for body in walk.bodies(quantity.body):
            if isinstance(body, m.Follows) and body.quantity == name:
                edits.append((body.span, "cases in order"))
                for option in body.options[:-1]:
                    edits.append((option.span, f"when {name} = {terms[option.name]}"))
                edits.append((body.options[-1].span, "otherwise"))
    return again(reading, spliced(reading.text.split("\n"), edits), reader) if edits else reading


def _lowest(
    options: Sequence[m.Option],
    terms: dict[str, str],
    function: str,
    lines: Sequence[str],
    indent: int,
    known: tuple[tuple[str, bool], ...],
) -> list[str]:
    """The lines of a body: ``cases`` over the first option that is open only sometimes, or the lowest itself."""
    said = dict(known)
    asked = next((each for each in options if each.only_when is not None and each.name not in said), None)
    if asked is None:
        inside = [terms[each.name] for each in options if said.get(each.name, True)]
        if not inside:
            return []
        return [" " * indent + ("= " + (inside[0] if len(inside) == 1 else f"{function}({', '.join(inside)})"))]
    assert asked.only_when is not None
    yes = _lowest(options, terms, function, lines, indent + 8, (*known, (asked.name, True)))
    no = _lowest(options, terms, function, lines, indent + 8, (*known, (asked.name, False)))
    made = [" " * indent + "cases", " " * (indent + 4) + f"when {text_at(lines, asked.only_when.span)}", *yes]
    return [*made, *([" " * (indent + 4) + "otherwise", *no] if no else [])]
