"""Exact symbolic numbers: what a formula amounts to in facts and settings.

A ``Sum`` is a polynomial with exact coefficients over *generators*: the names of numeric facts and
settings (``area@2``) and calls that are no polynomial (``exp``, ``min``, a division). Two formulas that
are the same polynomial are equal here, whatever they look like in the rulebook.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache

Monomial = tuple[tuple["Generator", int], ...]


@dataclass(frozen=True, slots=True)
class Call:
    """A function of sums: ``inverse abs min max sqrt exp ln round floor ceil power``."""

    function: str
    arguments: tuple[Sum, ...]


@dataclass(frozen=True, slots=True)
class Sum:
    """A sorted tuple of (monomial, coefficient) without zero coefficients."""

    terms: tuple[tuple[Monomial, Fraction], ...]

    @property
    def constant(self) -> Fraction | None:
        """The number that this is, when it mentions no fact, setting or call."""
        if not self.terms:
            return Fraction(0)
        if len(self.terms) == 1 and not self.terms[0][0]:
            return self.terms[0][1]
        return None


Generator = str | Call
ZERO = Sum(())


@lru_cache(maxsize=100_000)
def _key(generator: Generator) -> str:
    return generator if isinstance(generator, str) else "~" + repr(generator)


def _made(terms: Mapping[Monomial, Fraction]) -> Sum:
    kept = [(monomial, value) for monomial, value in terms.items() if value]
    kept.sort(key=lambda item: [(_key(generator), power) for generator, power in item[0]])
    return Sum(tuple(kept))


def number(value: Fraction | int) -> Sum:
    """A constant."""
    return Sum((((), Fraction(value)),)) if value else ZERO


def name(generator: Generator) -> Sum:
    """A fact, a setting or a call by itself."""
    return Sum(((((generator, 1),), Fraction(1)),))


def add(a: Sum, b: Sum) -> Sum:
    terms = dict(a.terms)
    for monomial, value in b.terms:
        terms[monomial] = terms.get(monomial, Fraction(0)) + value
    return _made(terms)


def scale(a: Sum, factor: Fraction) -> Sum:
    return Sum(tuple((monomial, value * factor) for monomial, value in a.terms)) if factor else ZERO


def subtract(a: Sum, b: Sum) -> Sum:
    return add(a, scale(b, Fraction(-1)))


def multiply(a: Sum, b: Sum) -> Sum:
    terms: dict[Monomial, Fraction] = {}
    for left, x in a.terms:
        for right, y in b.terms:
            powers: dict[Generator, int] = dict(left)
            for generator, power in right:
                powers[generator] = powers.get(generator, 0) + power
            monomial = tuple(sorted(powers.items(), key=lambda item: _key(item[0])))
            terms[monomial] = terms.get(monomial, Fraction(0)) + x * y
    return _made(terms)


def divide(a: Sum, b: Sum) -> Sum | None:
    """``a / b``; None when ``b`` is the constant 0."""
    constant = b.constant
    if constant is not None:
        return scale(a, 1 / constant) if constant else None
    return multiply(a, name(Call("inverse", (b,))))


def power(a: Sum, b: Sum) -> Sum | None:
    """``a ^ b``; None when there is no such number (0 to a negative power)."""
    exponent = b.constant
    if exponent is not None and exponent.denominator == 1 and abs(exponent) <= 12:
        result = number(1)
        for _ in range(abs(int(exponent))):
            result = multiply(result, a)
        return result if exponent >= 0 else divide(number(1), result)
    return name(Call("power", (a, b)))


def call(function: str, arguments: tuple[Sum, ...]) -> Sum | None:
    """A function of sums, worked out when it is exact on constants; None when it has no value."""
    constants = [argument.constant for argument in arguments]
    known = [constant for constant in constants if constant is not None]
    if len(known) == len(constants):
        match function:
            case "min":
                return number(min(known))
            case "max":
                return number(max(known))
            case "abs":
                return number(abs(known[0]))
            case "floor":
                return number(math.floor(known[0]))
            case "ceil":
                return number(math.ceil(known[0]))
            case "round":
                return number(nearest(known[0]))
            case "sqrt":
                if known[0] < 0:
                    return None
                root = Fraction(math.isqrt(known[0].numerator), math.isqrt(known[0].denominator))
                if root * root == known[0]:
                    return number(root)
            case "exp" if known[0] == 0:
                return number(1)
            case "ln":
                if known[0] <= 0:
                    return None
                if known[0] == 1:
                    return ZERO
    if function in ("min", "max"):
        arguments = tuple(sorted(set(arguments), key=repr))
        if len(arguments) == 1:
            return arguments[0]
    return name(Call(function, arguments))


def nearest(value: Fraction) -> int:
    """The nearest whole number, halves away from zero."""
    whole = math.floor(abs(value) + Fraction(1, 2))
    return whole if value >= 0 else -whole


def generators(a: Sum) -> frozenset[str]:
    """The names of all facts and settings inside, calls looked through."""
    found: set[str] = set()
    for monomial, _ in a.terms:
        for generator, _power in monomial:
            if isinstance(generator, str):
                found.add(generator)
            else:
                found.update(*(generators(argument) for argument in generator.arguments))
    return frozenset(found)


def is_linear(a: Sum) -> bool:
    """Whether every term is a number, or a number times one name."""
    return all(
        not monomial or (len(monomial) == 1 and monomial[0][1] == 1 and isinstance(monomial[0][0], str))
        for monomial, _ in a.terms
    )


def without_constant(a: Sum) -> Sum:
    """The sum without its constant term."""
    return Sum(tuple((monomial, value) for monomial, value in a.terms if monomial))


def constant_term(a: Sum) -> Fraction:
    """The constant term."""
    return next((value for monomial, value in a.terms if not monomial), Fraction(0))


def rename(a: Sum, names: Mapping[str, str]) -> Sum:
    """The same sum over other names."""
    result: dict[Monomial, Fraction] = {}
    for monomial, value in a.terms:
        renamed: list[tuple[Generator, int]] = []
        for generator, exponent in monomial:
            new: Generator
            if isinstance(generator, str):
                new = names[generator]
            else:
                new = Call(generator.function, tuple(rename(argument, names) for argument in generator.arguments))
            renamed.append((new, exponent))
        key = tuple(sorted(renamed, key=lambda item: _key(item[0])))
        result[key] = result.get(key, Fraction(0)) + value
    return _made(result)


def total(parts: Iterable[Sum]) -> Sum:
    """The sum of sums."""
    terms: dict[Monomial, Fraction] = {}
    for part in parts:
        for monomial, value in part.terms:
            terms[monomial] = terms.get(monomial, Fraction(0)) + value
    return _made(terms)
