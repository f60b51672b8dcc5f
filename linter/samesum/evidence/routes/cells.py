"""Cells: the kinds of project that conditions can tell apart.

Every comparison is the sign of an exact sum. A numeric fact alone is cut at its thresholds, the
thresholds being cells of their own; facts that stand together in one comparison form a *group*,
whose possible combinations of cells and signs are listed by the solver.
"""

from __future__ import annotations

import random
import time
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from itertools import islice, product

from samesum.evidence.routes import ranges, symbols
from samesum.evidence.routes import solver as s
from samesum.evidence.routes.ranges import Bounds
from samesum.evidence.routes.symbols import Sum

MOST_BOXES = 40_000
Vector = tuple[int, ...]


def cut(domain: Bounds, thresholds: Mapping[Fraction, str]) -> tuple[Bounds, ...]:
    """The cells of a number in rising order. A threshold belongs to the cell ``above`` it or ``below`` it, or
    is a cell of its own (``apart``), as the comparisons with it tell apart."""
    cells: list[Bounds] = []
    low, low_open = domain.low, domain.low_open
    for threshold, border in sorted(thresholds.items()):
        if (domain.low is not None and threshold < domain.low) or (domain.high is not None and threshold > domain.high):
            continue
        room = low is None or low < threshold
        if border == "below":
            if room or not low_open:
                cells.append(Bounds(low, threshold, low_open, False))
            low, low_open = threshold, True
            continue
        if room:
            cells.append(Bounds(low, threshold, low_open, True))
        if border == "apart":
            if room or not low_open:
                cells.append(Bounds(threshold, threshold))
            low, low_open = threshold, True
        elif room:
            low, low_open = threshold, False
    if domain.high is None or low is None or low < domain.high or (low == domain.high and not low_open):
        cells.append(Bounds(low, domain.high, low_open, domain.high_open))
    return tuple(cells)


def sign_over(cell: Bounds, threshold: Fraction, border: str) -> int:
    """The sign of (value − threshold) all over a cell that ``cut`` made; a threshold that belongs to the cell
    above or below it counts as more or less."""
    if cell.low == cell.high == threshold:
        return {"above": s.POSITIVE, "below": s.NEGATIVE}.get(border, s.ZERO)
    return s.POSITIVE if cell.low is not None and cell.low >= threshold else s.NEGATIVE


@lru_cache(maxsize=4096)
def representative(cell: Bounds) -> Fraction:
    """A plain value inside a cell: its only point, or a short decimal near its middle."""
    low, high = cell.low, cell.high
    if low is not None and low == high:
        return low
    if low is None and high is None:
        return Fraction(0)
    if low is None:
        assert high is not None
        return Fraction(int(high) - 1) if high > -1 else high * 2 - 1
    if high is None:
        return Fraction(int(low) + 1) if low > -1 else Fraction(0)
    middle = (low + high) / 2
    for digits in range(-6, 13):
        step = Fraction(10) ** -digits
        rounded = symbols.nearest(middle / step) * step
        if low < rounded < high:
            return rounded
    return middle


@dataclass(frozen=True, slots=True)
class Group:
    """Facts and settings whose comparisons hang together.

    ``names`` in order, with their domains and cells; ``sums`` the sums of more than one name (or not linear) that
    are compared with numbers, with theirs.
    """

    names: tuple[str, ...]
    domains: tuple[Bounds, ...]
    name_cells: tuple[tuple[Bounds, ...], ...]
    sums: tuple[Sum, ...]
    sum_cells: tuple[tuple[Bounds, ...], ...]

    @property
    def cells(self) -> tuple[tuple[Bounds, ...], ...]:
        """The cells of each position of a vector."""
        return self.name_cells + self.sum_cells

    def renamed(self) -> Group:
        """The same group under neutral names, so that like groups are listed once."""
        names = {name: f"v{number}" for number, name in enumerate(self.names)}
        return Group(
            tuple(names.values()),
            self.domains,
            self.name_cells,
            tuple(symbols.rename(each, names) for each in self.sums),
            self.sum_cells,
        )


