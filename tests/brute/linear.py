"""Which linear forms a rulebook asks the sign of.

Every comparison is taken apart over all branches of the quantities in it (conditions that rule a
branch out are not looked at, so there may be more forms than matter, never fewer); bands give a form for each
edge, ``min``, ``max`` and ``abs`` one for each turn.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from fractions import Fraction
from itertools import combinations

from brute.rulebooks import (
    And,
    Band,
    Body,
    Call,
    Chain,
    Choice,
    Compare,
    Condition,
    Expression,
    Formula,
    Lookup,
    Neg,
    Not,
    Num,
    Op,
    Or,
    Over,
    Position,
    Ref,
    Rulebook,
    at,
    branches,
)
from brute.taking import Taking, asked


class TooLarge(Exception):
    """The rulebook is more than brute force can take, or compares what is not linear."""


# A linear form: coefficients by variable, sorted, none of them zero; and the constant.
Form = tuple[tuple[tuple[str, Fraction], ...], Fraction]
Elements = dict[str, int]

MOST_FORMS = 60


class _Atoms:
    """Collects the linear forms whose signs the rulebook asks for."""

    def __init__(self, rulebook: Rulebook) -> None:
        self.rulebook = rulebook
        self.atoms: set[Form] = set()
        self.known: dict[str, frozenset[Form]] = {}
        self.indices = {f.name: f.index for f in rulebook.facts} | {q.name: q.index for q in rulebook.quantities}
        self.bodies = {q.name: q.body for q in rulebook.quantities}
        self.numbers = {c.name: c.value for c in rulebook.constants}
        self.tables = {t.name: t for t in rulebook.tables}
        for applies in rulebook.applies:
            self.condition(applies, {})
        taking = Taking(rulebook)
        followed = {leader[0] for name in asked(rulebook) if (leader := taking.leader(name))}
        for quantity in rulebook.quantities:
            for element in rulebook.elements(quantity.index):
                inside = {quantity.index: element} if quantity.index else {}
                self.body(quantity.body, inside)
                if quantity.name in followed and isinstance(quantity.body, Choice) and quantity.body.extreme:
                    self.either([self.anything(option.body, inside) for option in quantity.body.options])

    def body(self, body: Body, elements: Elements) -> None:
        if isinstance(body, Formula):
            self.valued(body.expression, elements)
        for _, condition, inner in branches(body):
            if condition is not None:
                self.condition(condition, elements)
            self.body(inner, elements)

    def condition(self, condition: Condition, elements: Elements) -> None:
        if isinstance(condition, Compare):
            self.difference(condition.left, condition.right, elements)
        elif isinstance(condition, Chain):
            self.difference(condition.low, condition.middle, elements)
            self.difference(condition.middle, condition.high, elements)
        elif isinstance(condition, And | Or):
            for part in condition.parts:
                self.condition(part, elements)
        elif isinstance(condition, Not):
            self.condition(condition.part, elements)

    def valued(self, expression: Expression, elements: Elements) -> None:
        """The atoms that decide where a formula has a value: those of its tables, divisors, roots and logarithms."""
        if isinstance(expression, Lookup):
            self.forms(expression, elements)
        elif isinstance(expression, Op):
            if expression.operator == "/":
                self.add(self.forms(expression.right, elements))
            self.valued(expression.left, elements)
            self.valued(expression.right, elements)
        elif isinstance(expression, Neg):
            self.valued(expression.operand, elements)
        elif isinstance(expression, Call):
            if expression.name in ("sqrt", "ln"):
                self.add(self.forms(expression.arguments[0], elements))
            for argument in expression.arguments:
                self.valued(argument, elements)
        elif isinstance(expression, Over):
            for element in self.rulebook.elements(expression.index):
                self.valued(expression.body, {**elements, expression.index: element})

    def difference(self, left: Expression, right: Expression, elements: Elements) -> None:
        self.add(_sums([self.forms(left, elements), _scaled(self.forms(right, elements), Fraction(-1))]))

    def add(self, forms: Iterable[Form]) -> None:
        self.atoms |= {_normal(form) for form in forms if form[0]}

    def forms(self, e: Expression, elements: Elements) -> frozenset[Form]:
        """Every linear form that ``e`` may stand for, over all branches and table rows."""
        if isinstance(e, Num):
            return _constant(e.value)
        if isinstance(e, Position):
            return _constant(Fraction(elements[e.index]))
        if isinstance(e, Ref):
            return self.reference(e.name, elements)
        if isinstance(e, Neg):
            return _scaled(self.forms(e.operand, elements), Fraction(-1))
        if isinstance(e, Lookup):
            return self.lookup(e, elements)
        if isinstance(e, Over):
            each = [self.forms(e.body, {**elements, e.index: k}) for k in self.rulebook.elements(e.index)]
            if e.name in ("sum", "mean"):
                return _scaled(_sums(each), Fraction(1, len(each) if e.name == "mean" else 1))
            return self.either(each)
        if isinstance(e, Call):
            each = [self.forms(a, elements) for a in e.arguments]
            if e.name in ("min", "max"):
                return self.either(each)
            if e.name == "abs":
                self.add(each[0])
                return each[0] | _scaled(each[0], Fraction(-1))
            raise TooLarge(f"{e.name} in a comparison")
        left, right = self.forms(e.left, elements), self.forms(e.right, elements)
        if e.operator == "+":
            return _sums([left, right])
        if e.operator == "-":
            return _sums([left, _scaled(right, Fraction(-1))])
        if e.operator == "*" and all(not f[0] for f in left):
            return frozenset().union(*(_scaled(right, f[1]) for f in left))
        if e.operator == "*" and all(not f[0] for f in right):
            return frozenset().union(*(_scaled(left, f[1]) for f in right))
        if e.operator == "/" and all(not f[0] and f[1] for f in right):
            return frozenset().union(*(_scaled(left, 1 / f[1]) for f in right))
        raise TooLarge(f"{e.operator} in a comparison")

    def either(self, each: list[frozenset[Form]]) -> frozenset[Form]:
        for one, other in combinations(each, 2):
            self.add(_sums([one, _scaled(other, Fraction(-1))]))
        return frozenset().union(*each)

    def reference(self, name: str, elements: Elements) -> frozenset[Form]:
        if name in self.numbers:
            return _constant(self.numbers[name])
        index = self.indices.get(name, "")
        here = at(name, elements[index]) if index else name
        if name not in self.bodies:
            return frozenset({(((here, Fraction(1)),), Fraction(0))})
        if here not in self.known:
            self.known[here] = self.anything(self.bodies[name], {index: elements[index]} if index else {})
        return self.known[here]

    def anything(self, body: Body, elements: Elements) -> frozenset[Form]:
        """Every linear form that a body may stand for. The lowest of several has the sign that the lowest of their
        signs is, so that it needs no form of its own."""
        return frozenset().union(*(self.forms(f, elements) for f in _formulas(body)))

    def lookup(self, e: Lookup, elements: Elements) -> frozenset[Form]:
        table = self.tables[e.table]
        for k, argument in enumerate(e.arguments):
            edges = {
                edge for row in table.rows if isinstance(band := row.labels[k], Band) for edge in (band.low, band.high)
            }
            if edges:
                given = self.forms(argument, elements)
                for edge in edges - {None}:
                    self.add(_sums([given, _constant(-edge)]))
        return frozenset(((), row.value) for row in table.rows)


def _formulas(body: Body) -> Iterator[Expression]:
    if isinstance(body, Formula):
        yield body.expression
    for _, _, inner in branches(body):
        yield from _formulas(inner)


def _constant(value: Fraction) -> frozenset[Form]:
    return frozenset({((), value)})


def _scaled(forms: frozenset[Form], by: Fraction) -> frozenset[Form]:
    if by == 0:
        return _constant(Fraction(0))
    return frozenset((tuple((v, a * by) for v, a in coefficients), c * by) for coefficients, c in forms)


def _sums(each: list[frozenset[Form]]) -> frozenset[Form]:
    found = each[0]
    for other in each[1:]:
        found = frozenset(_added(f, g) for f in found for g in other)
        if len(found) > MOST_FORMS:
            raise TooLarge("too many forms in a comparison")
    return found


def _added(f: Form, g: Form) -> Form:
    if not f[0] or not g[0]:
        return (f[0] or g[0], f[1] + g[1])
    total = dict(f[0])
    for v, a in g[0]:
        total[v] = total.get(v, Fraction(0)) + a
    return (tuple(sorted((v, a) for v, a in total.items() if a)), f[1] + g[1])


def _normal(form: Form) -> Form:
    """The same sign up to a swap of - and +, the first coefficient 1."""
    first = form[0][0][1]
    return (tuple((v, a / first) for v, a in form[0]), form[1] / first)


def atoms(rulebook: Rulebook) -> frozenset[Form]:
    """The linear forms over numeric facts and settings whose signs decide every comparison and
    band of the rulebook, on every route. Raises ``TooLarge`` where one is not linear."""
    return frozenset(_Atoms(rulebook).atoms)
