"""Short ways to write rulebooks down in tests of the brute force."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

from brute.rulebooks import (
    And,
    Body,
    Cases,
    Choice,
    Compare,
    Condition,
    Constant,
    Expression,
    Fact,
    Follows,
    Formula,
    Index,
    Is,
    Judgement,
    Lookup,
    Num,
    OneOf,
    Op,
    Option,
    Over,
    Quantity,
    Range,
    Ref,
    Row,
    Rulebook,
    Setting,
    Table,
    When,
    YesNo,
)


def n(value: int | str) -> Num:
    return Num(Fraction(value))


def f(value: Expression | int = 0) -> Formula:
    return Formula(n(value) if isinstance(value, int) else value)


def to(low: int, high: int) -> Range:
    return Range(Fraction(low), Fraction(high))


def total(*names: str) -> Formula:
    e: Expression = Ref(names[0])
    for name in names[1:]:
        e = Op("+", e, Ref(name))
    return Formula(e)


def choice(*names: str, by: str = "developer", timing: str = "", **only: Condition) -> Choice:
    return Choice(by, tuple(Option(name, f(), only.get(name)) for name in names), timing)


def cases(*conditions: Condition | None, in_order: bool = False) -> Cases:
    return Cases(tuple(When(c, f()) for c in conditions), in_order)


def result(*bodies: Body, **declared: object) -> Rulebook:
    """Quantities q1, q2, … and their sum as the result."""
    names = [f"q{k}" for k in range(1, len(bodies) + 1)]
    quantities = tuple(Quantity(name, body) for name, body in zip(names, bodies, strict=True))
    return replace(Rulebook("credits", (*quantities, Quantity("credits", total(*names)))), **declared)


def yes(name: str) -> Fact:
    return Fact(name, YesNo())


X = Fact("x", to(0, 10))


def less(value: int, name: str = "x") -> Compare:
    return Compare("<", Ref(name), n(value))


def more(value: int, name: str = "x") -> Compare:
    return Compare(">", Ref(name), n(value))


MARSH = Rulebook(
    "net_removals",
    (
        Quantity(
            "soil_carbon",
            Choice(
                "developer",
                (
                    Option(
                        "regional", f(Over("sum", Op("*", Lookup("stock", (Ref("soil"),)), Ref("area")), "stratum"))
                    ),
                    Option("plots", f(Over("sum", Op("*", Ref("plot_mean"), Ref("area")), "stratum")), reference=True),
                ),
                "period",
            ),
        ),
        Quantity(
            "methane",
            Cases(
                (
                    When(Compare(">=", Ref("salinity"), n(18)), f()),
                    When(
                        And((less(18, "salinity"), Is("soil", ("peaty", "organic")))),
                        Follows("soil_carbon", (Option("regional", f(5)), Option("plots", f(3)))),
                    ),
                )
            ),
        ),
        Quantity(
            "net_removals",
            f(
                Op(
                    "*",
                    Op("-", Op("*", Ref("soil_carbon"), Ref("c_to_co2")), Ref("methane")),
                    Op("-", n(1), Ref("discount")),
                )
            ),
        ),
    ),
    facts=(
        Fact("area", to(1, 5000), "stratum"),
        Fact("soil", OneOf(("mineral", "peaty", "organic"))),
        Fact("salinity", to(0, 40)),
        Fact("plot_mean", to(20, 400), "stratum"),
    ),
    settings=(Setting("discount", Range(Fraction(1, 20), Fraction(1, 5)), "developer"),),
    judgements=(Judgement("access", "developer"),),
    constants=(Constant("c_to_co2", Fraction(44, 12)),),
    tables=(
        Table(
            "stock",
            ("soil",),
            tuple(Row((soil,), Fraction(v)) for soil, v in (("mineral", 62), ("peaty", 90), ("organic", 118))),
        ),
    ),
    indices=(Index("stratum", 4),),
    periods=8,
)
