"""Cells: the kinds of project that conditions can tell apart.

Every comparison is the sign of an exact sum. A numeric fact alone is cut at its thresholds, the
thresholds being cells of their own; facts that stand together in one comparison form a *group*,
whose possible combinations of cells and signs are listed by the solver.
"""

from __future__ import annotations

import random
import time
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache

from samesum.evidence import solver as s
from samesum.evidence import symbols
from samesum.evidence.symbols import Bounds, Sum

MOST_BOXES = 40_000
Vector = tuple[int, ...]


def cut(domain: Bounds, thresholds: Sequence[Fraction]) -> tuple[Bounds, ...]:
    """The cells of one numeric fact in rising order: points at the thresholds, open in between."""
    cells: list[Bounds] = []
    low, low_open = domain.low, domain.low_open
    for threshold in sorted(set(thresholds)):
        if (domain.low is not None and threshold < domain.low) or (domain.high is not None and threshold > domain.high):
            continue
        if low is None or low < threshold:
            cells.append(Bounds(low, threshold, low_open, True))
        cells.append(Bounds(threshold, threshold))
        low, low_open = threshold, True
    if domain.high is None or low is None or low < domain.high or (low == domain.high and not low_open):
        cells.append(Bounds(low, domain.high, low_open, domain.high_open))
    return tuple(cells)


