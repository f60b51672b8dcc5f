"""Groups of facts and settings in the network: which combinations of cells and signs can occur.

A group of facts alone is one relation. Where a setting stands in one comparison with a fact, what
a project *is* includes which combinations the setting can still bring about; those kinds of
project are listed by eliminating the setting (quantifier elimination in the solver).
"""

from __future__ import annotations

import time
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

from samesum.evidence.routes import solver as s
from samesum.evidence.routes import symbols
from samesum.evidence.routes.cells import Group, Listing, Vector, list_group
from samesum.evidence.routes.diagrams import Diagrams
from samesum.evidence.routes.ranges import Bounds
from samesum.evidence.routes.readings import Readings
from samesum.evidence.routes.symbols import Sum

MOST_KINDS = 48


@dataclass(frozen=True, slots=True)
class ListedGroup:
    """A group with the levels of its names' cells and of its sums'."""

    group: Group
    name_levels: tuple[int, ...]
    sum_levels: tuple[int, ...]
    listing: Listing

    @property
    def names(self) -> tuple[str, ...]:
        return self.group.names

    @property
    def levels(self) -> tuple[int, ...]:
        return (*self.name_levels, *self.sum_levels)


def collect(
    readings: Readings, sums: Sequence[tuple[Sum, int]], cells: Mapping[int, tuple[Bounds, ...]]
) -> tuple[ListedGroup, ...]:
    """The groups of ``sums`` (with their levels; those that are not just one fact), each listed. Like groups are
    listed once."""
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
    for each, level in sums:
        names = sorted(symbols.generators(each))
        for name in names:
            members.setdefault(find(name), set()).add(name)
        held.setdefault(find(names[0]), []).append((each, level))
    listed: dict[Group, Listing] = {}
    found: list[ListedGroup] = []
    deadline = readings.diagrams.limits.deadline
    for number, key in enumerate(sorted(held)):
        names = sorted(members[key], key=readings.level)
        name_levels = tuple(readings.level(name) for name in names)
        sum_levels = tuple(level for _, level in held[key])
        group = Group(
            tuple(names),
            tuple(readings.domains[name] for name in names),
            tuple(cells[level] for level in name_levels),
            tuple(each for each, _ in held[key]),
            tuple(cells[level] for level in sum_levels),
        )
        plain = group.renamed()
        if plain not in listed:
            share = (deadline - time.monotonic()) * 0.7 / (len(held) - number)
            listed[plain] = list_group(plain, time.monotonic() + max(share, 0.0))
        found.append(ListedGroup(group, name_levels, sum_levels, listed[plain]))
    return tuple(found)


@dataclass(frozen=True, slots=True)
class Validity:
    """What can occur in one group, as factors. ``projects`` speak of facts (and of the kind of project),
    ``inputs`` of settings given the kind. ``kind_level`` is None when no kind is needed; ``kind_points`` has a
    point of each kind, as far as more than the cells settles it."""

    projects: tuple[int, ...]
    inputs: tuple[int, ...]
    kind_level: int | None
    exact: bool
    kind_points: tuple[Mapping[str, Fraction] | None, ...] = ()


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
        factor = relation(d, listed.levels, vectors)
        return Validity(() if movable else (factor,), (factor,) if movable else (), None, exact)
    given, moved = _split(group, movable)
    kinds, kinds_exact = _kinds(group, listing, given, moved, movable, d.limits.deadline, loose)
    d.size[kind_level] = max(1, len(kinds))
    project_rows: list[Vector] = []
    input_rows: list[Vector] = []
    for number, (fixed, brought, _) in enumerate(kinds):
        project_rows.append((number, *fixed))
        input_rows += [(number, *each) for each in brought]
    levels = listed.levels
    return Validity(
        (relation(d, (kind_level, *(levels[position] for position in given)), project_rows),),
        (relation(d, (kind_level, *(levels[position] for position in moved)), input_rows),),
        kind_level,
        exact and kinds_exact,
        tuple(point for _, _, point in kinds),
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


_Kind = tuple[Vector, tuple[Vector, ...], Mapping[str, Fraction] | None]


def _kinds(
    group: Group,
    listing: Listing,
    given: Sequence[int],
    moved: Sequence[int],
    movable: Sequence[str],
    deadline: float,
    loose: bool,
) -> tuple[list[_Kind], bool]:
    """Kinds of project: what facts settle, with the set of combinations the movable names can bring about."""
    together: dict[Vector, list[Vector]] = {}
    for vector in listing.shown + (listing.open if loose else ()):
        fixed = tuple(vector[position] for position in given)
        together.setdefault(fixed, []).append(tuple(vector[position] for position in moved))
    kinds: list[_Kind] = []
    exact = True
    for fixed, candidates in sorted(together.items()):
        if len(candidates) == 1:
            kinds.append((fixed, (candidates[0],), None))
            continue
        sets = _sets(group, listing, given, moved, movable, fixed, candidates, deadline)
        if sets is None:
            exact = False
            if loose:
                kinds.append((fixed, tuple(candidates), None))
            continue
        kinds += [(fixed, each, point) for each, point in sets]
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
) -> list[tuple[tuple[Vector, ...], Mapping[str, Fraction]]] | None:
    """The sets of combinations that some project of these cells leaves to the movable names; None
    when the solver cannot tell them all."""
    if len(candidates) > MOST_KINDS or any(s.beyond(each) for each in group.sums):
        return None
    domains = dict(zip(group.names, group.domains, strict=True))
    made = s.Solver({}, deadline, whole=domains)
    terms = [*(made.name(name) for name in group.names), *(made.term(each) for each in group.sums)]

    def constraint(position: int, cell: int) -> list[object]:
        return made.within(terms[position], group.cells[position][cell])

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
    found: list[tuple[tuple[Vector, ...], Mapping[str, Fraction]]] = []

    def split(number: int, chosen: list[Vector]) -> bool:
        if number == len(formulas):
            found.append((tuple(chosen), {name: value for name, value in made.point().items() if name not in movable}))
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

    return [each for each in found if each[0]] if split(0, []) else None