@dataclass(frozen=True, slots=True)
class Listing:
    """All combinations: a vector holds the cell of each name, then the cell of each sum.

    ``shown`` can occur (a point was found); ``open`` could be neither shown nor refuted;
    ``complete`` is False when the listing was cut short, so that combinations are missing;
    ``points`` are combinations with a point at which each was seen, where the solver could not show them.
    """

    shown: tuple[Vector, ...]
    open: tuple[Vector, ...]
    complete: bool
    points: tuple[tuple[Vector, tuple[Fraction, ...]], ...] = ()


def list_group(group: Group, deadline: float) -> Listing:
    """All combinations of cells that can occur in a group.

    Exact where the solver decides every question before ``deadline`` and the cells are few enough;
    says so otherwise. Cost: one solver question for each box that two sums' borders cross.
    """
    count = 1
    for cells in group.name_cells:
        count *= len(cells)
    if count > MOST_BOXES:
        seen = _seen(group, deadline)
        return Listing(tuple(seen), (), False, tuple(seen.items()))
    return _Lister(group, deadline).listing()


class _Lister:
    """One walk over all boxes of a group."""

    def __init__(self, group: Group, deadline: float) -> None:
        self.group = group
        self.deadline = deadline
        domains = dict(zip(group.names, group.domains, strict=True))
        self.solver = s.Solver(domains, deadline, whole=domains)
        self.constraints = [
            [self.solver.within(self.solver.term(each), cell) for cell in cells]
            for each, cells in zip(group.sums, group.sum_cells, strict=True)
        ]
        self.straight = [_straight(each) if symbols.is_linear(each) else None for each in group.sums]
        self.guessed = [s.beyond(each) for each in group.sums]
        self.shown: list[Vector] = []
        self.unsure: list[Vector] = []
        self.box: dict[str, Bounds] = {}
        self.chosen: list[int] = []
        self.visited = 0

    def listing(self) -> Listing:
        complete = self._boxes(0)
        if not self.unsure:
            return Listing(tuple(self.shown), (), complete)
        seen = _seen(self.group, self.deadline)
        self.shown += [vector for vector in self.unsure if vector in seen]
        left = tuple(vector for vector in self.unsure if vector not in seen)
        return Listing(tuple(self.shown), left, complete, tuple(seen.items()))

    def _boxes(self, depth: int) -> bool:
        """Every box below the cells chosen so far; False when time or room ran out."""
        if depth == len(self.group.names):
            self.visited += 1
            if self.visited % 64 == 0 and time.monotonic() > self.deadline:
                return False
            return self._in_box()
        for number, cell in enumerate(self.group.name_cells[depth]):
            self.box[self.group.names[depth]] = cell
            self.chosen.append(number)
            going = self._boxes(depth + 1)
            self.chosen.pop()
            if not going:
                return False
        return True

    def _in_box(self) -> bool:
        decided = [
            _met(straight(self.box) if straight else ranges.bounds(each, self.box), cells)
            for each, cells, straight in zip(self.group.sums, self.group.sum_cells, self.straight, strict=True)
        ]
        unsettled = [number for number, each in enumerate(decided) if len(each) > 1]
        if not unsettled or (len(unsettled) == 1 and self.straight[unsettled[0]]):
            # the bounds of one linear sum over a box are sharp: it meets every cell between them
            place = unsettled[0] if unsettled else 0
            for cell in decided[place]:
                self.shown.append((*self.chosen, *(cell if k == place else each[0] for k, each in enumerate(decided))))
            return self._has_room()
        self.solver.push(
            [part for name, cell in self.box.items() for part in self.solver.within(self.solver.name(name), cell)]
        )
        sure: s.Answer = "cannot tell" if any(self.guessed[number] for number in unsettled) else "yes"
        going = self._split(decided, [], sure)
        self.solver.pop()
        return going

    def _split(self, decided: list[tuple[int, ...]], taken: list[int], so_far: s.Answer) -> bool:
        """The sums' cells one after the other, as far as the solver finds them possible together."""
        number = len(taken)
        if number == len(decided):
            (self.shown if so_far == "yes" else self.unsure).append((*self.chosen, *taken))
            return self._has_room()
        if len(decided[number]) == 1:
            return self._split(decided, [*taken, decided[number][0]], so_far)
        for cell in decided[number]:
            self.solver.push(self.constraints[number][cell])
            answer = self.solver.check()
            going = True
            if answer != "no":
                going = self._split(decided, [*taken, cell], so_far if answer == "yes" else answer)
            self.solver.pop()
            if not going or time.monotonic() > self.deadline:
                return False
        return True

    def _has_room(self) -> bool:
        return len(self.shown) + len(self.unsure) < MOST_BOXES


