"""Operations on the ends of diagrams: exact sums, or the mark of a number that could not be written out."""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from typing import Any

from samesum.evidence.routes import symbols
from samesum.evidence.routes.symbols import Sum

OPAQUE = "opaque"  # a number that could not be written out exactly
MOST_TERMS = 400  # a product whose sum has more is opaque


def negative(a: Sum) -> Sum:
    return symbols.scale(a, Fraction(-1))


def each_end(operation: Callable[[Sum], Sum | None], a: Any) -> Any:
    if a == OPAQUE:
        return OPAQUE
    result = operation(a)
    return OPAQUE if result is None else result


def arithmetic(operator: str, a: Any, b: Any) -> Any:
    if OPAQUE in (a, b):
        return OPAQUE
    operation: Callable[[Sum, Sum], Sum | None] = {
        "+": symbols.add,
        "-": symbols.subtract,
        "*": symbols.multiply,
        "/": symbols.divide,
        "^": symbols.power,
    }[operator]
    result = operation(a, b)
    if result is None or (len(result.terms) > MOST_TERMS and not symbols.is_linear(result)):
        return OPAQUE
    return result


def spread(a: Sum, operator: str) -> tuple[bool, list[Sum], str] | None:
    """A comparison of one minimum, maximum or absolute value with a number, as comparisons of its parts:
    whether all of them (else some) must hold, the parts, and the operator. None when it is no such thing."""
    terms = [(monomial, value) for monomial, value in a.terms if monomial]
    if len(terms) != 1 or len(terms[0][0]) != 1 or operator in ("=", "<>"):
        return None
    (generator, exponent), coefficient = terms[0][0][0], terms[0][1]
    if exponent != 1 or isinstance(generator, str) or generator.function not in ("min", "max", "abs"):
        return None
    arguments = list(generator.arguments)
    if generator.function == "abs":
        arguments.append(negative(arguments[0]))
    rest = Sum(tuple((monomial, value) for monomial, value in a.terms if not monomial))
    parts = [symbols.add(symbols.scale(argument, coefficient), rest) for argument in arguments]
    smallest = (generator.function == "min") == (coefficient > 0)
    return smallest == (operator in (">", ">=")), parts, operator
