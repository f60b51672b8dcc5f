"""The worst case from above: how far apart any two results of one project can lie, as a share of its reference.

Each pair of results that a project can have is one exact quotient, (one − other) / reference, over facts, settings of
the one and settings of the other. Factors that all its terms share are cancelled; its highest value is proved by
dividing the domains into boxes. What is found on the way is tried out as a project, so both ends close in.
"""

from __future__ import annotations

import math
import time
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction

import numpy as np

from samesum.evidence.routes import ranges, symbols
from samesum.evidence.routes.ranges import Bounds
from samesum.evidence.routes.symbols import Sum
from samesum.evidence.trial import intervals as iv
from samesum.evidence.trial.apart import Question, all_questions
from samesum.evidence.trial.bounds import Boxes, Ranges
from samesum.evidence.trial.dividing import Bracket, lowest_over
from samesum.evidence.trial.formulas import mini_plan_under, ratio, without
from samesum.evidence.trial.plan import Plan
from samesum.evidence.trial.values import TooMany
from samesum.evidence.trial.worst import Worst, project_of, worst_at

CLOSE = 2e-3  # how near the two ends shall come, as a share of them
MOST_BOXES = 40_000  # looked at for one pair of results

Signs = tuple[tuple[Sum, frozenset[int]], ...]


@dataclass(frozen=True, slots=True)
class Problem:
    """The quotient ``above / below`` where each sum of ``signs`` has one of its signs, and the ``first`` bound of it.
    ``names``: the codes of facts with which it comes about; ``aside``: facts that only had to have some sign, and
    have it at these values."""

    above: Sum
    below: Sum
    signs: Signs
    names: Mapping[str, int | bool]
    plan: Plan
    node: int
    conditions: tuple[int, ...]
    aside: Mapping[str, Fraction]
    first: float


@dataclass(slots=True)
class _Closing:
    """``low``: the widest spread found, ``best`` the project that has it where it was found here; ``high``: what every
    spread looked at is proved to be at most. ``proved``: bounds of one element's terms, which come up again in each."""

    low: float
    high: float
    deadline: float
    best: Worst | None = None
    proved: dict[tuple[Sum, Sum, Signs], float] = field(default_factory=dict)

    def close(self, plan: Plan) -> bool:
        """Takes the projects of the plan's size in. False where no bound was proved."""
        asked = all_questions(plan, self.deadline)
        if asked is None:
            return False
        questions, box = asked
        problems = []
        for question in questions:
            if time.monotonic() > self.deadline:
                return False
            problems.append(_posed(plan, *_quotient(question), box))
        for problem in sorted(problems, key=lambda each: -each.first):
            if problem.first <= self.high or time.monotonic() > self.deadline:
                # what comes after it is bounded by this one
                self.high = max(self.high, problem.first)
                break
            found = math.inf
            for several in (_parts(plan, problem, box), [problem]):
                if several and found > self.high * (1 + CLOSE):
                    found = min(found, self._highest(plan, several, box))
            self.high = max(self.high, self.low, found)
            if not math.isfinite(self.high):
                return False
        return math.isfinite(self.high)

    def _highest(self, plan: Plan, problems: Sequence[Problem], box: Mapping[str, Bounds]) -> float:
        """What all of the problems are proved to be at most; ``high`` at least."""
        bound = self.high
        for each in problems:
            if each.first <= bound:
                continue
            key = _of_one_element(each)
            if key is not None and key in self.proved:
                bound = max(bound, self.proved[key])
                continue
            found = _divided(each, box, bound, self.deadline)
            bound = max(bound, float(found.proved[0]))
            if key is not None:
                self.proved[key] = bound
            shown = _shown(plan, each, found)
            if shown is not None and shown.spread is not None and shown.spread > self.low:
                self.low, self.best = shown.spread, shown
        return bound


def proved_worst(plans: Iterable[Plan], low: float, deadline: float) -> tuple[float | None, Worst | None]:
    """A proved bound of the spread over all projects of the plans' sizes, None where there is none; and a project with
    a spread wider than ``low``, where one was found."""
    work = _Closing(low, low, deadline)
    proved = all(work.close(plan) for plan in plans)
    return work.high if proved else None, work.best


def _of_one_element(problem: Problem) -> tuple[Sum, Sum, Signs] | None:
    """The problem without its element's number, the same for each; None where it has several or none."""
    names = symbols.generators(problem.above) | symbols.generators(problem.below)
    elements = {name.partition("@")[2] for name in names if "@" in name}
    if len(elements) != 1 or any("@" in name for value, _ in problem.signs for name in symbols.generators(value)):
        return None
    bare = {name: name.partition("@")[0] for name in names}
    return symbols.rename(problem.above, bare), symbols.rename(problem.below, bare), problem.signs


def _quotient(question: Question) -> tuple[Sum, Sum, Signs, dict[str, int | bool]]:
    difference = symbols.subtract(question.high, question.low)
    signs = tuple((key[1], value) for key, value in question.when.items() if key[0] == "sign")
    names = {key[1]: min(value) for key, value in question.when.items() if key[0] in ("code", "flag")}
    return difference, question.reference, signs, names


def _posed(
    plan: Plan, above: Sum, below: Sum, signs: Signs, names: Mapping[str, int | bool], box: Mapping[str, Bounds]
) -> Problem:
    share = _proportion(above, below)
    above, below = (symbols.number(share), symbols.number(1)) if share is not None else ratio(above, below)
    signs, aside = _set_aside(plan, above, below, signs, box)
    made, node, conditions = mini_plan_under(plan, above, below, signs)
    value = Ranges(made, _boxes(made, box)).number(node).value
    first = float(value.high[0]) if value.low[0] <= value.high[0] else -math.inf
    first = math.inf if math.isnan(first) else first
    return Problem(above, below, signs, names, made, node, conditions, aside, first)


