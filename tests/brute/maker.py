"""Builds one small rulebook from decisions that somebody else takes.

What is simplest is drawn as 0, first or no.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction

from brute.declarer import Declarer, whole
from brute.rulebooks import (
    And,
    Body,
    Call,
    Cases,
    Chain,
    Choice,
    Compare,
    Condition,
    Expression,
    Fact,
    Follows,
    Formula,
    Holds,
    Is,
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
    Rulebook,
    Setting,
    Table,
    Takes,
    When,
    YesNo,
)

OPTIONS = ("default", "plots", "model")
SWAPPED = {"<": ">=", "<=": ">", ">": "<=", ">=": "<", "=": "<>", "<>": "="}


class Maker(Declarer):
    """Builds one rulebook from the inside out: a quantity mentions only quantities made before it.

    ``here`` is the index in which something is being written, "" for none."""

    # --- what can be mentioned ---------------------------------------------------------------

    def numeric(self, here: str) -> list[str]:
        return [f.name for f in self.facts if isinstance(f.domain, Range) and f.index in ("", here)]

    def known(self, here: str) -> list[Quantity]:
        return [q for q in self.quantities if q.index in ("", here)]

    def choices(self, here: str) -> list[Quantity]:
        return [q for q in self.known(here) if isinstance(q.body, Choice | Follows)]

    def spread(self) -> list[tuple[str, str]]:
        """Names per index that a reduction can run over, with their index."""
        facts = [(f.name, f.index) for f in self.facts if isinstance(f.domain, Range) and f.index]
        return [*facts, *((q.name, q.index) for q in self.quantities if q.index)]

    def use(self, name: str) -> Ref:
        if name in self.unused:
            self.unused.remove(name)
        return Ref(name)

    # --- expressions -------------------------------------------------------------------------

    def number(self) -> Num:
        if self.maybe(20):
            return Num(Fraction(self.between(-1, 8), self.pick((2, 4, 5))))
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
        name, index = self.pick(self.spread())
        inner: Expression = self.use(name)
        if self.maybe(25):
            inner = Op(self.pick(("+", "-", "*")), inner, self.pick((Position(index), self.number())))
        return Over(self.pick(("sum", "sum", "sum", "mean", "min", "max")), inner, index)

    def usable_tables(self, here: str) -> list[Table]:
        reach = {f.name for f in self.facts if f.index in ("", here)} | {s.name for s in self.settings}
        return [t for t in self.tables if t.name == "curve" or set(t.keys) <= reach]

    def lookup(self, here: str) -> Expression:
        table = self.pick(self.usable_tables(here))
        if table.name != "curve":
            return Lookup(table.name, tuple(Ref(k) for k in table.keys))
        return self.banded(here)

    def banded(self, here: str, depth: int = 0) -> Expression:
        """The table of bands asked with a fact, a number, something calculated, or what it answers itself."""
        numbers = self.numeric(here)
        ways: list[Callable[[], Expression]] = [lambda: Ref(self.pick(numbers)) if numbers else whole(1)] * 4
        ways += [self.number]
        if self.known(here):
            ways += [lambda: self.use(self.pick(self.known(here)).name)] * 2
        if depth < 2:
            ways += [lambda: self.banded(here, depth + 1)]
        return Lookup("curve", (self.pick(ways)(),))

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
        if any(table.name == "curve" for table in self.tables) and self.maybe(20):
            e = Op(self.pick(("+", "-", "/")), e, self.banded(here))
        if self.maybe(8):
            e = self.bent(e, here)
        if self.maybe(6):
            e = Neg(e) if self.maybe(50) else Call("abs", (e,))
        return e

    def bent(self, e: Expression, here: str) -> Expression:
        """Something that is not linear, and may have no value in places."""
        bounded = [f.name for f in self.facts if f.name in self.numeric(here) and f.domain != Range(None, None)]
        ways: list[Callable[[], Expression]] = [lambda: Op("^", e, whole(2))]
        numbers = [Ref(name) for name in self.numeric(here)]
        if numbers:
            ways += [lambda: Op("/", e, numbers[0]), lambda: Op("+", e, Call("sqrt", (numbers[0],)))]
            ways += [lambda: Op("-", e, Call("ln", (Op("-", numbers[0], whole(1)),)))]
        if bounded:
            ways += [lambda: Op("*", e, Ref(bounded[0])), lambda: Op("/", e, Op("+", whole(5), Ref(bounded[0])))]
        if self.known(here):
            ways += [lambda: Op("*", e, self.use(self.pick(self.known(here)).name))]
        return self.pick(ways)()

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
        return Num(Fraction(self.between(-2, 9), self.pick((2, 5)))) if self.maybe(15) else whole(self.between(0, 4))

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
        cost = next((i.most for i in self.indices if i.name == here), 1)
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
            here = self.over(45)
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
        indexed = {q.name: q.index for q in self.quantities if q.index}
        for name in list(self.unused):
            if self.maybe(85):
                term: Expression = Over("sum", self.use(name), indexed[name]) if name in indexed else self.use(name)
                e = Op(self.pick(("+", "-")), e, term)
        return e
