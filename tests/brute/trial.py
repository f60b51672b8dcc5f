"""The figures of ``trial`` for one project, from every evaluation of it.

The meaning that is followed here, beyond the page on the program's answers:

* The project's facts are given; so are settings and judgements that the case states. A list shorter than its
  index makes a project with fewer elements.
* Routes, lowest and highest are over complete evaluations that are inside the rulebook.
* The reference policy takes, at a choice, the open option that comes first among: the option marked
  ``reference``, those with an ``error`` by its size, the others as written; at an overlap the first open branch.
  Judgements and yes/no settings are yes, numeric settings half-way, named ones their first value, unless given.
* swing: the largest |result - reference| / |reference| over evaluations in which one branch point alone takes another
  of its open branches, all else keeping to the policy, with human inputs at their reference; or in which one setting or
  judgement alone has another value.
* left_if_closed: the spread that is left over evaluations in which one branch point keeps to the policy
  wherever it is reached; or in which one setting or judgement has its reference value.

A numeric setting is tried at the points that tell conditions apart, at both ends and in the middle. That
finds the extremes of results that are linear in each setting where conditions do not depend on it.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from itertools import product

import numpy as np

from brute.evaluate import Array, Evaluator, Pass
from brute.points import FACT, Points, representative, variables
from brute.rulebooks import Body, Choice, Follows, OneOf, Range, Rulebook, at
from brute.taking import preference, prescribed

Given = Fraction | str | bool
Case = Mapping[str, Given | Sequence[Given]]


@dataclass(frozen=True)
class Extreme:
    value: float
    route: dict[str, str]


@dataclass(frozen=True)
class Trial:
    """``outside``: some ``applies when`` fails whatever is decided; then nothing else is said. ``results``
    are the different results after rounding. ``reference`` is None where the policy ends in a gap."""

    outside: bool
    routes: int = 0
    results: tuple[float, ...] = ()
    lowest: Extreme | None = None
    highest: Extreme | None = None
    reference: Extreme | None = None
    swing: tuple[tuple[str, float], ...] = ()
    left_if_closed: tuple[tuple[str, float], ...] = ()

    @property
    def spread(self) -> float | None:
        """(highest − lowest) / |reference|; None without a reference other than zero."""
        if self.reference is None or self.reference.value == 0 or self.lowest is None or self.highest is None:
            return None
        return (self.highest.value - self.lowest.value) / abs(self.reference.value)


def trial(rulebook: Rulebook, case: Case) -> Trial:
    """All figures for one case. Raises ``TooLarge`` where listing would be too much."""
    rulebook, given = project(rulebook, case)
    points = _rows(rulebook, given)
    evaluator = Evaluator(rulebook, points)
    passes = list(evaluator.passes())
    if not any((one.mask & one.inside).any() for one in passes):
        return Trial(True)
    found = [_Route(one, evaluator) for one in passes if one.complete.any()]
    if not found:
        return Trial(False)
    return _figures(rulebook, found, _at_reference(rulebook, given, points))


def _figures(rulebook: Rulebook, found: list[_Route], inputs: dict[str, Array]) -> Trial:
    """``inputs``: for each human input that is free the points at which it stands as the policy has it."""
    at_reference = np.logical_and.reduce([np.ones(len(found[0].values), dtype=bool), *inputs.values()])
    references = [(r, v) for r in found for v in r.values[r.complete & at_reference & ~r.strays.any(axis=0)]]
    reference = Extreme(float(references[0][1]), references[0][0].states) if references else None
    lowest = min(found, key=lambda r: r.low)
    highest = max(found, key=lambda r: r.high)
    swing: list[tuple[str, float]] = []
    left: list[tuple[str, float]] = []
    if reference is not None and reference.value:
        size = abs(reference.value)
        for id in sorted({id for route in found for id in route.ids}):
            alone = [v for r in found for v in r.values[r.complete & at_reference & r.only(id)]]
            swing.append((id, max((abs(v - reference.value) / size for v in alone), default=0.0)))
            kept = [v for r in found for v in r.values[r.complete & ~r.strays_at(id)]]
            left.append((id, (max(kept) - min(kept)) / size if kept else 0.0))
        for name, usual in inputs.items():
            others = [at_ for other, at_ in inputs.items() if other != name]
            there = np.logical_and.reduce([~usual, *others])
            alone = [v for r in found for v in r.values[r.complete & there & ~r.strays.any(axis=0)]]
            swing.append((name, max((abs(v - reference.value) / size for v in alone), default=0.0)))
            kept = [v for r in found for v in r.values[r.complete & usual]]
            left.append((name, (max(kept) - min(kept)) / size if kept else 0.0))
    return Trial(
        False,
        len(found),
        tuple(sorted({v for r in found for v in rounded(r.values[r.complete], rulebook)})),
        Extreme(lowest.low, lowest.states),
        Extreme(highest.high, highest.states),
        reference,
        tuple(swing),
        tuple(left),
    )


class _Route:
    """A complete route: where it is open, its values, and where each of its branch points strays from the
    reference policy."""

    def __init__(self, one: Pass, evaluator: Evaluator) -> None:
        self.states = {id: branch for id, branch in one.states.items() if branch is not None}
        self.complete = one.complete
        self.values = np.zeros(len(one.mask)) + one.result.it
        self.low = float(self.values[self.complete].min())
        self.high = float(self.values[self.complete].max())
        self.ids = list(self.states)
        self.strays = np.array(
            [_stray(evaluator.written[id], self.states[id], one.asked[id][1]) for id in self.ids]
        ).reshape(len(self.ids), len(one.mask))

    def strays_at(self, id: str) -> Array:
        return self.strays[self.ids.index(id)] if id in self.ids else np.zeros(len(self.values), dtype=bool)

    def only(self, id: str) -> Array:
        """Where the branch point strays and no other does."""
        return self.strays_at(id) & (self.strays.sum(axis=0) == 1)


def _stray(body: Body, taken: str, open_: dict[str, Array]) -> Array:
    better: Array = np.zeros(len(open_[taken]), dtype=bool)
    if isinstance(body, Follows) or (isinstance(body, Choice) and body.takes):
        return better
    for name in preferred(body, list(open_)):
        if name == taken:
            break
        better = better | open_[name]
    return better


def preferred(body: Body, names: list[str]) -> list[str]:
    """The branches in the order in which the reference policy takes them."""
    if not isinstance(body, Choice):
        return names
    return [option.name for option in preference(body)]


def rounded(values: Array, rulebook: Rulebook) -> list[float]:
    """After the result's own rounding. A value within a billionth of a step's end is taken to stand on it;
    halves are rounded away from zero."""
    if not rulebook.rounding:
        return [float(f"{v:.9g}") for v in values]
    steps = np.asarray(values) / float(rulebook.step)
    near = np.round(steps * 2) / 2
    steps = np.where(np.abs(steps - near) < 1e-9, near, steps)
    if rulebook.rounding == "nearest":
        whole = np.copysign(np.floor(np.abs(steps) + 0.5), steps) + 0.0
    else:
        whole = np.floor(steps) if rulebook.rounding == "down" else np.ceil(steps)
    return [float(v) for v in whole * float(rulebook.step)]


# --- the project ---------------------------------------------------------------------------


def project(rulebook: Rulebook, case: Case) -> tuple[Rulebook, dict[str, Fraction | int | bool]]:
    """The rulebook with as many elements as the case has, and the values of the case and of what the rulebook takes, by
    name of element."""
    sizes = {f.index: len(value) for f in rulebook.facts if f.index and isinstance(value := case[f.name], list | tuple)}
    indices = tuple(replace(i, most=sizes.get(i.name, i.most)) for i in rulebook.indices)
    rulebook = replace(rulebook, indices=indices)
    domains = {d.name: d.domain for d in (*rulebook.facts, *rulebook.settings)}
    given = prescribed(rulebook)
    for name, value in case.items():
        listed = isinstance(value, list | tuple)
        for element, one in enumerate(value if listed else [value], start=1):
            domain = domains.get(name)
            inner = domain.values.index(one) if isinstance(domain, OneOf) else one
            given[at(name, element) if listed else name] = inner
    return rulebook, given


def _rows(rulebook: Rulebook, given: dict[str, Fraction | int | bool]) -> Points:
    """The points that tell conditions apart, and every combination of ends and middles."""
    few = representative(rulebook, given)
    options: dict[str, list[float | int | bool]] = {}
    for name, domain, _ in variables(rulebook):
        if name in given:
            options[name] = [float(given[name]) if isinstance(domain, Range) else given[name]]
        elif isinstance(domain, Range):
            assert domain.low is not None and domain.high is not None
            options[name] = [float(domain.low), float((domain.low + domain.high) / 2), float(domain.high)]
        else:
            options[name] = list(range(len(domain.values))) if isinstance(domain, OneOf) else [True, False]
    more = list(product(*options.values()))
    columns = {
        name: np.concatenate([few.columns[name], np.array([row[k] for row in more])]) for k, name in enumerate(options)
    }
    rows = few.rows + len(more)
    return Points(columns, rows, np.array([0]), np.arange(rows))


def _at_reference(rulebook: Rulebook, given: Mapping[str, Fraction | int | bool], points: Points) -> dict[str, Array]:
    """Where each free human input stands as the reference policy has it."""
    found: dict[str, Array] = {}
    for name, domain, group in variables(rulebook):
        if group == FACT or name in given:
            continue
        middle: float | int | bool = True
        if isinstance(domain, Range) and domain.low is not None and domain.high is not None:
            middle = float((domain.low + domain.high) / 2)
        elif isinstance(domain, OneOf):
            middle = 0
        found[name] = points.columns[name] == middle
    return found
