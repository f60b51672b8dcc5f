"""Small rulebooks as frozen dataclasses.

Expressions, conditions and bodies are trees; names are plain strings and nothing is resolved or
checked: whoever builds a rulebook here sees to it that it means something.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

# --- expressions -------------------------------------------------------------------------


@dataclass(frozen=True)
class Num:
    value: Fraction


@dataclass(frozen=True)
class Ref:
    """A numeric fact, numeric setting, constant or quantity."""

    name: str


@dataclass(frozen=True)
class Lookup:
    """A table with its arguments; an argument for a key of names is a ``Ref`` to a fact or
    setting with named values, for a key of bands any expression."""

    table: str
    arguments: tuple[Expression, ...]


@dataclass(frozen=True)
class Op:
    operator: str  # + - * / ^
    left: Expression
    right: Expression


@dataclass(frozen=True)
class Neg:
    operand: Expression


@dataclass(frozen=True)
class Call:
    """``min max abs sqrt exp ln round floor ceil``."""

    name: str
    arguments: tuple[Expression, ...]


@dataclass(frozen=True)
class Over:
    """``sum|mean|min|max(body over index)``."""

    name: str
    body: Expression
    index: str


@dataclass(frozen=True)
class Position:
    index: str


Expression = Num | Ref | Lookup | Op | Neg | Call | Over | Position

# --- conditions --------------------------------------------------------------------------


@dataclass(frozen=True)
class Compare:
    operator: str  # < <= > >= = <>
    left: Expression
    right: Expression


@dataclass(frozen=True)
class Chain:
    """``low OP middle OP high``, with ``<`` or ``<=`` in both places."""

    low: Expression
    first: str
    middle: Expression
    second: str
    high: Expression


@dataclass(frozen=True)
class Is:
    name: str
    values: tuple[str, ...]


@dataclass(frozen=True)
class Holds:
    """A yes/no fact, a yes/no setting or a judgement."""

    name: str


@dataclass(frozen=True)
class Takes:
    quantity: str
    option: str


@dataclass(frozen=True)
class And:
    parts: tuple[Condition, ...]


@dataclass(frozen=True)
class Or:
    parts: tuple[Condition, ...]


@dataclass(frozen=True)
class Not:
    part: Condition


Condition = Compare | Chain | Is | Holds | Takes | And | Or | Not

# --- bodies ------------------------------------------------------------------------------

LOWEST, HIGHEST = "lowest value", "highest value"


@dataclass(frozen=True)
class Formula:
    expression: Expression


@dataclass(frozen=True)
class When:
    """A branch of cases; ``condition`` None is ``otherwise`` and stands last."""

    condition: Condition | None
    body: Body


@dataclass(frozen=True)
class Cases:
    branches: tuple[When, ...]
    in_order: bool = False


@dataclass(frozen=True)
class Option:
    name: str
    body: Body
    only_when: Condition | None = None
    error: Fraction | None = None
    cost: Expression | None = None
    reference: bool = False


@dataclass(frozen=True)
class Choice:
    """``takes``: an option, ``LOWEST`` or ``HIGHEST`` where nobody chooses; "" where ``by`` does."""

    by: str
    options: tuple[Option, ...]
    timing: str = ""  # "", "validation" or "period"
    takes: str = ""

    @property
    def extreme(self) -> bool:
        return self.takes in (LOWEST, HIGHEST)


@dataclass(frozen=True)
class Follows:
    quantity: str
    options: tuple[Option, ...]


Body = Formula | Cases | Choice | Follows

# --- declarations ------------------------------------------------------------------------


@dataclass(frozen=True)
class Range:
    """A number from ``low`` to ``high``, both included; None where it has no bound."""

    low: Fraction | None
    high: Fraction | None


@dataclass(frozen=True)
class OneOf:
    values: tuple[str, ...]


@dataclass(frozen=True)
class YesNo:
    pass


Domain = Range | OneOf | YesNo


@dataclass(frozen=True)
class Index:
    name: str
    most: int


@dataclass(frozen=True)
class Fact:
    name: str
    domain: Domain
    index: str = ""


@dataclass(frozen=True)
class Setting:
    """``takes``: its value where nobody sets it."""

    name: str
    domain: Domain
    by: str
    takes: Fraction | str | bool | None = None


@dataclass(frozen=True)
class Judgement:
    """``takes``: how it is read where nobody judges."""

    name: str
    by: str
    takes: bool | None = None


@dataclass(frozen=True)
class Constant:
    name: str
    value: Fraction


@dataclass(frozen=True)
class Band:
    """``low`` < x <= ``high``; None where it has no bound."""

    low: Fraction | None
    high: Fraction | None


@dataclass(frozen=True)
class Row:
    labels: tuple[str | Band, ...]
    value: Fraction


@dataclass(frozen=True)
class Table:
    name: str
    keys: tuple[str, ...]
    rows: tuple[Row, ...]


@dataclass(frozen=True)
class Quantity:
    name: str
    body: Body
    index: str = ""


@dataclass(frozen=True)
class Rulebook:
    result: str
    quantities: tuple[Quantity, ...]
    facts: tuple[Fact, ...] = ()
    settings: tuple[Setting, ...] = ()
    judgements: tuple[Judgement, ...] = ()
    constants: tuple[Constant, ...] = ()
    tables: tuple[Table, ...] = ()
    indices: tuple[Index, ...] = ()
    applies: tuple[Condition, ...] = ()
    periods: int = 1
    rounding: str = ""  # "", "down", "up" or "nearest"
    step: Fraction = Fraction(1)

    def quantity(self, name: str) -> Quantity:
        return next(q for q in self.quantities if q.name == name)

    def most(self, index: str) -> int:
        return next(i.most for i in self.indices if i.name == index)

    def elements(self, index: str) -> tuple[int, ...]:
        """The elements of an index; of none: one, numbered 0."""
        return tuple(range(1, self.most(index) + 1)) if index else (0,)


def branches(body: Body) -> tuple[tuple[str, Condition | None, Body], ...]:
    """Name, condition and body of each branch: cases are called 1, 2, … and otherwise, branches
    of a choice by their option's name. A formula has none."""
    if isinstance(body, Formula):
        return ()
    if isinstance(body, Cases):
        return tuple(
            ("otherwise" if b.condition is None else str(k), b.condition, b.body)
            for k, b in enumerate(body.branches, start=1)
        )
    return tuple((o.name, o.only_when, o.body) for o in body.options)


def at(name: str, element: int) -> str:
    """The name of an element: ``stock@3``; the name itself when it stands in no index."""
    return f"{name}@{element}" if element else name