def _straight(a: Sum) -> Callable[[Mapping[str, Bounds]], Bounds]:
    """The sharp bounds of a linear sum over a box, as a function of the box."""
    start = symbols.constant_term(a)
    parts = []
    for monomial, value in a.terms:
        for generator, _power in monomial:
            assert isinstance(generator, str)
            parts.append((generator, value))

    def over(box: Mapping[str, Bounds]) -> Bounds:
        low: Fraction | None = start
        high: Fraction | None = start
        low_open = high_open = False
        for name, factor in parts:
            cell = box[name]
            first, last, first_open, last_open = cell.low, cell.high, cell.low_open, cell.high_open
            if factor < 0:
                first, last, first_open, last_open = last, first, last_open, first_open
            low = None if low is None or first is None else low + factor * first
            high = None if high is None or last is None else high + factor * last
            low_open = low_open or first_open
            high_open = high_open or last_open
        return Bounds(low, high, low_open, high_open)

    return over


def _met(found: Bounds, cells: Sequence[Bounds]) -> tuple[int, ...]:
    """The cells that an interval meets."""
    return tuple(number for number, cell in enumerate(cells) if not _before(cell, found) and not _before(found, cell))


def _before(a: Bounds, b: Bounds) -> bool:
    """Whether all of ``a`` is less than all of ``b``."""
    if a.high is None or b.low is None:
        return False
    return a.high < b.low or (a.high == b.low and (a.high_open or b.low_open))


def _seen(group: Group, deadline: float, draws: int = 1_000) -> dict[Vector, tuple[Fraction, ...]]:
    """Combinations and a point at which each was seen, from seeded random points: true as far as they go."""
    random_numbers = random.Random(20_06)
    shown: dict[Vector, tuple[Fraction, ...]] = {}
    until = time.monotonic() + max(0.0, (deadline - time.monotonic()) / 3)
    for _ in range(draws):
        if time.monotonic() > until:
            break
        chosen = [random_numbers.randrange(len(cells)) for cells in group.name_cells]
        point = {
            name: _inside(cells[number], random_numbers)
            for name, cells, number in zip(group.names, group.name_cells, chosen, strict=True)
        }
        for found in _all_cells_at(group, point):
            shown.setdefault((*chosen, *found), tuple(point.values()))
    return shown


def _inside(cell: Bounds, random_numbers: random.Random) -> Fraction:
    if cell.low is None or cell.high is None or cell.low == cell.high:
        return representative(cell)
    return cell.low + (cell.high - cell.low) * Fraction(random_numbers.randrange(1, 1000), 1000)


def _all_cells_at(group: Group, point: Mapping[str, Fraction]) -> Iterator[Vector]:
    """The cells of the sums at a point, a sum without a value there in each of its cells; none if one cannot be
    told."""
    options: list[tuple[int, ...]] = []
    for each, cells in zip(group.sums, group.sum_cells, strict=True):
        cell = cell_at(each, cells, point)
        if cell is not None:
            options.append((cell,))
        else:
            options.append(tuple(range(len(cells))) if ranges.has_no_value(each, point) else ())
    return islice(product(*options), MOST_BOXES)


def cells_at(group: Group, point: Mapping[str, Fraction]) -> Vector | None:
    """The cell of each sum at a point; None if one cannot be told."""
    found: list[int] = []
    for each, cells in zip(group.sums, group.sum_cells, strict=True):
        cell = cell_at(each, cells, point)
        if cell is None:
            return None
        found.append(cell)
    return tuple(found)


def cell_at(a: Sum, cells: Sequence[Bounds], point: Mapping[str, Fraction]) -> int | None:
    """The cell of one sum at a point; None if it cannot be told, or the sum has no value there."""
    met = _met(ranges.bounds(a, {name: Bounds(value, value) for name, value in point.items()}), cells)
    return met[0] if len(met) == 1 else None
