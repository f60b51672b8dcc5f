"""The model: a rulebook with every name resolved and every unit checked.

Frozen dataclasses only. ``resolve`` makes them, every later room reads them. What failed to
resolve is an ``Unknown``, on which later stages stay silent.

Numbers are exact (``Fraction``) and stand in the unit written beside them: a fact, setting,
constant, table or quantity has its value in its *declared* unit, and ``resolve`` puts a
``Scaled`` wherever an expression mixes compatible units (kg and t), so that evaluating never
looks at a unit again.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from fractions import Fraction
from typing import Literal

from samesum.spans import Span

Decider = Literal["developer", "verifier", "programme"]


@dataclass(frozen=True, slots=True)
class Unit:
    """A unit as written and what it means: ``factor`` × the product of base units ** powers.

    ``text`` is "" for a plain number. ``dimension`` is sorted by base unit name and holds no
    zero power; two units convert into each other when their dimensions are equal.
    """

    text: str
    factor: Fraction
    dimension: tuple[tuple[str, Fraction], ...]


PLAIN = Unit("", Fraction(1), ())


# --- expressions -------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Number:
    value: Fraction
    unit: Unit
    span: Span


@dataclass(frozen=True, slots=True)
class Reference:
    """A fact, setting, constant or quantity by its name.

    ``index`` is the index whose current element is meant ("" when the name is not per index).
    """

    name: str
    kind: Literal["fact", "setting", "constant", "quantity"]
    index: str
    unit: Unit
    span: Span


@dataclass(frozen=True, slots=True)
class Position:
    """The number (1..N) of the current element of ``index``."""

    index: str
    unit: Unit
    span: Span


@dataclass(frozen=True, slots=True)
class Value:
    """One of the named values of a fact or setting, as an argument of a table."""

    name: str
    span: Span


@dataclass(frozen=True, slots=True)
class Lookup:
    """A table called with one argument a key (``Reference`` to a fact or setting with named
    values or ``Value`` for a key of names; any expression, already in the bands' unit, for a key of
    bands)."""

    table: str
    arguments: tuple[Expression, ...]
    unit: Unit
    span: Span


@dataclass(frozen=True, slots=True)
class Arithmetic:
    operator: Literal["+", "-", "*", "/", "^"]
    left: Expression
    right: Expression
    unit: Unit
    span: Span


@dataclass(frozen=True, slots=True)
class Negation:
    operand: Expression
    unit: Unit
    span: Span


@dataclass(frozen=True, slots=True)
class Function:
    """``min max`` (two or more arguments), ``abs sqrt exp ln round floor ceil`` (one)."""

    name: str
    arguments: tuple[Expression, ...]
    unit: Unit
    span: Span


@dataclass(frozen=True, slots=True)
class Reduction:
    """``sum|mean|min|max(body over index)``."""

    name: Literal["sum", "mean", "min", "max"]
    body: Expression
    index: str
    unit: Unit
    span: Span


@dataclass(frozen=True, slots=True)
class Scaled:
    """``operand`` × ``factor``: a conversion between compatible units."""

    operand: Expression
    factor: Fraction
    unit: Unit
    span: Span


@dataclass(frozen=True, slots=True)
class Unknown:
    """What could not be resolved; a problem was reported for it. Stands for an expression, a
    condition or a body."""

    span: Span
    unit: Unit = PLAIN


Expression = (
    Number | Reference | Position | Value | Lookup | Arithmetic | Negation | Function | Reduction | Scaled | Unknown
)


# --- conditions --------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Comparison:
    """``left OP right`` in one unit. A chained ``a <= x < b`` becomes ``All`` of two."""

    operator: Literal["<", "<=", ">", ">=", "=", "<>"]
    left: Expression
    right: Expression
    span: Span


@dataclass(frozen=True, slots=True)
class Is:
    """``subject is one of values``; subject is a fact or setting with named values."""

    subject: Reference
    values: tuple[str, ...]
    span: Span


@dataclass(frozen=True, slots=True)
class Holds:
    """A yes/no fact, a yes/no setting or a judgement, by its name."""

    name: str
    kind: Literal["fact", "setting", "judgement"]
    index: str
    span: Span


@dataclass(frozen=True, slots=True)
class Takes:
    """``quantity takes option``: which option that quantity's choice took."""

    quantity: str
    index: str
    option: str
    span: Span


@dataclass(frozen=True, slots=True)
class All:
    """``and``."""

    parts: tuple[Condition, ...]
    span: Span


@dataclass(frozen=True, slots=True)
class Some:
    """``or``."""

    parts: tuple[Condition, ...]
    span: Span


@dataclass(frozen=True, slots=True)
class Not:
    part: Condition
    span: Span


Condition = Comparison | Is | Holds | Takes | All | Some | Not | Unknown


# --- bodies ------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Formula:
    """``= EXPRESSION``, already scaled to the quantity's declared unit."""

    expression: Expression
    span: Span


@dataclass(frozen=True, slots=True)
class When:
    """A branch of cases; ``condition`` is None for ``otherwise``. ``name`` is "1", "2", … or
    "otherwise". ``span`` covers the line ``when CONDITION``."""

    name: str
    condition: Condition | None
    body: Body
    span: Span


@dataclass(frozen=True, slots=True)
class Cases:
    """``settled``: not written so, but what stands for a choice that nobody makes."""

    in_order: bool
    branches: tuple[When, ...]
    span: Span
    settled: bool = False


