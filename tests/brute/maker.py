"""Builds one small rulebook from decisions that somebody else takes.

What is simplest is drawn as 0, first or no.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Protocol, TypeVar

from brute.rulebooks import (
    And,
    Band,
    Body,
    Call,
    Cases,
    Chain,
    Choice,
    Compare,
    Condition,
    Constant,
    Expression,
    Fact,
    Follows,
    Formula,
    Holds,
    Index,
    Is,
    Judgement,
    Lookup,
    Neg,
    Not,
    Num,
    OneOf,
    Op,
    Option,
    Or,
    Over,
    Position,
    Quantity,
    Range,
    Ref,
    Row,
    Rulebook,
    Setting,
    Table,
    Takes,
    When,
    YesNo,
)

T = TypeVar("T")

MOST_BRANCH_POINTS = 7
OPTIONS = ("default", "plots", "model")
SWAPPED = {"<": ">=", "<=": ">", ">": "<=", ">=": "<", "=": "<>", "<>": "="}


class Chance(Protocol):
    """Where a maker gets its decisions from."""

    def between(self, low: int, high: int) -> int: ...


def whole(value: int) -> Num:
    return Num(Fraction(value))


@dataclass
class Maker:
    """Builds one rulebook from the inside out: a quantity mentions only quantities made before it.

    ``here`` is the index in which something is being written, "" for none."""

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
        for name in ("area", "depth", "slope")[: self.between(1, 3)]:
            self.facts.append(Fact(name, self.range(), self.index if self.index and self.maybe(50) else ""))
        if self.maybe(45):
            values = ("clay", "peat", "sand")[: 3 if self.maybe(40) else 2]
            self.facts.append(Fact("soil", OneOf(values), self.index if self.index and self.maybe(30) else ""))
        if self.maybe(35):
            self.facts.append(Fact("drained", YesNo(), self.index if self.index and self.maybe(30) else ""))
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

    # --- what can be mentioned ---------------------------------------------------------------

    def numeric(self, here: str) -> list[str]:
        return [f.name for f in self.facts if isinstance(f.domain, Range) and f.index in ("", here)]

    def known(self, here: str) -> list[Quantity]:
        return [q for q in self.quantities if q.index in ("", here)]

    def choices(self, here: str) -> list[Quantity]:
        return [q for q in self.known(here) if isinstance(q.body, Choice | Follows)]

    def spread(self) -> list[str]:
        """Names per index that a reduction can run over."""
        facts = [f.name for f in self.facts if isinstance(f.domain, Range) and f.index]
        return [n for n in (*facts, *(q.name for q in self.quantities if q.index)) if self.index]

    def use(self, name: str) -> Ref:
        if name in self.unused:
            self.unused.remove(name)
        return Ref(name)

    # --- expressions -------------------------------------------------------------------------

    def number(self) -> Num:
        if self.maybe(20):
            return Num(Fraction(self.between(-1, 8), self.pick((2, 4))))
        return whole(self.between(0, 4))

    def term(self, here: str) -> Expression:
        ways: list[Callable[[], Expression]] = [self.number]
        if self.numeric(here):
            ways += [lambda: Ref(self.pick(self.numeric(here)))] * 2
        if self.known(here):
            ways += [lambda: self.use(self.pick(self.known(here)).name)] * 3
        if self.spread() and not here:
            ways += [lambda: self.reduction()] * 3
        if self.spread() and here:
            ways += [lambda: self.reduction()]
        if self.usable_tables(here):
            ways += [lambda: self.lookup(here)]
        if self.constants:
            ways += [lambda: Ref(self.constants[0].name)]
        if here:
            ways += [lambda: Position(here)]
        return self.pick(ways)()

    def reduction(self) -> Expression:
        name = self.pick(("sum", "sum", "sum", "mean", "min", "max"))
        inner: Expression = self.use(self.pick(self.spread()))
        if self.maybe(25):
            inner = Op(self.pick(("+", "-", "*")), inner, self.pick((Position(self.index), self.number())))
        return Over(name, inner, self.index)

    def usable_tables(self, here: str) -> list[Table]:
        reach = {f.name for f in self.facts if f.index in ("", here)} | {s.name for s in self.settings}
        return [t for t in self.tables if t.name == "curve" or set(t.keys) <= reach]

    def lookup(self, here: str) -> Expression:
        table = self.pick(self.usable_tables(here))
        if table.name != "curve":
            return Lookup(table.name, tuple(Ref(k) for k in table.keys))
        places = [Ref(n) for n in self.numeric(here)] or [whole(1)]
        if self.known(here) and self.maybe(25):
            return Lookup("curve", (self.use(self.pick(self.known(here)).name),))
        return Lookup("curve", (self.pick(places),))

    def formula(self, here: str) -> Expression:
        e = self.term(here)
        if self.maybe(50):
            e = Op(self.pick(("+", "-")), e, self.term(here))
        if self.maybe(15):
            e = Op(self.pick(("*", "/")), e, self.pick((whole(2), Num(Fraction(1, 2)), whole(-1))))
        free = [s.name for s in self.settings if isinstance(s.domain, Range)]
        if free and self.maybe(20):
            e = Op("*", e, self.pick((Ref(free[0]), Op("-", whole(1), Ref(free[0])))))
        if self.maybe(8):
            e = Call(self.pick(("min", "max")), (e, self.term(here)))
        if self.maybe(6):
            e = Neg(e) if self.maybe(50) else Call("abs", (e,))
        return e

    # --- conditions --------------------------------------------------------------------------

    def condition(self, here: str, depth: int = 0) -> Condition:
        if depth < 2 and self.maybe(22):
            parts = tuple(self.condition(here, depth + 1) for _ in range(2))
            return And(parts) if self.maybe(50) else Or(parts)
        if depth < 2 and self.maybe(8):
            return Not(self.condition(here, depth + 1))
        return self.atom(here)

    def atom(self, here: str) -> Condition:
        ways: list[Callable[[], Condition]] = [lambda: Compare(self.operator(), self.side(here), self.threshold())] * 3
        ways += [lambda: self.chain(here), lambda: self.two_sided(here)]
        flags = [f.name for f in self.facts if isinstance(f.domain, YesNo) and f.index in ("", here)]
        flags += [s.name for s in self.settings if isinstance(s.domain, YesNo)] + [j.name for j in self.judgements] * 2
        named: list[Fact | Setting] = [
            f for f in self.facts if isinstance(f.domain, OneOf) and f.index in ("", here)
        ] + [s for s in self.settings if isinstance(s.domain, OneOf)]
        if flags:
            ways += [lambda: Holds(self.pick(flags))] * 3
        if named:
            ways += [lambda: self.named(self.pick(named))] * 2
        if self.choices(here):
            ways += [lambda: self.takes(here)] * 3
        if self.known(here):
            ways += [lambda: self.calculated(here)] * 3
        return self.pick(ways)()

    def operator(self) -> str:
        return self.pick(("<", ">=", "<=", ">", "<", ">=", "=", "<>"))

    def threshold(self) -> Num:
        return Num(Fraction(self.between(-1, 9), 2)) if self.maybe(15) else whole(self.between(0, 4))

    def side(self, here: str) -> Expression:
        numbers = [Ref(s.name) for s in self.settings if isinstance(s.domain, Range)]
        sides: list[Expression] = [*(Ref(n) for n in self.numeric(here)), *numbers]
        if not sides or (self.index and not here and self.maybe(15) and self.spread()):
            return self.reduction() if self.spread() else self.number()
        if self.usable_tables(here) and self.maybe(8):
            return self.lookup(here)
        return self.pick(sides)

    def chain(self, here: str) -> Condition:
        low = self.between(0, 3)
        high = low + self.between(0 if self.maybe(10) else 1, 2)
        return Chain(whole(low), self.pick(("<=", "<")), self.side(here), self.pick(("<", "<=")), whole(high))

    def two_sided(self, here: str) -> Condition:
        left, right = self.side(here), self.side(here)
        if self.maybe(50):
            return Compare(self.operator(), Op(self.pick(("+", "-")), left, right), self.threshold())
        return Compare(self.operator(), left, right)

    def calculated(self, here: str) -> Condition:
        left = self.use(self.pick(self.known(here)).name)
        right: Expression = self.threshold()
        if self.maybe(30):
            right = self.side(here)
        elif self.maybe(30):
            right = self.use(self.pick(self.known(here)).name)
        return Compare(self.operator(), left, right)

    def named(self, thing: Fact | Setting) -> Condition:
        assert isinstance(thing.domain, OneOf)
        values = thing.domain.values
        if len(values) == 3 and self.maybe(40):
            return Is(thing.name, values[:2] if self.maybe(50) else values[1:])
        return Is(thing.name, (self.pick(values),))

    def takes(self, here: str) -> Condition:
        quantity = self.pick(self.choices(here))
        assert isinstance(quantity.body, Choice | Follows)
        return Takes(self.use(quantity.name).name, self.pick(quantity.body.options).name)

    # --- bodies ------------------------------------------------------------------------------

    def body(self, here: str, depth: int = 0) -> Body:
        cost = next(i.most for i in self.indices) if here else 1
        if self.budget < cost or not self.maybe((80, 30, 20, 0)[depth]):
            return Formula(self.formula(here))
        self.budget -= cost
        kind = self.between(0, 9)
        if kind < 4:
            return self.choice(here, depth)
        if kind < 6 and self.choices(here):
            return self.follows(here, depth)
        return self.cases(here, depth)

    def choice(self, here: str, depth: int) -> Body:
        reference = self.between(0, 3)
        options = []
        for k, name in enumerate(OPTIONS[: 3 if self.maybe(25) else 2]):
            only = self.condition(here) if self.maybe(18) else None
            error = Fraction(self.between(1, 8) * 5, 100) if self.maybe(30) else None
            cost = self.number() if self.maybe(10) else None
            options.append(Option(name, self.body(here, depth + 1), only, error, cost, reference == k))
        return Choice(self.who(), tuple(options), self.pick(("", "period", "validation", "validation")))

    def follows(self, here: str, depth: int) -> Body:
        leader = self.pick(self.choices(here))
        assert isinstance(leader.body, Choice | Follows)
        self.use(leader.name)
        names = [o.name for o in leader.body.options]
        if self.maybe(30):
            names.reverse()
        return Follows(leader.name, tuple(Option(n, self.body(here, depth + 1)) for n in names))

    def cases(self, here: str, depth: int) -> Body:
        first = self.condition(here)
        style = self.between(0, 5)
        conditions: list[Condition | None]
        if style == 0:
            conditions = [first, self.opposite(first)]
        elif style == 1:
            conditions = [first, None]
        elif style == 2 and self.numeric(here):
            conditions = self.steps(self.pick(self.numeric(here)))
        else:
            conditions = [first, *(self.condition(here) for _ in range(self.between(1, 2)))]
            if self.maybe(50):
                conditions.append(None)
        in_order = self.maybe(25)
        return Cases(tuple(When(c, self.body(here, depth + 1)) for c in conditions), in_order)

    def opposite(self, condition: Condition) -> Condition:
        """What is left, now and then with the boundary on the wrong side."""
        if isinstance(condition, Compare):
            operator = SWAPPED[condition.operator]
            if self.maybe(20) and operator in ("<", ">"):
                operator += "="
            elif self.maybe(20) and operator in ("<=", ">="):
                operator = operator[0]
            return Compare(operator, condition.left, condition.right)
        return Not(condition)

    def steps(self, name: str) -> list[Condition | None]:
        """Bands of one number, each boundary right or wrong."""
        low = self.between(0, 2)
        high = low + self.between(1, 2)
        x = Ref(name)
        below, up = self.pick(("<", "<=")), self.pick(("<=", "<"))
        top = self.pick((">=", ">"))
        return [
            Compare(below, x, whole(low)),
            Chain(whole(low), up, x, "<", whole(high)),
            Compare(top, x, whole(high)),
        ]

    # --- the whole ---------------------------------------------------------------------------

    def rulebook(self) -> Rulebook:
        self.declare()
        for name in ("carbon", "methane", "leakage", "buffer")[: self.between(1, 4)]:
            here = self.index if self.index and self.maybe(45) else ""
            quantity = Quantity(name, self.body(here), here)
            self.quantities.append(quantity)
            self.unused.append(name)
        body = self.body("") if self.maybe(40) else Formula(self.formula(""))
        if self.unused and isinstance(body, Formula):
            body = Formula(self.with_unused(body.expression))
        elif self.unused and self.maybe(70):
            self.quantities.append(Quantity("gross_credits", body))
            body = Formula(self.with_unused(Ref("gross_credits")))
        self.quantities.append(Quantity("credits", body))
        applies = tuple(self.condition("") for _ in range(1 + self.maybe(20))) if self.maybe(30) else ()
        step = self.pick((Fraction(1), Fraction(1), Fraction(1, 2), Fraction(10)))
        quantities = tuple(reversed(self.quantities)) if self.maybe(25) else tuple(self.quantities)
        return Rulebook(
            result="credits",
            quantities=quantities,
            facts=tuple(self.facts),
            settings=tuple(self.settings),
            judgements=tuple(self.judgements),
            constants=tuple(self.constants),
            tables=tuple(self.tables),
            indices=tuple(self.indices),
            applies=applies,
            periods=self.pick((1, 2, 3, 8)),
            rounding=self.pick(("", "down", "up", "nearest")),
            step=step,
        )

    def with_unused(self, e: Expression) -> Expression:
        indexed = {q.name for q in self.quantities if q.index}
        for name in list(self.unused):
            if self.maybe(85):
                term: Expression = Over("sum", self.use(name), self.index) if name in indexed else self.use(name)
                e = Op(self.pick(("+", "-")), e, term)
        return e
