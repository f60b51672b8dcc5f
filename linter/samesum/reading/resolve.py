"""Trees → model: names, kinds, domains, units; everything that is wrong, once."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, replace
from typing import TypeVar, cast

from samesum.problems import Problem
from samesum.reading.cycles import cycles, knots_in
from samesum.reading.declarations import (
    resolve_applies,
    resolve_constant,
    resolve_fact,
    resolve_index,
    resolve_judgement,
    resolve_periods,
    resolve_quantity,
    resolve_quietly,
    resolve_result,
    resolve_setting,
    resolve_table,
)
from samesum.reading.model import About, Key, Model, Unit, Unknown
from samesum.reading.names import Placed, bare_scope, declare
from samesum.reading.phrases import read_phrases, text_of
from samesum.reading.scope import Declared, Notebook, Scope, absent_problems
from samesum.reading.tables import resolve_keys
from samesum.reading.units import UnitTable
from samesum.spans import START, Span

REMEMBERED_BLOCKS = 20_000
REMEMBERED_SURROUNDINGS = 4
_Made = TypeVar("_Made")


@dataclass(frozen=True, slots=True)
class Unreadable:
    """A block with a mistake in it: what it would have declared, as far as a glance can tell."""

    first_word: str
    name: str
    span: Span


@dataclass(frozen=True, slots=True)
class Surroundings:
    """All that a block's meaning depends on beside its own text and line, and what blocks came to in it."""

    file: str
    names: dict[str, Declared]
    keys: dict[str, tuple[tuple[str, bool, tuple[str, ...], Unit], ...]]
    blocks: dict[tuple[str, int], tuple[object, Notebook]] = field(default_factory=dict, compare=False, repr=False)


@dataclass(slots=True)
class Recall:
    """What blocks came to before, so that an edit resolves one block again. Holds the latest few surroundings
    (a block goes from readable to not and back while it is written). ``resolved`` counts the blocks resolved."""

    latest: list[Surroundings] = field(default_factory=list)
    resolved: int = 0

    def within(self, here: Surroundings) -> Surroundings:
        """``here``, with what blocks came to the last time in the same surroundings."""
        known = next((each for each in self.latest if each == here), None)
        if known is not None and len(known.blocks) < REMEMBERED_BLOCKS:
            here = known
        self.latest = [here, *(each for each in self.latest if each is not known)][:REMEMBERED_SURROUNDINGS]
        return here


def resolve(
    file: str, blocks: list[Placed], unreadable: list[Unreadable], units: UnitTable, recall: Recall
) -> tuple[Model, list[Problem]]:
    """The model of the blocks, and every problem found on the way.

    Names that ``unreadable`` blocks would have declared count as declared, and are silent.
    """
    notebook = Notebook()
    silent = [Declared(each.name, "unreadable", each.span) for each in unreadable if each.name]
    names, kept = declare(blocks, silent, file, notebook, units)
    keys = _all_keys(kept, names, file, notebook, units)
    shapes = {name: tuple((key.name, key.bands, key.values, key.unit) for key in found) for name, found in keys.items()}
    came_to = recall.within(Surroundings(file, names, shapes)).blocks
    needs: dict[str, tuple[str, ...]] = {}

    def one(block: Placed, make: Callable[[Placed, Scope], _Made]) -> _Made | None:
        key = (block.place.text, block.place.first_line)
        known = came_to.get(key)
        if known is None:
            own = Notebook()
            scope = replace(bare_scope(block, file, own, units), names=names, keys=keys)
            recall.resolved += 1
            known = (_made(block, make, scope), own)
            came_to[key] = known
        made, own = known
        notebook.add(own)
        if block.declaration.kind in ("constant", "quantity") and block.declaration.name is not None:
            needs[block.declaration.name.text] = tuple(dict.fromkeys(name for name, _ in own.mentions))
        return cast("_Made | None", made)

    def every(kind: str, make: Callable[[Placed, Scope], _Made]) -> tuple[_Made, ...]:
        found = [one(block, make) for block in kept if block.declaration.kind == kind]
        return tuple(made for made in found if made is not None)

    title, draft, title_span = _title(blocks, unreadable, notebook, file, units)
    periods = every("periods", resolve_periods)
    results = every("result", resolve_result)
    for kind in ("periods", "result"):
        _once(kind, blocks, notebook, file, units)
    if not any(block.declaration.kind == "result" for block in blocks) and not any(
        each.first_word == "result" for each in unreadable
    ):
        says, remedy = "the rulebook has no result", "write `result NAME [UNIT]` for what is credited"
        notebook.problems.append(Problem(file, title_span, says, remedy, "shape"))
    model = Model(
        file=file,
        title=title,
        draft=draft,
        title_span=title_span,
        result=results[0] if results else None,
        periods=periods[0] if periods else 1,
        applies=every("applies", resolve_applies),
        indices=every("index", resolve_index),
        facts=every("fact", resolve_fact),
        settings=every("setting", resolve_setting),
        judgements=every("judgement", resolve_judgement),
        constants=every("constant", resolve_constant),
        tables=every("table", resolve_table),
        quantities=every("quantity", resolve_quantity),
    )
    model = _without_cycles(model, needs, notebook)
    _one_currency(file, notebook)
    return model, [*notebook.problems, *absent_problems(notebook, file)]


