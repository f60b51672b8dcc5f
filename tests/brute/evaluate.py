"""Every evaluation of a rulebook, over the points that stand for all projects and human inputs.

The meaning that is followed here, beyond the language's own page:

* Reaching a branch point asks all conditions written in it, without short circuit: every quantity
  compared is evaluated (which reaches its branch points), every target of ``takes`` and ``follows`` is
  reached (its body is not evaluated by that). An expression evaluates everything it mentions.
* Where something that a branch point asks has no result itself, the branch point is stuck: it takes
  no branch and reports no gap. A gap is reported at a branch point that is reached (also where another part of the
  same evaluation has a gap), whose questions all have a value, and that has no branch open.
* A lookup that no row answers is a gap of the innermost branch point whose branch holds the
  expression, else of the quantity (with its element); inside a condition, of the branch point that asks, where
  all else that it asks has a result. So is a division by zero, the root of a number below zero, and the
  logarithm of one that is not above it.
* Two ``when`` of plain cases overlap where both hold in some evaluation that reaches them with every question
  answered, complete or not.
* ``applies when``: facts, human inputs and routes for which one fails, or asks something that has no
  result, are outside: not counted, no gap, overlap or dead branch is told of them. What it asks
  is evaluated, so its branch points are on the route. A project counts for the figures per project when some
  evaluation of it is inside.
* What ``takes`` means stands in ``taking``.

How. What is asked next depends on nothing but the branches taken before, so one pass along given branches does for
all points at once: an array holds, for each point, what a condition or an expression comes to, and a
mask those points that go along. Each pass starts from the beginning; nothing is carried over but the answers to
conditions that mention no quantity.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field

import numpy as np

from brute.linear import TooLarge
from brute.points import Points
from brute.rulebooks import (
    LOWEST,
    And,
    Band,
    Body,
    Call,
    Cases,
    Chain,
    Choice,
    Compare,
    Condition,
    Expression,
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
    Or,
    Over,
    Position,
    Ref,
    Rulebook,
    Takes,
    at,
    branches,
)
from brute.taking import Taking, open_sets, preference

Elements = dict[str, int]
Array = np.ndarray
MOST_ROUTES = 3_000

# Points are exact fractions with small denominators and comparisons are linear, so a difference that is not zero
# is far from it; floats stray by less than this.
SAME = 1e-9


@dataclass(frozen=True)
class Value:
    """What an expression or condition comes to at each point; ``has`` is None where it always has a
    value. Both may be single values that stand for every point."""

    it: Array | float | bool
    has: Array | None = None


@dataclass
class Pass:
    """One evaluation along given branches, for all points at once.

    ``states``: branch point reached → branch, None where it has a gap or is stuck. ``asked``: branch
    point → where all its questions have an answer, and where each branch is open. ``missing``: gaps
    of lookups, by the id they are reported under."""

    mask: Array
    states: dict[str, str | None] = field(default_factory=dict)
    asked: dict[str, tuple[Array | None, dict[str, Array]]] = field(default_factory=dict)
    missing: list[tuple[str, Array]] = field(default_factory=list)
    inside: Array | None = None
    result: Value | None = None

    @property
    def complete(self) -> Array:
        """Points that go this way, inside the rulebook, without any gap."""
        found = self.mask & self.inside
        if None in self.states.values():
            return found & False
        for _, where in self.missing:
            found = found & ~where
        return found


def both(one: Array | None, other: Array | None) -> Array | None:
    if one is None or other is None:
        return other if one is None else one
    return one & other


class Evaluator:
    """Evaluates ``rulebook`` at ``points``. ``passes()`` gives every evaluation. Differences up to ``same``
    count as none."""

    def __init__(self, rulebook: Rulebook, points: Points, same: float = SAME) -> None:
        self.rulebook = rulebook
        self.same = same
        self.points = points
        self.quantities = {q.name: q for q in rulebook.quantities}
        self.tables = {t.name: t for t in rulebook.tables}
        self.constants = {c.name: float(c.value) for c in rulebook.constants}
        self.indices = {f.name: f.index for f in rulebook.facts} | {q.name: q.index for q in rulebook.quantities}
        self.domains = {
            d.name: d.domain.values for d in (*rulebook.facts, *rulebook.settings) if isinstance(d.domain, OneOf)
        }
        self.written = dict(written(rulebook))
        self.taking = Taking(rulebook)
        self.all = np.ones(points.rows, dtype=bool)
        self.plain: dict[tuple[int, int], Value] = {}

    # --- passes --------------------------------------------------------------------------

    def passes(self) -> Iterator[Pass]:
        """Every evaluation that some point goes along, each once."""
        waiting: list[tuple[str | None, ...]] = [()]
        count = 0
        while waiting:
            self.script = waiting.pop()
            self.step = 0
            self.others: list[tuple[str | None, ...]] = []
            self.values: dict[str, Value] = {}
            self.terms: dict[str, dict[str, Value]] = {}
            self.answered: Array | None = None
            self.now = Pass(self.all)
            self.now.inside = self.all
            for applies in self.rulebook.applies:
                answer = self.condition(applies, {}, "")
                self.now.inside = self.now.inside & answer.it
                if answer.has is not None:
                    self.now.inside = self.now.inside & answer.has
            self.now.result = self.quantity(self.rulebook.result, {})
            waiting += self.others
            count += 1
            if count > MOST_ROUTES:
                raise TooLarge("too many routes")
            yield self.now

    def decide(self, ways: dict[str | None, Array]) -> str | None:
        """The way this pass takes; the others that some point goes wait for a pass of their own."""
        if self.step < len(self.script):
            taken = self.script[self.step]
        else:
            possible = [name for name, where in ways.items() if (self.now.mask & where).any()]
            taken = possible[0] if possible else None
            so_far = (*self.script,)
            self.others += [(*so_far, name) for name in possible[1:]]
            self.script = (*so_far, taken)
        self.step += 1
        self.now.mask = self.now.mask & ways[taken]
        return taken

    # --- branch points -------------------------------------------------------------------

    def reach(self, id: str, body: Body, elements: Elements) -> str | None:
        """Reaches the branch point ``id``, if it has not been, and gives its branch."""
        if id in self.now.states:
            return self.now.states[id]
        before, self.answered = self.answered, None
        own = len(self.now.missing)
        has, open_ = self.open(id, body, elements)
        if self.answered is not None:
            # A row that is missing here is told only where nothing else that is asked lacks a result.
            for k, (owner, lacking) in enumerate(self.now.missing[own:], start=own):
                self.now.missing[k] = (owner, lacking & self.answered if owner == id else lacking)
        self.answered = before
        self.now.asked[id] = (has, open_)
        ways: dict[str | None, Array] = {name: where if has is None else where & has for name, where in open_.items()}
        ways[None] = ~np.logical_or.reduce(list(ways.values()))
        self.now.states[id] = self.decide(ways)
        return self.now.states[id]

    def open(self, id: str, body: Body, elements: Elements) -> tuple[Array | None, dict[str, Array]]:
        """Asks a branch point all its questions: where they all have an answer, and where each branch is open."""
        if isinstance(body, Choice) and body.extreme:
            has, holds = self.holding([(o.name, o.only_when) for o in body.options], elements, id)
            return has, open_sets(holds)
        if isinstance(body, Choice) and body.takes:
            has, holds = self.holding(self.taking.line(body), elements, id)
            return has, _first(holds)
        if isinstance(body, Follows):
            return self.following(id, body, elements)
        has, holds = self.holding([(name, condition) for name, condition, _ in branches(body)], elements, id,
                                  isinstance(body, Cases) and body.in_order)  # fmt: skip
        open_ = _first(holds) if isinstance(body, Cases) and body.in_order else holds
        if isinstance(body, Cases) and "otherwise" in open_:
            others = [where for name, where in holds.items() if name != "otherwise"]
            open_ = {**open_, "otherwise": ~np.logical_or.reduce(others)}
        return has, open_

    def holding(
        self, questions: list[tuple[str, Condition | None]], elements: Elements, id: str, in_order: bool = False
    ) -> tuple[Array | None, dict[str, Array]]:
        """Where all have an answer, and where each condition holds. What comes ``in_order`` behind a condition that
        the text alone answers with yes is not asked."""
        has: Array | None = None
        holds: dict[str, Array] = {}
        for name, condition in questions:
            answer = Value(True) if condition is None else self.condition(condition, elements, id)
            holds[name] = self.all & answer.it
            has = both(has, answer.has)
            if in_order and condition is not None and self.taking.known(condition):
                break
        return has, holds

    def following(self, id: str, body: Follows, elements: Elements) -> tuple[Array | None, dict[str, Array]]:
        leader = self.taking.leader(body.quantity)
        if leader is not None:
            name, choice = leader
            if choice.extreme:
                return self.extreme_of(name, choice, elements)
            has, holds = self.holding(self.taking.line(choice), self.inside(name, elements), id)
            return has, _first(holds)
        target = self.target(body.quantity, elements)
        if target is None:
            self.answered = self.all & False
        return self.answered, {name: self.all & (name == target) for name, _, _ in branches(body)}

    def extreme_of(self, name: str, choice: Choice, elements: Elements) -> tuple[Array | None, dict[str, Array]]:
        """Which of the open options of a quantity has its lowest or highest value; of several alike the first in the
        order of preference."""
        value = self.quantity(name, elements)
        self.answered = both(self.answered, value.has)
        index = self.quantities[name].index
        terms = self.terms.get(at(name, elements[index] if index else 0), {})
        found: dict[str, Array] = {}
        for option in preference(choice):
            there = option.name in terms
            found[option.name] = self.all & (
                compared(value.it, "=", terms[option.name].it, self.same) if there else False
            )
        return value.has, _first(found)

    def inside(self, name: str, elements: Elements) -> Elements:
        """The elements inside the body of a quantity."""
        index = self.quantities[name].index
        return {index: elements[index]} if index else {}

    def target(self, name: str, elements: Elements) -> str | None:
        """Reaches the choice of a quantity, without evaluating what stands under it."""
        quantity = self.quantities[name]
        element = elements[quantity.index] if quantity.index else 0
        inside = {quantity.index: element} if quantity.index else {}
        return self.reach(at(name, element), quantity.body, inside)

    def quantity(self, name: str, elements: Elements) -> Value:
        quantity = self.quantities[name]
        element = elements[quantity.index] if quantity.index else 0
        here = at(name, element)
        if here not in self.values:
            inside = {quantity.index: element} if quantity.index else {}
            self.values[here] = self.body(quantity.body, here, here, inside)
        return self.values[here]

    def body(self, body: Body, id: str, owner: str, elements: Elements) -> Value:
        """The value of a body. ``id`` is its own as a branch point, ``owner`` what a missing row is reported
        under."""
        if isinstance(body, Formula):
            return self.expression(body.expression, elements, owner)
        taken = self.reach(id, body, elements)
        if isinstance(body, Choice) and body.extreme and taken is not None:
            open_ = taken.split("+")
            terms = {o.name: self.body(o.body, f"{id}/{o.name}", id, elements)
                     for o in body.options if o.name in open_}  # fmt: skip
            self.terms[id] = terms
            return reduced("min" if body.takes == LOWEST else "max", list(terms.values()))
        for name, _, inner in branches(body):
            if name == taken:
                return self.body(inner, f"{id}/{name}", id, elements)
        return Value(0.0, self.all & False)

    # --- conditions ----------------------------------------------------------------------

    def condition(self, c: Condition, elements: Elements, owner: str) -> Value:
        known = self.taking.known(c)
        if known is not None:
            return Value(known)
        key = (id(c), next(iter(elements.values()), 0))
        if key not in self.plain:
            answer = self.answer(c, elements, owner)
            if answer.has is not None or not self.is_plain(c):
                return answer
            self.plain[key] = answer
        return self.plain[key]

    def is_plain(self, c: Condition) -> bool:
        if isinstance(c, Compare):
            return not (self.mentions(c.left) or self.mentions(c.right))
        if isinstance(c, Chain):
            return not (self.mentions(c.low) or self.mentions(c.middle) or self.mentions(c.high))
        if isinstance(c, And | Or):
            return all(self.is_plain(part) for part in c.parts)
        if isinstance(c, Not):
            return self.is_plain(c.part)
        return not isinstance(c, Takes)

    def mentions(self, e: Expression) -> bool:
        """Whether an expression mentions a quantity."""
        return any(name in self.quantities for name in names(e))

    def answer(self, c: Condition, elements: Elements, owner: str) -> Value:
        if isinstance(c, Compare):
            left, right = self.expression(c.left, elements, owner), self.expression(c.right, elements, owner)
            return Value(compared(left.it, c.operator, right.it, self.same), both(left.has, right.has))
        if isinstance(c, Chain):
            low, middle, high = (self.expression(e, elements, owner) for e in (c.low, c.middle, c.high))
            holds = compared(low.it, c.first, middle.it, self.same) & compared(middle.it, c.second, high.it, self.same)
            return Value(holds, both(both(low.has, middle.has), high.has))
        if isinstance(c, Is):
            wanted = [self.domains[c.name].index(v) for v in c.values]
            return Value(np.isin(self.outside(c.name, elements), wanted))
        if isinstance(c, Holds):
            return Value(self.outside(c.name, elements))
        if isinstance(c, Takes) and (leader := self.taking.leader(c.quantity)):
            return self.took(c.option, *leader, elements, owner)
        if isinstance(c, Takes):
            taken = self.target(c.quantity, elements)
            has = self.all & False if taken is None else None
            self.answered = both(self.answered, has)
            return Value(taken == c.option, has)
        if isinstance(c, Not):
            part = self.condition(c.part, elements, owner)
            return Value(np.logical_not(part.it), part.has)
        parts = [self.condition(part, elements, owner) for part in c.parts]
        holds, has = parts[0].it, parts[0].has
        for part in parts[1:]:
            holds = holds & part.it if isinstance(c, And) else holds | part.it
            has = both(has, part.has)
        return Value(holds, has)

    def took(self, option: str, name: str, choice: Choice, elements: Elements, owner: str) -> Value:
        """Whether a choice that nobody makes took that option. Only the options that come before it are asked."""
        if choice.extreme:
            has, found = self.extreme_of(name, choice, elements)
            return Value(found[option], has)
        line = self.taking.line(choice)
        until = [each for each, _ in line].index(option)
        has, holds = self.holding(line[: until + 1], self.inside(name, elements), owner)
        return Value(_first(holds)[option], has)

    def outside(self, name: str, elements: Elements) -> Array:
        """A fact, setting or judgement at every point."""
        index = self.indices.get(name, "")
        return self.points.columns[at(name, elements[index]) if index else name]

    # --- expressions ---------------------------------------------------------------------

    def expression(self, e: Expression, elements: Elements, owner: str) -> Value:
        if isinstance(e, Num):
            return Value(float(e.value))
        if isinstance(e, Position):
            return Value(float(elements[e.index]))
        if isinstance(e, Ref):
            if e.name in self.quantities:
                value = self.quantity(e.name, elements)
                self.answered = both(self.answered, value.has)
                return value
            if e.name in self.constants:
                return Value(self.constants[e.name])
            return Value(self.outside(e.name, elements))
        if isinstance(e, Lookup):
            return self.lookup(e, elements, owner)
        if isinstance(e, Neg):
            operand = self.expression(e.operand, elements, owner)
            return Value(-operand.it, operand.has)
        if isinstance(e, Over):
            each = [self.expression(e.body, {**elements, e.index: k}, owner) for k in self.rulebook.elements(e.index)]
            return reduced(e.name, each)
        if isinstance(e, Call):
            each = [self.expression(a, elements, owner) for a in e.arguments]
            if e.name in ("sqrt", "ln"):
                inside = compared(each[0].it, ">=" if e.name == "sqrt" else ">", 0.0, self.same)
                each = [self.only(Value(np.where(inside, each[0].it, 1.0), each[0].has), inside, owner)]
            return reduced(e.name, each)
        left, right = self.expression(e.left, elements, owner), self.expression(e.right, elements, owner)
        if e.operator == "/":
            inside = compared(right.it, "<>", 0.0, self.same)
            right = self.only(Value(np.where(inside, right.it, 1.0), right.has), inside, owner)
        return Value(_ARITHMETIC[e.operator](left.it, right.it), both(left.has, right.has))

    def only(self, value: Value, inside: Array, owner: str) -> Value:
        """The value where ``inside``; elsewhere there is none, which is a gap of ``owner``."""
        lacking = self.all & ~np.asarray(inside)
        if value.has is not None:
            lacking = lacking & value.has
        if not lacking.any():
            return value
        self.now.missing.append((owner, lacking))
        return Value(value.it, both(value.has, ~lacking))

    def lookup(self, e: Lookup, elements: Elements, owner: str) -> Value:
        table = self.tables[e.table]
        has: Array | None = None
        found, values = self.all & False, np.zeros(self.points.rows)
        given: list[tuple[Array | float, tuple[str, ...]]] = []
        for argument, key in zip(e.arguments, table.keys, strict=True):
            if isinstance(argument, Ref) and argument.name in self.domains:
                given.append((self.outside(argument.name, elements), self.domains[argument.name]))
            else:
                value = self.expression(argument, elements, owner)
                has = both(has, value.has)
                given.append((value.it, self.domains.get(key, ())))
        for row in reversed(table.rows):
            here = self.all
            for label, (value, domain) in zip(row.labels, given, strict=True):
                here = here & (
                    in_band(value, label, self.same) if isinstance(label, Band) else value == domain.index(label)
                )
            found, values = found | here, np.where(here, float(row.value), values)
        return self.only(Value(values, has), found, owner)


def _first(holds: dict[str, Array]) -> dict[str, Array]:
    found: dict[str, Array] = {}
    before: Array | bool = False
    for name, where in holds.items():
        found[name] = where & np.logical_not(before)
        before = before | where
    return found


def compared(left: Array | float, operator: str, right: Array | float, same: float) -> Array:
    difference = np.subtract(left, right)
    size = np.abs(difference)
    if ((size > same) & (size < 100 * same)).any():
        raise TooLarge("a difference too small to tell from zero")
    if operator == "=":
        return size <= same
    if operator == "<>":
        return size > same
    if operator == "<":
        return difference < -same
    if operator == "<=":
        return difference <= same
    return difference > same if operator == ">" else difference >= -same


def in_band(value: Array | float, band: Band, same: float) -> Array | bool:
    inside: Array | bool = True
    if band.low is not None:
        inside = compared(value, ">", float(band.low), same)
    if band.high is not None:
        inside = inside & compared(value, "<=", float(band.high), same)
    return inside


_ARITHMETIC = {"+": np.add, "-": np.subtract, "*": np.multiply, "/": np.divide, "^": np.power}
_FUNCTIONS = {"abs": np.abs, "sqrt": np.sqrt, "exp": np.exp, "ln": np.log, "floor": np.floor, "ceil": np.ceil}


def reduced(name: str, each: list[Value]) -> Value:
    it, has = each[0].it, each[0].has
    if name in _FUNCTIONS:
        return Value(_FUNCTIONS[name](it), has)
    if name == "round":
        return Value(np.floor(np.add(it, 0.5)), has)
    for value in each[1:]:
        it = np.add(it, value.it) if name in ("sum", "mean") else getattr(np, f"{name}imum")(it, value.it)
        has = both(has, value.has)
    return Value(it / len(each) if name == "mean" else it, has)


def names(e: Expression) -> Iterator[str]:
    """Every name in an expression but tables."""
    if isinstance(e, Ref):
        yield e.name
    elif isinstance(e, Op):
        yield from names(e.left)
        yield from names(e.right)
    elif isinstance(e, Neg):
        yield from names(e.operand)
    elif isinstance(e, Over):
        yield from names(e.body)
    elif isinstance(e, Call | Lookup):
        for argument in e.arguments:
            yield from names(argument)


def written(rulebook: Rulebook) -> Iterator[tuple[str, Body]]:
    """Every branch point with its body, in the order written, element by element."""

    def inside(body: Body, id: str) -> Iterator[tuple[str, Body]]:
        if not isinstance(body, Formula):
            yield id, body
            for name, _, inner in branches(body):
                yield from inside(inner, f"{id}/{name}")

    for quantity in rulebook.quantities:
        for element in rulebook.elements(quantity.index):
            yield from inside(quantity.body, at(quantity.name, element))
