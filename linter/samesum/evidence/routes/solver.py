"""Exact sums handed to the solver (z3), and points brought back. The only module that knows z3."""

from __future__ import annotations

import time
from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import Any, Literal

from samesum.evidence.routes import ranges
from samesum.evidence.routes.ranges import Bounds
from samesum.evidence.routes.symbols import Call, Sum, generators

Answer = Literal["yes", "no", "cannot tell"]
NEGATIVE, ZERO, POSITIVE = 0, 1, 2


BEYOND = ("exp", "ln", "power")
"""Functions that the solver does not know. It takes each for any number: what it refutes is refuted, what it
finds possible may not be."""


def beyond(a: Sum) -> bool:
    """Whether the sum holds a function that the solver does not know."""
    return any(
        not isinstance(generator, str)
        and (generator.function in BEYOND or any(beyond(argument) for argument in generator.arguments))
        for monomial, _ in a.terms
        for generator, _power in monomial
    )


class Solver:
    """One z3 solver over real numbers with the names' domains asserted.

    Each check stops at ``deadline`` (monotonic clock) or after ``patience`` milliseconds and is then
    "cannot tell". A context of its own, so that nothing is shared between analyses. A root of a number below 0 is
    not possible, unless ``whole`` domains are given: inside them it is any number, as 1 / 0 is.
    """

    def __init__(
        self,
        box: Mapping[str, Bounds],
        deadline: float,
        patience: int = 1500,
        whole: Mapping[str, Bounds] | None = None,
    ) -> None:
        import z3

        self._z3 = z3
        self._context = z3.Context()
        self._solver = z3.Solver(ctx=self._context)
        self._deadline = deadline
        self._patience = patience
        self._names: dict[str, Any] = {}
        self._calls: dict[Call, Any] = {}
        self._roots: dict[Call, tuple[Any, list[Any]]] = {}
        self._box = box
        self._whole = whole
        for name in box:
            self.name(name)

    def name(self, name: str) -> Any:
        """The solver's variable of a fact or setting."""
        found = self._names.get(name)
        if found is None:
            found = self._z3.Real(name, self._context)
            self._names[name] = found
            domain = self._box.get(name)
            if domain is not None:
                self._solver.add(*self.within(found, domain))
        return found

    def value(self, number: Fraction) -> Any:
        return self._z3.RealVal(f"{number.numerator}/{number.denominator}", self._context)

    def within(self, expression: Any, domain: Bounds) -> list[Any]:
        """The bounds as constraints."""
        found = []
        if domain.low is not None:
            low = self.value(domain.low)
            found.append(expression > low if domain.low_open else expression >= low)
        if domain.high is not None:
            high = self.value(domain.high)
            found.append(expression < high if domain.high_open else expression <= high)
        return found

    def term(self, a: Sum) -> Any:
        """The sum as a solver term; functions beyond the solver are any number."""
        parts = []
        for monomial, coefficient in a.terms:
            factors = [] if coefficient == 1 and monomial else [self.value(coefficient)]
            for generator, exponent in monomial:
                base = self.name(generator) if isinstance(generator, str) else self._call(generator)
                factors.extend([base] * exponent)
            product = factors[0]
            for factor in factors[1:]:
                product = product * factor
            parts.append(product)
        if not parts:
            return self.value(Fraction(0))
        result = parts[0]
        for part in parts[1:]:
            result = result + part
        return result

    def _call(self, made: Call) -> Any:
        found = self._calls.get(made)
        if found is not None:
            return found
        z3 = self._z3
        arguments = [self.term(argument) for argument in made.arguments]
        first = arguments[0]
        zero, half = self.value(Fraction(0)), self.value(Fraction(1, 2))
        match made.function:
            case "abs":
                found = z3.If(first >= zero, first, -first)
            case "min" | "max":
                found = first
                for other in arguments[1:]:
                    found = z3.If(found <= other if made.function == "min" else found >= other, found, other)
            case "floor":
                found = z3.ToReal(z3.ToInt(first))
            case "ceil":
                found = -z3.ToReal(z3.ToInt(-first))
            case "round":
                found = z3.If(first >= zero, z3.ToReal(z3.ToInt(first + half)), -z3.ToReal(z3.ToInt(half - first)))
            case "inverse":
                found = self.value(Fraction(1)) / first
            case "sqrt":
                found = z3.FreshReal("root", self._context)
                meaning = [found >= zero, found * found == first]
                low = None if self._whole is None else ranges.bounds(made.arguments[0], self._whole).low
                if self._whole is not None and (low is None or low < 0):
                    meaning = [z3.Or(first < zero, z3.And(*meaning))]
                self._roots[made] = (found, meaning)
                self._solver.add(*meaning)
            case _:
                found = z3.FreshReal(made.function, self._context)
                if made.function == "exp":
                    self._solver.add(found > zero)
        self._calls[made] = found
        return found

    def sign(self, a: Sum, sign: int) -> Any:
        """The constraint that the sum has this sign."""
        term, zero = self.term(a), self.value(Fraction(0))
        return (term < zero, term == zero, term > zero)[sign]

    def push(self, constraints: Sequence[Any]) -> None:
        self._solver.push()
        self._solver.add(*constraints)

    def pop(self) -> None:
        self._solver.pop()

    def add(self, *constraints: Any) -> None:
        self._solver.add(*constraints)

    def check(self, *assumed: Any) -> Answer:
        """Whether what was pushed, and ``assumed``, can hold together."""
        left = self._deadline - time.monotonic()
        if left <= 0:
            return "cannot tell"
        self._solver.set("timeout", max(1, min(self._patience, int(left * 1000))))
        if assumed:
            self.push(assumed)
        answer = self._solver.check()
        if assumed and answer != self._z3.sat:
            self.pop()
            return "no" if answer == self._z3.unsat else "cannot tell"
        if assumed:
            self._last = self._solver.model()
            self.pop()
        elif answer == self._z3.sat:
            self._last = self._solver.model()
        return "yes" if answer == self._z3.sat else "no" if answer == self._z3.unsat else "cannot tell"

    def point(self) -> dict[str, Fraction]:
        """The values found by the last check that said yes. An irrational value is given to 30 digits."""
        found = {}
        for name, variable in sorted(self._names.items()):
            value = self._last.eval(variable, model_completion=True)
            if not self._z3.is_rational_value(value):
                value = value.approx(30) if self._z3.is_algebraic_value(value) else self.value(Fraction(0))
            found[name] = Fraction(value.numerator_as_long(), value.denominator_as_long())
        return found

    def without(self, names: Sequence[str], constraints: Sequence[Any]) -> Any | None:
        """The condition on the other names under which some values of ``names`` meet the
        constraints (their domains included); None when the solver cannot say."""
        z3 = self._z3
        bound = [self.name(name) for name in names]
        domains = [
            part for name in names if name in self._box for part in self.within(self.name(name), self._box[name])
        ]
        for made, (root, meaning) in self._roots.items():
            if generators(made.arguments[0]) & set(names):  # a root of something bound is bound with it
                bound.append(root)
                domains += meaning
        goal = z3.Goal(ctx=self._context)
        goal.add(z3.Exists(bound, z3.And(*domains, *constraints)))
        left = self._deadline - time.monotonic()
        if left <= 0:
            return None
        try:
            tactic = z3.TryFor(z3.Tactic("qe", ctx=self._context), max(1, int(min(left, 2.0) * 1000)))
            formula = tactic(goal).as_expr()
        except z3.Z3Exception:
            return None
        return None if _has_quantifier(z3, formula) else formula

    def negated(self, formula: Any) -> Any:
        return self._z3.Not(formula)


def _has_quantifier(z3: Any, formula: Any) -> bool:
    stack, seen = [formula], set()
    while stack:
        node = stack.pop()
        if node.get_id() in seen:
            continue
        seen.add(node.get_id())
        if z3.is_quantifier(node):
            return True
        stack.extend(node.children())
    return False


def sign_at(a: Sum, point: Mapping[str, Fraction]) -> int | None:
    """The sign of the sum at a point, exactly; None when that cannot be told."""
    found = ranges.bounds(a, {name: Bounds(value, value) for name, value in point.items()})
    if found.low is None or found.high is None:
        return None
    if found.low > 0:
        return POSITIVE
    if found.high < 0:
        return NEGATIVE
    return ZERO if found.low == found.high == 0 else None
