"""Groups of facts and settings in the network: which combinations of cells and signs can occur.

A group of facts alone is one relation. Where a setting stands in one comparison with a fact, what
a project *is* includes which combinations the setting can still bring about; those kinds of
project are listed by eliminating the setting (quantifier elimination in the solver).
"""

from __future__ import annotations

import time
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass

from samesum.evidence import solver as s
from samesum.evidence import symbols
from samesum.evidence.cells import Group, Listing, Vector, list_group, merged
from samesum.evidence.diagrams import Diagrams
from samesum.evidence.readings import Readings
from samesum.evidence.symbols import Bounds, Sum

FULL = (s.NEGATIVE, s.ZERO, s.POSITIVE)
PLAIN_SIGN = {s.NEGATIVE: 0, s.ZERO: 1, s.POSITIVE: 2, s.MERGED_NEGATIVE: 0, s.MERGED_POSITIVE: 2}
MOST_KINDS = 48


@dataclass(frozen=True, slots=True)
class ListedGroup:
    """A group with the levels of its cells (``name_levels``) and signs (``sign_levels``)."""

    group: Group
    name_levels: tuple[int, ...]
    sign_levels: tuple[int, ...]
    listing: Listing

    @property
    def names(self) -> tuple[str, ...]:
        return self.group.names

    @property
    def levels(self) -> tuple[int, ...]:
        return (*self.name_levels, *self.sign_levels)


def collect(
    readings: Readings, signs: Mapping[Sum, int], cells: Mapping[int, tuple[Bounds, ...]]
) -> tuple[ListedGroup, ...]:
    """The groups of ``signs`` (those that are not one linear fact's), each listed. Like groups are listed once."""
    sums = list(signs.items())
    if not sums:
        return ()
    root: dict[str, str] = {}

    def find(name: str) -> str:
        while root.setdefault(name, name) != name:
            name = root[name]
        return name

    for each, _ in sums:
        names = sorted(symbols.generators(each))
        for other in names[1:]:
            root[find(other)] = find(names[0])
    members: dict[str, set[str]] = {}
    held: dict[str, list[tuple[Sum, int]]] = {}
    for each, level in sorted(sums, key=lambda item: item[1]):
        names = sorted(symbols.generators(each))
        for name in names:
            members.setdefault(find(name), set()).add(name)
        held.setdefault(find(names[0]), []).append((each, level))
    listed: dict[Group, Listing] = {}
    found: list[ListedGroup] = []
    deadline = readings.diagrams.limits.deadline
    share = (deadline - time.monotonic()) * 0.7
    for number, key in enumerate(sorted(held)):
        names = sorted(members[key], key=readings.level)
        thresholds = []
        for name in names:
            inner = cells.get(readings.level(name), ())
            thresholds.append(tuple(cell.low for cell in inner if cell.low is not None and cell.low == cell.high))
        group = Group(
            tuple(names),
            tuple(readings.domains[name] for name in names),
            tuple(thresholds),
            tuple(each for each, _ in held[key]),
            tuple(_told_apart(readings.borders.get(each, {"apart"})) for each, _ in held[key]),
        )
        plain = group.renamed()
        if plain not in listed:
            left = deadline - time.monotonic()
            until = min(deadline, time.monotonic() + max(share / len(held), left * 0.7 / (len(held) - number)))
            listed[plain] = list_group(plain, until)
        found.append(
            ListedGroup(
                group,
                tuple(readings.level(name) for name in names),
                tuple(level for _, level in held[key]),
                listed[plain],
            )
        )
    return tuple(found)


def _told_apart(borders: set[str]) -> tuple[int, ...]:
    if borders == {"above"}:
        return (s.NEGATIVE, s.MERGED_POSITIVE)
    if borders == {"below"}:
        return (s.MERGED_NEGATIVE, s.POSITIVE)
    return FULL


@dataclass(frozen=True, slots=True)
class Validity:
    """What can occur in one group, as factors. ``projects`` speak of facts (and of the kind of project),
    ``inputs`` of settings given the kind. ``kind_level`` is None when no kind is needed."""

    projects: tuple[int, ...]
    inputs: tuple[int, ...]
    kind_level: int | None
    exact: bool


def validity(d: Diagrams, listed: ListedGroup, free: set[str], kind_level: int, loose: bool) -> Validity:
    """The group's factors when the names in ``free`` are whatever somebody sets and the rest is given.

    ``loose`` admits every combination that was not refuted, else only those shown to occur.
    """
    listing = listed.listing
    group = listed.group
    exact = listing.complete and not listing.open
    movable = [name for name in group.names if name in free]
    vectors = listing.shown + listing.open if loose else listing.shown
    if loose and not listing.complete:
        return Validity((), (), None, False)
    if not movable or len(movable) == len(group.names):
        factor = relation(d, listed.levels, [_as_values(vector, len(group.names)) for vector in vectors])
        return Validity(() if movable else (factor,), (factor,) if movable else (), None, exact)
    given, moved = _split(group, movable)
    kinds, kinds_exact = _kinds(group, listing, given, moved, movable, d.limits.deadline, loose)
    d.size[kind_level] = max(1, len(kinds))
    width = len(group.names)
    project_rows: list[Vector] = []
    input_rows: list[Vector] = []
    for number, (fixed, brought) in enumerate(kinds):
        project_rows.append((number, *_values_at(fixed, given, width)))
        input_rows += [(number, *_values_at(each, moved, width)) for each in brought]
    levels = listed.levels
    return Validity(
        (relation(d, (kind_level, *(levels[position] for position in given)), project_rows),),
        (relation(d, (kind_level, *(levels[position] for position in moved)), input_rows),),
        kind_level,
        exact and kinds_exact,
    )