@dataclass(frozen=True, slots=True)
class Option:
    """An option of a choice. ``error`` and ``bias`` are plain numbers (0.35 for 35 %); None when
    the rulebook does not say. ``cost`` is an expression in money. ``span`` covers the option's line."""

    name: str
    body: Body
    span: Span
    only_when: Condition | None = None
    error: Fraction | None = None
    bias: Fraction | None = None
    cost: Expression | None = None
    reference: bool = False


LOWEST, HIGHEST = "lowest value", "highest value"


@dataclass(frozen=True, slots=True)
class Choice:
    """``timing`` is "validation", "period" or "" when the rulebook does not say.

    ``takes`` is "" for a choice that ``by`` makes. Else nobody chooses: the option of that name is taken wherever it
    is open, or the one that gives ``LOWEST`` or ``HIGHEST`` of those that are."""

    by: Decider
    options: tuple[Option, ...]
    span: Span
    timing: Literal["validation", "period", ""] = ""
    correlated: Fraction | None = None
    takes: str = ""


@dataclass(frozen=True, slots=True)
class Follows:
    """``choice follows QUANTITY``. ``index`` as in ``Reference``."""

    quantity: str
    index: str
    options: tuple[Option, ...]
    span: Span


Body = Formula | Cases | Choice | Follows | Unknown


# --- declarations ------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Range:
    """``LOW to HIGH``, both included, in the declared unit; None where there is no bound. ``share``: written in %,
    which is for messages only and changes nothing of what the domain is."""

    low: Fraction | None
    high: Fraction | None
    share: bool = field(default=False, compare=False, repr=False)


@dataclass(frozen=True, slots=True)
class OneOf:
    values: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class YesNo:
    pass


Domain = Range | OneOf | YesNo


@dataclass(frozen=True, slots=True)
class Spread:
    """``mean M spread S``: how a fact is distributed over projects (in its declared unit)."""

    mean: Fraction
    spread: Fraction


@dataclass(frozen=True, slots=True)
class About:
    """What every declaration may say of itself. ``name_span`` is the declared name alone;
    ``span`` the whole block without trailing blank lines."""

    clause: str
    source: str
    note: str
    span: Span
    name_span: Span


@dataclass(frozen=True, slots=True)
class Result:
    name: str
    unit: Unit
    rounding: Literal["down", "up", "nearest", ""]
    step: Fraction | None
    about: About


@dataclass(frozen=True, slots=True)
class Applies:
    condition: Condition
    about: About


@dataclass(frozen=True, slots=True)
class Index:
    name: str
    most: int
    about: About


@dataclass(frozen=True, slots=True)
class Fact:
    name: str
    unit: Unit
    index: str
    domain: Domain
    about: About
    spread: Spread | None = None


@dataclass(frozen=True, slots=True)
class Setting:
    """``takes``: the value that the rulebook prescribes, so that nobody sets it any more; None where somebody does."""

    name: str
    unit: Unit
    domain: Domain
    by: Decider
    about: About
    takes: Fraction | str | bool | None = None


@dataclass(frozen=True, slots=True)
class Judgement:
    """``takes``: how the rulebook has it read, so that nobody judges any more; None where somebody does."""

    name: str
    wording: str
    by: Decider
    about: About
    takes: bool | None = None


@dataclass(frozen=True, slots=True)
class Constant:
    """``withheld``: no part of what counts as the truth in comparisons, where it is zero (``not in reference``)."""

    name: str
    unit: Unit
    expression: Expression
    about: About
    withheld: bool = False


@dataclass(frozen=True, slots=True)
class Band:
    """``low`` < x <= ``high``; None where there is no bound."""

    low: Fraction | None
    high: Fraction | None


@dataclass(frozen=True, slots=True)
class Row:
    """``labels``: one a key, a value's name or a band."""

    labels: tuple[str | Band, ...]
    value: Fraction
    span: Span


@dataclass(frozen=True, slots=True)
class Key:
    """A key of a table. ``bands`` tells whether its rows give bands of a number (then ``unit`` is
    the bands' unit); else ``values`` are all the values that the fact or setting of that name has."""

    name: str
    bands: bool
    values: tuple[str, ...]
    unit: Unit
    span: Span


@dataclass(frozen=True, slots=True)
class Table:
    name: str
    unit: Unit
    keys: tuple[Key, ...]
    rows: tuple[Row, ...]
    about: About


@dataclass(frozen=True, slots=True)
class Quantity:
    """``error`` and ``bias`` as for an option: how a formula errs that nobody has to choose."""

    name: str
    unit: Unit
    index: str
    body: Body
    about: About
    error: Fraction | None = None
    bias: Fraction | None = None


@dataclass(frozen=True, slots=True)
class Model:
    """A whole rulebook. Declarations stand in the order written; names are unique over all kinds."""

    file: str
    title: str
    draft: str
    title_span: Span
    result: Result | None
    periods: int
    applies: tuple[Applies, ...]
    indices: tuple[Index, ...]
    facts: tuple[Fact, ...]
    settings: tuple[Setting, ...]
    judgements: tuple[Judgement, ...]
    constants: tuple[Constant, ...]
    tables: tuple[Table, ...]
    quantities: tuple[Quantity, ...]
