"""The names of a rulebook: what is declared, before any of it is used."""

from __future__ import annotations

from dataclasses import dataclass, replace
from fractions import Fraction

from samesum.reading import tree
from samesum.reading.model import PLAIN, Unit
from samesum.reading.numbers import exact
from samesum.reading.scope import Declared, Kind, Notebook, Scope
from samesum.reading.units import UnitTable, same_dimension
from samesum.reading.words import RESERVED, listing

_NAMED: dict[str, Kind] = {
    "index": "index",
    "fact": "fact",
    "setting": "setting",
    "judgement": "judgement",
    "constant": "constant",
    "table": "table",
    "quantity": "quantity",
}


@dataclass(frozen=True, slots=True)
class Placed:
    """A block's tree and where it stands. ``last`` is the position after its last word."""

    declaration: tree.Declaration
    place: tree.Place
    last: int


def bare_scope(block: Placed, file: str, notebook: Notebook, units: UnitTable) -> Scope:
    return Scope(file, block.place, notebook, {}, {}, units)


def declare(
    blocks: list[Placed], unreadable: list[Declared], file: str, notebook: Notebook, units: UnitTable
) -> tuple[dict[str, Declared], list[Placed]]:
    """The declared names, and the blocks without those that declare a name a second time.

    ``unreadable`` are the names of blocks that have a mistake in them: declared, but silent.
    """
    found: dict[str, Declared] = {}
    kept: list[Placed] = []
    everything: list[Placed | Declared] = [*blocks, *unreadable]
    everything.sort(key=_line)
    for each in everything:
        if isinstance(each, Declared):
            found.setdefault(each.name, each)
            continue
        kind = _NAMED.get(each.declaration.kind)
        name = each.declaration.name
        if kind is None or name is None:
            kept.append(each)
            continue
        scope = bare_scope(each, file, notebook, units)
        if name.text in RESERVED:
            scope.report(name, f"`{name.text}` is a word of the language and cannot be a name",
                         f"call it something else, such as `{name.text}_1`", "name")  # fmt: skip
        earlier = found.get(name.text)
        if earlier is not None:
            scope.report(name, f"`{name.text}` is declared already, on line {earlier.span.line}",
                         "give one of the two another name", "name")  # fmt: skip
            continue
        found[name.text] = _declared(each, kind, name, scope)
        kept.append(each)
    return _with_indices(found, kept, file, notebook, units), kept


def _line(each: Placed | Declared) -> tuple[int, int]:
    if isinstance(each, Declared):
        return each.span.line, each.span.column
    return each.place.first_line, 1


def _declared(block: Placed, kind: Kind, name: tree.Word, scope: Scope) -> Declared:
    declaration = block.declaration
    unit = head_unit(declaration, scope)
    span = scope.span(name)
    values: tuple[str, ...] = ()
    yes_no = False
    if kind in ("fact", "setting"):
        for phrase in declaration.phrases:
            if phrase.kind == "one_of" and not values:
                values = tuple(dict.fromkeys(word.text for word in phrase.words))
            yes_no = yes_no or phrase.kind == "yes_no"
    options = None
    if isinstance(declaration.body, tree.ChoiceTree):
        options = tuple(dict.fromkeys(option.name.text for option in declaration.body.options))
    per = next((phrase.words[0].text for phrase in declaration.phrases if phrase.kind == "per"), "")
    index = per if kind in ("fact", "quantity") else ""
    return Declared(
        name.text, kind, span, unit, index, values, yes_no and not values, options, _share(declaration, unit)
    )


def _share(declaration: tree.Declaration, unit: Unit | None) -> tuple[Fraction, Fraction] | None:
    """The domain as plain numbers, where the writer says in % that it is a share and it lies inside 0 to 1. A plain
    `0 to 1` may be anything, and a comparison beyond it is no slip (lint rules find the branch that nobody takes)."""
    literals = next((phrase.numbers for phrase in declaration.phrases if phrase.kind == "range"), ())
    if unit is None or unit.dimension or len(literals) != 2:
        return None
    if unit.factor == 1 and not any(literal.percent for literal in literals):
        return None
    ends = []
    for literal in literals:
        value = exact(literal.text)
        if value is None or literal.unit is not None or literal.negative:
            return None
        ends.append(value / 100 if literal.percent else value * unit.factor)
    return (ends[0], ends[1]) if ends[0] <= ends[1] <= 1 else None


def head_unit(declaration: tree.Declaration, scope: Scope) -> Unit | None:
    """The unit in the declaration's first line, plain when it has none."""
    if not declaration.units:
        return PLAIN
    for more in declaration.units[1:]:
        scope.report(more, "a second unit stands here", "keep one of the two", "unit")
    return scope.unit(declaration.units[0])


def _with_indices(
    found: dict[str, Declared], blocks: list[Placed], file: str, notebook: Notebook, units: UnitTable
) -> dict[str, Declared]:
    """The names again, those per something that is no index now unreadable, and the quantity that is
    the result in the result's unit."""
    names = dict(found)
    for block in blocks:
        name = block.declaration.name
        declared = found.get(name.text) if name is not None else None
        if declared is not None and declared.index and block.declaration.kind in ("fact", "quantity"):
            index = found.get(declared.index)
            scope = replace(bare_scope(block, file, notebook, units), names=found)
            word = next(phrase.words[0] for phrase in block.declaration.phrases if phrase.kind == "per")
            if index is None:
                scope.find(word, ("index",))
            elif index.kind not in ("index", "unreadable"):
                indices = [other.name for other in found.values() if other.kind == "index"]
                remedy = f"the indices are {listing(indices, 'and')}" if indices else "declare an index"
                scope.report(word, f"`{index.name}` is a {index.kind}, not an index", remedy)
            if index is None or index.kind != "index":
                names[declared.name] = replace(declared, kind="unreadable")
    for block in blocks:
        if block.declaration.kind == "result" and block.declaration.name is not None and block.declaration.units:
            declared = names.get(block.declaration.name.text)
            scope = bare_scope(block, file, Notebook(), units)
            unit = scope.unit(block.declaration.units[0])
            if declared is None or declared.kind != "quantity" or declared.unit is None or unit is None:
                continue
            if same_dimension(declared.unit, unit):
                names[declared.name] = replace(declared, unit=unit)
    return names