def _split(group: Group, movable: Sequence[str]) -> tuple[list[int], list[int]]:
    """Positions in a vector that facts alone settle, and the others."""
    given: list[int] = []
    moved: list[int] = []
    for position, name in enumerate(group.names):
        (moved if name in movable else given).append(position)
    for position, each in enumerate(group.sums):
        target = moved if symbols.generators(each) & set(movable) else given
        target.append(len(group.names) + position)
    return given, moved


def _as_values(vector: Vector, width: int) -> Vector:
    return (*vector[:width], *(PLAIN_SIGN[sign] for sign in vector[width:]))


def _values_at(part: Vector, positions: Sequence[int], width: int) -> Vector:
    return tuple(
        value if position < width else PLAIN_SIGN[value] for value, position in zip(part, positions, strict=True)
    )


def relation(d: Diagrams, levels: Sequence[int], rows: Iterable[Vector]) -> int:
    """1 at the given rows of values, else 0: a trie of the rows."""
    order = sorted(range(len(levels)), key=lambda position: levels[position])
    sorted_rows = sorted({tuple(row[position] for position in order) for row in rows})
    one, zero = d.end(1), d.end(0)

    def build(depth: int, low: int, high: int) -> int:
        if low >= high:
            return zero
        if depth == len(order):
            return one
        level = levels[order[depth]]
        kids = []
        at = low
        for value in range(d.size[level]):
            start = at
            while at < high and sorted_rows[at][depth] == value:
                at += 1
            kids.append(build(depth + 1, start, at))
        return d.node(level, tuple(kids))

    return build(0, 0, len(sorted_rows))


def _kinds(
    group: Group,
    listing: Listing,
    given: Sequence[int],
    moved: Sequence[int],
    movable: Sequence[str],
    deadline: float,
    loose: bool,
) -> tuple[list[tuple[Vector, tuple[Vector, ...]]], bool]:
    """Kinds of project: what facts settle, with the set of combinations the movable names can bring about."""
    together: dict[Vector, list[Vector]] = {}
    for vector in listing.shown + (listing.open if loose else ()):
        fixed = tuple(vector[position] for position in given)
        together.setdefault(fixed, []).append(tuple(vector[position] for position in moved))
    kinds: list[tuple[Vector, tuple[Vector, ...]]] = []
    exact = True
    for fixed, candidates in sorted(together.items()):
        if len(candidates) == 1:
            kinds.append((fixed, (candidates[0],)))
            continue
        sets = _sets(group, listing, given, moved, movable, fixed, candidates, deadline)
        if sets is None:
            exact = False
            if loose:
                kinds.append((fixed, tuple(candidates)))
            continue
        kinds += [(fixed, each) for each in sets]
    return kinds, exact


def _sets(
    group: Group,
    listing: Listing,
    given: Sequence[int],
    moved: Sequence[int],
    movable: Sequence[str],
    fixed: Vector,
    candidates: Sequence[Vector],
    deadline: float,
) -> list[tuple[Vector, ...]] | None:
    """The sets of combinations that some project of these cells leaves to the movable names; None
    when the solver cannot tell them all."""
    if len(candidates) > MOST_KINDS or any(s.beyond(each) for each in group.sums):
        return None
    width = len(group.names)
    made = s.Solver({}, deadline)
    domains = dict(zip(group.names, group.domains, strict=True))

    def constraint(position: int, value: int) -> list[object]:
        if position < width:
            return made.within(made.name(group.names[position]), listing.cells[position][value])
        return [made.sign(group.sums[position - width], value)]

    for name in group.names:
        if name not in movable:
            made.add(*made.within(made.name(name), domains[name]))
    for position, value in zip(given, fixed, strict=True):
        made.add(*constraint(position, value))
    formulas = []
    for candidate in candidates:
        parts = [part for name in movable for part in made.within(made.name(name), domains[name])]
        for position, value in zip(moved, candidate, strict=True):
            parts += constraint(position, value)
        formula = made.without(movable, parts)
        if formula is None:
            return None
        formulas.append(formula)
    found: list[tuple[Vector, ...]] = []

    def split(number: int, chosen: list[Vector]) -> bool:
        if number == len(formulas):
            found.append(tuple(chosen))
            return len(found) <= 4_000
        for holds in (True, False):
            formula = formulas[number] if holds else made.negated(formulas[number])
            made.push([formula])
            answer = made.check()
            going = True
            if answer == "cannot tell":
                going = False
            elif answer == "yes":
                going = split(number + 1, [*chosen, candidates[number]] if holds else chosen)
            made.pop()
            if not going:
                return False
        return True

    return [each for each in found if each] if split(0, []) else None


def told_sign(sign: int, group: Group, number: int) -> int:
    """A plain sign as the class that the group tells apart."""
    return merged(sign, group.signs[number])