def _made(block: Placed, make: Callable[[Placed, Scope], _Made], scope: Scope) -> _Made | None:
    """What the block comes to; None when what it declares cannot be used."""
    name = block.declaration.name
    indexed = block.declaration.kind in ("fact", "quantity")
    if indexed and name is not None and scope.names[name.text].kind == "unreadable":
        resolve_quietly(block, scope)
        return None
    return make(block, scope)


def _all_keys(
    kept: list[Placed], names: dict[str, Declared], file: str, notebook: Notebook, units: UnitTable
) -> dict[str, tuple[Key, ...]]:
    keys: dict[str, tuple[Key, ...]] = {}
    for block in kept:
        name = block.declaration.name
        if block.declaration.kind == "table" and name is not None:
            scope = replace(bare_scope(block, file, notebook, units), names=names)
            found = resolve_keys(block.declaration, scope)
            if found is not None:
                unit = names[name.text].unit
                keys[name.text] = found
                names[name.text] = replace(names[name.text], unit=unit)
    return keys


def _title(
    blocks: list[Placed], unreadable: list[Unreadable], notebook: Notebook, file: str, units: UnitTable
) -> tuple[str, str, Span]:
    """Title, draft and where the title stands; reports a first line that is missing or elsewhere."""
    title, draft, span = "", "", START
    found = [block for block in blocks if block.declaration.kind == "rulebook"]
    first_line = min([block.place.first_line for block in blocks] + [each.span.line for each in unreadable], default=1)
    for number, block in enumerate(found):
        scope = bare_scope(block, file, notebook, units)
        phrases = read_phrases("rulebook", block.declaration.phrases, scope)
        name = block.declaration.name
        if number:
            scope.report(block.declaration, "the file has a second `rulebook` line", "one file holds one rulebook")
        elif name is not None:
            title, draft, span = name.text, text_of(phrases, "draft"), scope.span(block.declaration)
            if block.place.first_line != first_line:
                scope.report(block.declaration, "the `rulebook` line is not the first", "move it to the top")
    if not found and not any(each.first_word == "rulebook" for each in unreadable):
        notebook.problems.append(
            Problem(file, Span(first_line, 1, first_line, 2), "the file does not start with its `rulebook` line",
                    "write `rulebook \"TITLE\", draft \"VERSION\"` at the top", "shape")
        )  # fmt: skip
    return title, draft, span


def _once(kind: str, blocks: list[Placed], notebook: Notebook, file: str, units: UnitTable) -> None:
    found = [block for block in blocks if block.declaration.kind == kind]
    for block in found[1:]:
        scope = bare_scope(block, file, notebook, units)
        line = found[0].place.first_line
        says = f"a second `{kind}` stands here; the first is on line {line}"
        scope.report(block.declaration, says, "keep one of the two")


def _without_cycles(model: Model, needs: dict[str, tuple[str, ...]], notebook: Notebook) -> Model:
    """The model with what needs itself made unknown."""
    named: dict[str, About] = {each.name: each.about for each in model.constants}
    named |= {each.name: each.about for each in model.quantities}
    knots = knots_in(needs)
    for chain in cycles(needs, knots):
        first = named[chain[0]]
        way = " needs ".join(f"`{name}`" for name in (*chain, chain[0]))
        says = f"{way}: none of them can be worked out first" if len(chain) > 1 else f"`{chain[0]}` needs itself"
        notebook.problems.append(Problem(model.file, first.name_span, says, "break the circle at one of them", "cycle"))
    knot = set().union(*knots)
    return replace(
        model,
        constants=tuple(
            replace(each, expression=Unknown(each.expression.span)) if each.name in knot else each
            for each in model.constants
        ),
        quantities=tuple(
            replace(each, body=Unknown(each.body.span)) if each.name in knot else each for each in model.quantities
        ),
    )


def _one_currency(file: str, notebook: Notebook) -> None:
    if not notebook.currencies:
        return
    in_order = sorted(notebook.currencies, key=lambda each: each[1])
    first, span = in_order[0]
    for currency, at in in_order:
        if currency != first:
            notebook.problems.append(
                Problem(file, at, f"this cost is in {currency}, that on line {span.line} in {first}",
                        "write all costs in one currency, so that they can be compared", "unit")
            )  # fmt: skip
            return