def sign_over(cell: Bounds, threshold: Fraction) -> int:
    """The sign of (value − threshold) all over a cell that ``threshold`` does not cut."""
    if cell.low is not None and (cell.low > threshold or (cell.low == threshold and cell.low_open)):
        return s.POSITIVE
    if cell.low == cell.high == threshold:
        return s.ZERO
    return s.NEGATIVE


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

    ``names`` in order; ``domains`` and ``thresholds`` beside them; ``sums`` the sums of more than one
    name (or not linear) with, for each, the signs that need telling apart (a tuple out of
    NEGATIVE, ZERO, POSITIVE, MERGED_NEGATIVE, MERGED_POSITIVE).
    """

    names: tuple[str, ...]
    domains: tuple[Bounds, ...]
    thresholds: tuple[tuple[Fraction, ...], ...]
    sums: tuple[Sum, ...]
    signs: tuple[tuple[int, ...], ...]

    def renamed(self) -> Group:
        """The same group under neutral names, so that like groups are listed once."""
        names = {name: f"v{number}" for number, name in enumerate(self.names)}
        return Group(
            tuple(names.values()),
            self.domains,
            self.thresholds,
            tuple(symbols.rename(each, names) for each in self.sums),
            self.signs,
        )


@dataclass(frozen=True, slots=True)
class Listing:
    """All combinations: a vector holds the cell of each name, then the sign of each sum.

    ``shown`` can occur (a point was found); ``open`` could be neither shown nor refuted;
    ``complete`` is False when the listing was cut short, so that combinations are missing;
    ``points`` are combinations with a point at which each was seen, where the solver could not show them.
    """

    cells: tuple[tuple[Bounds, ...], ...]
    shown: tuple[Vector, ...]
    open: tuple[Vector, ...]
    complete: bool
    points: tuple[tuple[Vector, tuple[Fraction, ...]], ...] = ()


def list_group(group: Group, deadline: float) -> Listing:
    """All combinations of cells and signs that can occur in a group.

    Exact where the solver decides every question before ``deadline`` and the cells are few enough;
    says so otherwise. Cost: one solver question for each box that a sum's border crosses.
    """
    cells = tuple(cut(domain, cuts) for domain, cuts in zip(group.domains, group.thresholds, strict=True))
    count = 1
    for each in cells:
        count *= len(each)
    if count > MOST_BOXES:
        return _sampled(group, cells, deadline)
    made = s.Solver(dict(zip(group.names, group.domains, strict=True)), deadline)
    constraints = [
        {sign: made.sign(each, sign) for sign in signs} for each, signs in zip(group.sums, group.signs, strict=True)
    ]
    guessed = [s.beyond(each) for each in group.sums]
    straight = [_straight(each) if symbols.is_linear(each) else None for each in group.sums]
    shown: list[Vector] = []
    unsure: list[Vector] = []
    box: dict[str, Bounds] = {}
    chosen: list[int] = []
    budget = [0]

    def boxes(depth: int) -> bool:
        if depth == len(group.names):
            budget[0] += 1
            if budget[0] % 64 == 0 and time.monotonic() > deadline:
                return False
            return in_box()
        for number, cell in enumerate(cells[depth]):
            box[group.names[depth]] = cell
            chosen.append(number)
            going = boxes(depth + 1)
            chosen.pop()
            if not going:
                return False
        return True

    def in_box() -> bool:
        decided: list[tuple[int, ...]] = [
            _possible(linear(box) if linear else symbols.bounds(each, box), signs)
            for each, signs, linear in zip(group.sums, group.signs, straight, strict=True)
        ]
        unsettled = [number for number, each in enumerate(decided) if len(each) > 1]
        if not unsettled:
            shown.append((*chosen, *(each[0] for each in decided)))
            return True
        if len(unsettled) == 1 and straight[unsettled[0]]:
            # the bounds of one linear sum over a box are sharp: it takes every sign between them
            number = unsettled[0]
            for sign in decided[number]:
                shown.append((*chosen, *(sign if k == number else each[0] for k, each in enumerate(decided))))
            return len(shown) + len(unsure) < MOST_BOXES
        made.push([part for name, cell in box.items() for part in made.within(made.name(name), cell)])
        sure: s.Answer = "cannot tell" if any(guessed[number] for number in unsettled) else "yes"
        going = split(0, decided, [], sure)
        made.pop()
        return going

    def split(number: int, decided: list[tuple[int, ...]], signs: list[int], so_far: s.Answer) -> bool:
        if number == len(decided):
            (shown if so_far == "yes" else unsure).append((*chosen, *signs))
            return len(shown) + len(unsure) < MOST_BOXES
        if len(decided[number]) == 1:
            return split(number + 1, decided, [*signs, decided[number][0]], so_far)
        for sign in decided[number]:
            constraint = constraints[number][sign]
            made.push([constraint])
            answer = made.check()
            going = True
            if answer != "no":
                going = split(number + 1, decided, [*signs, sign], so_far if answer == "yes" else answer)
            made.pop()
            if not going or time.monotonic() > deadline:
                return False
        return True

    complete = boxes(0)
    if not unsure:
        return Listing(cells, tuple(shown), (), complete)
    seen = _seen(group, cells, deadline)
    shown += [vector for vector in unsure if vector in seen]
    left = tuple(vector for vector in unsure if vector not in seen)
    return Listing(cells, tuple(shown), left, complete, tuple(seen.items()))


def _straight(a: Sum) -> Callable[[Mapping[str, Bounds]], Bounds]:
    """The sharp bounds of a linear sum over a box, as a function of the box."""
    start = sum((value for monomial, value in a.terms if not monomial), Fraction(0))
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


def _possible(found: Bounds, signs: tuple[int, ...]) -> tuple[int, ...]:
    """The signs that bounds leave possible."""
    positive = found.high is None or found.high > 0
    negative = found.low is None or found.low < 0
    zero = (found.low is None or found.low < 0 or (found.low == 0 and not found.low_open)) and (
        found.high is None or found.high > 0 or (found.high == 0 and not found.high_open)
    )
    allowed = {
        s.NEGATIVE: negative,
        s.ZERO: zero,
        s.POSITIVE: positive,
        s.MERGED_NEGATIVE: negative or zero,
        s.MERGED_POSITIVE: positive or zero,
    }
    return tuple(sign for sign in signs if allowed[sign])


def _sampled(group: Group, cells: tuple[tuple[Bounds, ...], ...], deadline: float) -> Listing:
    """Combinations seen at seeded random points: true as far as they go, never complete."""
    seen = _seen(group, cells, deadline)
    return Listing(cells, tuple(seen), (), False, tuple(seen.items()))


def _seen(
    group: Group, cells: tuple[tuple[Bounds, ...], ...], deadline: float, draws: int = 1_000
) -> dict[Vector, tuple[Fraction, ...]]:
    """Combinations and a point at which each was seen, from seeded random points."""
    random_numbers = random.Random(20_06)
    shown: dict[Vector, tuple[Fraction, ...]] = {}
    until = time.monotonic() + max(0.0, (deadline - time.monotonic()) / 3)
    for _ in range(draws):
        if time.monotonic() > until:
            break
        chosen = [random_numbers.randrange(len(each)) for each in cells]
        point = {
            name: _inside(each[number], random_numbers)
            for name, each, number in zip(group.names, cells, chosen, strict=True)
        }
        signs = signs_at(group, point)
        if signs is not None:
            shown.setdefault((*chosen, *signs), tuple(point.values()))
    return shown


def _inside(cell: Bounds, random_numbers: random.Random) -> Fraction:
    if cell.low is None or cell.high is None or cell.low == cell.high:
        return representative(cell)
    return cell.low + (cell.high - cell.low) * Fraction(random_numbers.randrange(1, 1000), 1000)


def signs_at(group: Group, point: Mapping[str, Fraction]) -> Vector | None:
    """The sign of each sum at a point, in the classes the group tells apart; None if one cannot be told."""
    found: list[int] = []
    for each, signs in zip(group.sums, group.signs, strict=True):
        sign = s.sign_at(each, point)
        if sign is None:
            return None
        found.append(merged(sign, signs))
    return tuple(found)


def merged(sign: int, signs: tuple[int, ...]) -> int:
    """A plain sign as one of the classes told apart."""
    if sign in signs:
        return sign
    if sign == s.ZERO:
        return s.MERGED_NEGATIVE if s.MERGED_NEGATIVE in signs else s.MERGED_POSITIVE
    return s.MERGED_NEGATIVE if sign == s.NEGATIVE else s.MERGED_POSITIVE