def _set_aside(
    plan: Plan, above: Sum, below: Sum, signs: Signs, box: Mapping[str, Bounds]
) -> tuple[Signs, dict[str, Fraction]]:
    """The signs that have to do with the quotient or with each other; and values for the names in the others."""
    asked = [symbols.generators(value) for value, _ in signs]
    used = symbols.generators(above) | symbols.generators(below)
    left, aside = [], {}
    for place, sign in enumerate(signs):
        others = used.union(*(each for other, each in enumerate(asked) if other != place))
        made, node, conditions = mini_plan_under(plan, symbols.ZERO, None, [sign])
        alone = Problem(symbols.ZERO, symbols.ZERO, (sign,), {}, made, node, conditions, {}, 0.0)
        found = _point(_divided(alone, box, -1.0, math.inf, 200)) if not asked[place] & others else {}
        if found:
            aside.update(found)
        else:
            left.append(sign)
    return tuple(left), aside


def _point(found: Bracket) -> dict[str, Fraction]:
    return {name: Fraction(float(each[0])) for name, each in found.point.items() if np.isfinite(each[0])}


def _proportion(above: Sum, below: Sum) -> Fraction | None:
    """The number k with above = k × below, where there is one."""
    if len(above.terms) != len(below.terms) or not below.terms:
        return None
    share = above.terms[0][1] / below.terms[0][1]
    return share if above == symbols.scale(below, share) else None


def _boxes(made: Plan, box: Mapping[str, Bounds]) -> Boxes:
    low, high = {}, {}
    for name in made.numeric:
        bounds = box[name]
        low[name] = np.full(1, -np.inf) if bounds.low is None else iv.exactly(bounds.low).low
        high[name] = np.full(1, np.inf) if bounds.high is None else iv.exactly(bounds.high).high
    return Boxes(1, low, high, {}, {})


def _divided(
    problem: Problem, box: Mapping[str, Bounds], known: float, deadline: float, most: int = MOST_BOXES
) -> Bracket:
    boxes = _boxes(problem.plan, box)
    names = tuple(
        name
        for name in problem.plan.numeric
        if np.isfinite(boxes.low[name][0]) and np.isfinite(boxes.high[name][0]) and boxes.low[name] < boxes.high[name]
    )
    with np.errstate(all="ignore"):
        return lowest_over(
            problem.plan, problem.node, boxes, names, deadline, CLOSE, highest=True, known=np.array([known]),
            most=most, conditions=problem.conditions,
        )  # fmt: skip


def _shown(plan: Plan, problem: Problem, found: Bracket) -> Worst | None:
    """The project at which the quotient was found highest, tried out; elements of which nothing was found are as the
    others."""
    at = _point(found)
    if not at and problem.plan.numeric:
        return None
    at.update(problem.aside)
    alike = {name.partition("@")[0]: value for name, value in at.items() if "@" in name}
    at = {name: alike[name.partition("@")[0]] for name in plan.numeric if name.partition("@")[0] in alike} | at
    try:
        return worst_at(plan, project_of(plan, at, problem.names))
    except TooMany:
        return None


# --- sums over an index ------------------------------------------------------------------------


def _parts(plan: Plan, problem: Problem, box: Mapping[str, Bounds]) -> list[Problem]:
    """A quotient of sums over elements is at most the highest quotient of one element's terms, where no element's
    part of the reference is negative (the mediant inequality); then a fact that all terms of an element share, such as
    its area, cancels. Nothing where the terms do not fall apart like that."""
    for fact in sorted({name.partition("@")[0] for name in symbols.generators(problem.below) if "@" in name}):
        for sign in (1, -1):
            above, below = (
                _by_element(symbols.scale(each, Fraction(sign)), fact) for each in (problem.above, problem.below)
            )
            if above is None or below is None or not set(above) <= set(below):
                break
            own = [(symbols.name(element), without(each, {element: 1})) for element, each in below.items()]
            reach = [ranges.bounds(each, box) for pair in own for each in pair]
            if all(each.low is not None and each.low >= 0 for each in reach):
                return [
                    _posed(plan, above.get(element, symbols.ZERO), each, problem.signs, problem.names, box)
                    for element, each in below.items()
                ]
    return []


def _by_element(a: Sum, fact: str) -> dict[str, Sum] | None:
    """The terms of each element: those that have its value of the fact as a factor, once. None where some term has
    none or several."""
    terms: dict[str, list[tuple[symbols.Monomial, Fraction]]] = {}
    for term in a.terms:
        mine = list(_mentions(term[0], fact))
        if len(mine) != 1 or mine[0] == "":
            return None
        terms.setdefault(mine[0], []).append(term)
    return {element: Sum(tuple(each)) for element, each in terms.items()}


def _mentions(monomial: symbols.Monomial, fact: str) -> Iterator[str]:
    """The elements of the fact in a monomial; "" for one that is no plain factor."""
    for generator, power in monomial:
        if isinstance(generator, str):
            if generator.partition("@")[0] == fact:
                yield generator if power == 1 else ""
        elif any(_has(each, fact) for each in generator.arguments):
            yield ""


def _has(a: Sum, fact: str) -> bool:
    return any(name.partition("@")[0] == fact for name in symbols.generators(a))


def sizes_below(most: Sequence[tuple[str, int]]) -> list[dict[str, int]]:
    """Every size of project but the largest: so many elements of each index, one at least."""
    found: list[dict[str, int]] = [{}]
    for name, count in most:
        found = [{**each, name: number} for each in found for number in range(1, count + 1)]
    return found[:-1]
