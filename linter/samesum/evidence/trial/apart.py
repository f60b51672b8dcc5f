"""Whether two ways to the result can lie further apart than a share of the reference.

Two copies of the ways share the facts and nothing else; the solver (z3) says whether some project takes both.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Any

from samesum.evidence.routes import solver as s
from samesum.evidence.routes import symbols
from samesum.evidence.routes.ranges import Bounds
from samesum.evidence.routes.symbols import Sum
from samesum.evidence.trial.plan import Plan
from samesum.evidence.trial.ways import ALL_SIGNS, Answer, Conditions, Executor, TooManyWays, Way, merged

MOST_QUESTIONS = 4_000


@dataclass(frozen=True, slots=True)
class Apart:
    """``answer``: whether some project has two results further apart than a share of the reference; ``point`` gives
    its numeric facts and ``names`` its named ones, {name: code or yes/no}."""

    answer: Answer
    point: Mapping[str, Fraction] = field(default_factory=dict)
    names: Mapping[str, int | bool] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Question:
    """Two results that one project can have, ``high`` and ``low``, its ``reference``, and under ``when``."""

    when: Conditions
    high: Sum
    low: Sum
    reference: Sum


def all_questions(plan: Plan, deadline: float) -> tuple[list[Question], dict[str, Bounds]] | None:
    """Every pair of results that one project can have, and the domains of the names in them; settings of ``low`` end
    in ``'``, those of the reference are numbers. None when there are too many."""
    box: dict[str, Bounds] = {}
    try:
        first = Executor(plan, False, "", box, deadline).result()
        second = Executor(plan, False, "'", box, deadline).result()
        references = Executor(plan, True, "", box, deadline).result()
        return list(_questions(first, second, references)), box
    except TooManyWays:
        return None


def further_apart(plan: Plan, tolerance: Fraction, deadline: float) -> Apart:
    """Whether results can lie further apart than ``tolerance`` × |reference|, by the solver. "no" is a proof."""
    asked = all_questions(plan, deadline)
    if asked is None:
        return Apart("cannot tell")
    questions, box = asked
    answer: Answer = "no"
    solver = s.Solver(box, deadline)
    for each in questions:
        found = _ask(solver, plan, each.when, each.high, each.low, each.reference, tolerance)
        if found.answer == "yes":
            return found
        if found.answer == "cannot tell":
            answer = "cannot tell"
    return Apart(answer)


def _questions(first: Sequence[Way], second: Sequence[Way], references: Sequence[Way]) -> Iterator[Question]:
    count = 0
    for one in first:
        for other in second:
            if one.value == other.value:
                continue
            for both in merged(one.when, [other.when]):
                for reference in references:
                    for when in merged(both, [reference.when]):
                        count += 1
                        if count > MOST_QUESTIONS:
                            raise TooManyWays
                        yield Question(when, one.value, other.value, reference.value)


def _ask(
    solver: s.Solver, plan: Plan, when: Conditions, high: Sum, low: Sum, reference: Sum, tolerance: Fraction
) -> Apart:
    codes = {name: min(value) for (kind, name), value in when.items() if kind in ("code", "flag")}
    signs = [(key[1], value) for key, value in when.items() if key[0] == "sign"]
    difference = symbols.subtract(high, low)
    answer: Answer = "no"
    for side in (1, -1):
        beyond = symbols.subtract(difference, symbols.scale(reference, tolerance * side))
        assumed = [_signed(solver, value, allowed) for value, allowed in signs]
        assumed.append(solver.sign(beyond, s.POSITIVE))
        if tolerance:
            assumed.append(solver.negated(solver.sign(reference, s.NEGATIVE if side > 0 else s.POSITIVE)))
        found = solver.check(*assumed)
        if found == "yes":
            return Apart("yes", solver.point(), codes)
        if found == "cannot tell":
            answer = "cannot tell"
        if not tolerance:
            break
    return Apart(answer)


def _signed(solver: s.Solver, value: Sum, allowed: frozenset[int]) -> Any:
    told = {-1: s.NEGATIVE, 0: s.ZERO, 1: s.POSITIVE}
    if len(allowed) == 1:
        return solver.sign(value, told[next(iter(allowed))])
    [other] = ALL_SIGNS - allowed
    return solver.negated(solver.sign(value, told[other]))
