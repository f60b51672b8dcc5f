"""Declares facts, settings, judgements, constants, tables and indices from decisions that somebody else takes.

What is simplest is drawn as 0, first or no.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Protocol, TypeVar

from brute.rulebooks import (
    Band,
    Constant,
    Fact,
    Index,
    Judgement,
    Num,
    OneOf,
    Quantity,
    Range,
    Row,
    Setting,
    Table,
    YesNo,
)

T = TypeVar("T")

MOST_BRANCH_POINTS = 7


class Chance(Protocol):
    """Where a maker gets its decisions from."""

    def between(self, low: int, high: int) -> int: ...


def whole(value: int) -> Num:
    return Num(Fraction(value))


@dataclass
class Declarer:
    """Declares what a rulebook stands on, and keeps what has been made so far."""

    chance: Chance
    index: str = ""
    facts: list[Fact] = field(default_factory=list)
    settings: list[Setting] = field(default_factory=list)
    judgements: list[Judgement] = field(default_factory=list)
    constants: list[Constant] = field(default_factory=list)
    tables: list[Table] = field(default_factory=list)
    indices: list[Index] = field(default_factory=list)
    quantities: list[Quantity] = field(default_factory=list)
    unused: list[str] = field(default_factory=list)
    budget: int = MOST_BRANCH_POINTS

    # --- chance --------------------------------------------------------------------------

    def maybe(self, percent: int) -> bool:
        return self.chance.between(0, 99) >= 100 - percent

    def pick(self, things: Sequence[T]) -> T:
        return things[self.chance.between(0, len(things) - 1)]

    def between(self, low: int, high: int) -> int:
        return self.chance.between(low, high)

    def who(self) -> str:
        return self.pick(("developer", "developer", "developer", "verifier", "programme"))

    # --- declarations ----------------------------------------------------------------------

    def declare(self) -> None:
        if self.maybe(35):
            self.index = "stratum"
            self.indices.append(Index("stratum", 3 if self.maybe(25) else 2))
            if self.maybe(20):
                self.indices.append(Index("year", 2))
        for name in ("area", "depth", "slope")[: self.between(1, 3)]:
            self.facts.append(Fact(name, self.range(), self.over(50)))
        if self.maybe(45):
            values = ("clay", "peat", "sand")[: 3 if self.maybe(40) else 2]
            self.facts.append(Fact("soil", OneOf(values), self.over(30)))
        if self.maybe(35):
            self.facts.append(Fact("drained", YesNo(), self.over(30)))
        if self.maybe(35):
            self.settings.append(Setting("discount", self.range(bounded=True), self.who()))
        if self.maybe(25):
            self.settings.append(Setting("basis", OneOf(("gross", "net")), self.who()))
        if self.maybe(10):
            self.settings.append(Setting("strict", YesNo(), self.who()))
        if self.maybe(35):
            self.judgements.append(Judgement("access", self.who()))
        if self.maybe(10):
            self.judgements.append(Judgement("likely", self.who()))
        if self.maybe(30):
            self.constants.append(Constant("factor", Fraction(self.between(1, 8), 4)))
        named = [d for d in (*self.facts, *self.settings) if isinstance(d.domain, OneOf)]
        if named and self.maybe(60):
            self.tables.append(self.named_table(named))
        if self.maybe(30):
            self.tables.append(self.band_table())

    def over(self, percent: int) -> str:
        """An index to stand per, now and then; "" for none."""
        return self.pick(self.indices).name if self.indices and self.maybe(percent) else ""

    def range(self, bounded: bool = False) -> Range:
        if not bounded and self.maybe(8):
            return Range(None, None)
        low = Fraction(-self.between(0, 2) if self.maybe(12) else self.between(0, 1))
        high = low + self.between(1, 4)
        return Range(low, high - Fraction(1, 2) if self.maybe(10) else high)

    def named_table(self, named: list[Fact | Setting]) -> Table:
        keys = [self.pick(named)]
        if len(named) > 1 and self.maybe(30):
            keys = named[:2]
        combinations: list[tuple[str, ...]] = [()]
        for key in keys:
            assert isinstance(key.domain, OneOf)
            combinations = [(*c, v) for c in combinations for v in key.domain.values]
        rows = [Row(c, Fraction(self.between(0, 4))) for c in combinations]
        if self.maybe(30):
            rows.pop(self.between(0, len(rows) - 1))
        return Table("stock", tuple(k.name for k in keys), tuple(rows))

    def band_table(self) -> Table:
        edges = sorted({Fraction(self.between(0, 6), 2) for _ in range(self.between(1, 3))})
        ends: list[Fraction | None] = [None, *edges, None]
        bands = [Band(ends[k], ends[k + 1]) for k in range(len(ends) - 1)]
        if self.maybe(30) and len(bands) > 1:
            bands.pop(self.between(0, len(bands) - 1))
        rows = tuple(Row((b,), Fraction(self.between(0, 4))) for b in bands)
        return Table("curve", ("reach",), rows)
