"""The figures of ``count``, from every evaluation.

The meaning that is followed here, beyond the language's own page (see also ``evaluate``):

* A branch is dead (never of ``follows``) when no evaluation inside the rulebook takes it, although one reaches its
  branch point with every question answered; a branch point that is never reached so has no dead branches.
* Only complete evaluations are routes: no gap and nothing stuck anywhere.
* on_paper: conditions are neither asked nor obeyed, ``applies`` and missing rows do not matter; branch points are
  reached through bodies and ``follows`` alone.
* developer_most: each choice of the verifier or the programme has one would-be option, fixed
  like their settings and judgements; a route that reaches it takes that option or does not exist.
* over_periods_most: facts are fixed over the periods, human inputs are free in each; for each combination of
  states (a branch or not reached) of the branch points fixed at validation the number of
  routes with it to the power of the periods; their sum, at the project where it is largest. ``follows`` and
  cases are not fixed themselves.
* free_values: settings mentioned in a formula (also as a table's argument) that is evaluated on the way to the
  result, through formulas only and not through conditions, on some complete route.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from itertools import combinations, product

import numpy as np

from brute.evaluate import MOST_ROUTES, Array, Elements, Evaluator, Pass, names
from brute.linear import TooLarge
from brute.points import Points, representative
from brute.rulebooks import (
    Body,
    Call,
    Cases,
    Choice,
    Expression,
    Follows,
    Formula,
    Lookup,
    Neg,
    Op,
    Over,
    Ref,
    Rulebook,
    at,
    branches,
)

Route = dict[str, str]


@dataclass(frozen=True)
class Counts:
    """The figures of ``count``; overlaps are (branch point, branch, branch) and dead branches
    (branch point, branch), each kind sorted."""

    on_paper: int
    reachable: int
    per_project_most: int
    per_project_least: int
    developer_most: int
    over_periods_most: int
    overlaps: tuple[tuple[str, str, str], ...]
    gaps: tuple[str, ...]
    dead_branches: tuple[tuple[str, str], ...]
    free_values: tuple[str, ...]


def count(rulebook: Rulebook) -> Counts:
    """All figures of ``count`` by listing. Raises ``TooLarge`` where that would be too much."""
    paper = on_paper(rulebook)
    points = representative(rulebook)
    evaluator = Evaluator(rulebook, points)
    found = _Found()
    routes: list[Route] = []
    open_at: list[Array] = []
    counted = np.zeros(points.rows, dtype=bool)
    values: set[str] = set()
    for one in evaluator.passes():
        inside = one.mask & one.inside
        if not inside.any():
            continue
        counted |= inside
        found.look(one, inside, evaluator)
        complete = one.complete
        if complete.any():
            routes.append({id: branch for id, branch in one.states.items() if branch is not None})
            open_at.append(complete)
            values |= _reaching(rulebook, routes[-1])
    most, least, developer, periods = _per_project(evaluator, points, routes, open_at, counted)
    return Counts(
        on_paper=paper,
        reachable=len(routes),
        per_project_most=most,
        per_project_least=least,
        developer_most=developer,
        over_periods_most=periods,
        overlaps=tuple(sorted(found.overlaps)),
        gaps=tuple(sorted(found.gaps)),
        dead_branches=tuple(sorted((id, b) for id, all_ in found.branches.items() for b in all_ - found.taken[id])),
        free_values=tuple(sorted(values)),
    )


def per_project(rulebook: Rulebook) -> tuple[int, int, int, int]:
    """per_project_most, per_project_least, developer_most and over_periods_most; also of a rulebook in which
    nobody makes some choice, whose other figures depend on how that is written out as cases."""
    points = representative(rulebook)
    evaluator = Evaluator(rulebook, points)
    routes: list[Route] = []
    open_at: list[Array] = []
    counted = np.zeros(points.rows, dtype=bool)
    for one in evaluator.passes():
        counted |= one.mask & one.inside
        if one.complete.any():
            routes.append({id: branch for id, branch in one.states.items() if branch is not None})
            open_at.append(one.complete)
    return _per_project(evaluator, points, routes, open_at, counted)


@dataclass
class _Found:
    """Gaps, overlaps and branches taken, over all evaluations."""

    overlaps: set[tuple[str, str, str]] = field(default_factory=set)
    gaps: set[str] = field(default_factory=set)
    branches: dict[str, set[str]] = field(default_factory=dict)
    taken: dict[str, set[str | None]] = field(default_factory=dict)

    def look(self, one: Pass, inside: Array, evaluator: Evaluator) -> None:
        self.gaps.update(gaps(one, inside))
        for id, (has, open_) in one.asked.items():
            here = inside if has is None else inside & has
            if not here.any():
                continue
            body = evaluator.written[id]
            if not isinstance(body, Follows):
                self.branches.setdefault(id, set(open_))
                self.taken.setdefault(id, set()).add(one.states[id])
            self.overlaps |= {(id, a, b) for a, b in overlapping(body, open_, here)}


def gaps(one: Pass, where: Array) -> dict[str, Array]:
    """Where in ``where`` this evaluation has a gap, by the id it is reported under."""
    found: dict[str, Array] = {}
    for id, (has, open_) in one.asked.items():
        if one.states[id] is None:
            here = where & ~np.logical_or.reduce(list(open_.values()))
            found[id] = here if has is None else here & has
    for id, lacking in one.missing:
        if id:
            found[id] = found.get(id, False) | lacking & where
    return {id: here for id, here in found.items() if here.any()}


def overlapping(body: Body, open_: dict[str, Array], where: Array) -> dict[tuple[str, str], Array]:
    """Where in ``where`` two branches of plain cases are open together, by the two."""
    if not isinstance(body, Cases) or body.in_order:
        return {}
    found = {(a, b): where & open_[a] & open_[b] for a, b in combinations(open_, 2)}
    return {pair: here for pair, here in found.items() if here.any()}


def _per_project(
    evaluator: Evaluator, points: Points, routes: list[Route], open_at: list[Array], counted: Array
) -> tuple[int, int, int, int]:
    """Most and fewest routes open to one project, the developer's most, and the most over the periods."""
    eligible = np.logical_or.reduceat(counted, points.projects)
    if not eligible.any() or not routes:
        return 0, 0, 0, 0
    table = np.array(open_at)
    projects = np.logical_or.reduceat(table, points.projects, axis=1)[:, eligible]
    totals = projects.sum(axis=0)
    fixed = np.logical_or.reduceat(table, points.fixed, axis=1)
    choices = {id: body for id, body in evaluator.written.items() if isinstance(body, Choice) and not body.takes}
    chosen = {id for id, body in choices.items() if body.by != "developer"}
    developer = max(_best([routes[k] for k in np.flatnonzero(one)], chosen) for one in _different(fixed))
    validation = [id for id, body in choices.items() if body.timing == "validation"]
    n = evaluator.rulebook.periods
    periods = 0
    for one in _different(projects):
        states: dict[tuple[str | None, ...], int] = {}
        for k in np.flatnonzero(one):
            state = tuple(routes[k].get(id) for id in validation)
            states[state] = states.get(state, 0) + 1
        periods = max(periods, sum(several**n for several in states.values()))
    return int(totals.max()), int(totals.min()), developer, periods


def _different(table: Array) -> Array:
    return np.unique(table.T, axis=0)


def _best(routes: list[Route], chosen: set[str]) -> int:
    """How many of ``routes`` there are at most when each branch point of ``chosen`` has one option."""
    ids = sorted({id for route in routes for id in route} & chosen)
    options = [sorted({route[id] for route in routes if id in route}) for id in ids]
    best = 0
    for taken in product(*options):
        would = dict(zip(ids, taken, strict=True))
        best = max(best, sum(all(route.get(id, option) == option for id, option in would.items()) for route in routes))
    return best


def _reaching(rulebook: Rulebook, route: Route) -> set[str]:
    """Settings whose value flows into the result on a complete route, formula by formula."""
    settings = {s.name for s in rulebook.settings}
    quantities = {q.name: q for q in rulebook.quantities}
    found: set[str] = set()
    done: set[str] = set()

    def follow(name: str, elements: Elements) -> None:
        quantity = quantities[name]
        element = elements[quantity.index] if quantity.index else 0
        id = at(name, element)
        if id in done:
            return
        done.add(id)
        body = quantity.body
        while not isinstance(body, Formula):
            taken = route[id]
            id, body = f"{id}/{taken}", next(inner for branch, _, inner in branches(body) if branch == taken)
        look(body.expression, {quantity.index: element} if quantity.index else {})

    def look(e: Expression, elements: Elements) -> None:
        if isinstance(e, Ref) and e.name in quantities:
            follow(e.name, elements)
        elif isinstance(e, Over):
            for element in rulebook.elements(e.index):
                look(e.body, {**elements, e.index: element})
        elif isinstance(e, Op):
            look(e.left, elements)
            look(e.right, elements)
        elif isinstance(e, Neg):
            look(e.operand, elements)
        elif isinstance(e, Call | Lookup):
            for argument in e.arguments:
                look(argument, elements)
        else:
            found.update(settings & set(names(e)))

    follow(rulebook.result, {})
    return found


# --- on paper ----------------------------------------------------------------------------


def on_paper(rulebook: Rulebook) -> int:
    """Routes when conditions are neither asked nor obeyed, by taking each in turn."""
    count = 0
    waiting: list[tuple[str, ...]] = [()]
    while waiting:
        script = waiting.pop()
        waiting += _Paper(rulebook, script).others
        count += 1
        if count > MOST_ROUTES:
            raise TooLarge("too many routes on paper")
    return count


class _Paper:
    """One evaluation on paper: the branches of ``script`` first, then always the first one.
    ``others`` are the scripts of those that turn off this one."""

    def __init__(self, rulebook: Rulebook, script: tuple[str, ...]) -> None:
        self.rulebook = rulebook
        self.quantities = {q.name: q for q in rulebook.quantities}
        self.script, self.step = script, 0
        self.others: list[tuple[str, ...]] = []
        self.states: Route = {}
        self.done: set[str] = set()
        self.evaluate(rulebook.result, {})

    def evaluate(self, name: str, elements: Elements) -> None:
        quantity = self.quantities[name]
        element = elements[quantity.index] if quantity.index else 0
        id, body = at(name, element), quantity.body
        if id in self.done:
            return
        self.done.add(id)
        inside = {quantity.index: element} if quantity.index else {}
        while not isinstance(body, Formula):
            taken = self.reach(id, body, inside)
            id, body = f"{id}/{taken}", next(inner for branch, _, inner in branches(body) if branch == taken)
        self.mention(body.expression, inside)

    def reach(self, id: str, body: Body, elements: Elements) -> str:
        if id not in self.states:
            if isinstance(body, Follows):
                target = self.quantities[body.quantity]
                element = elements[target.index] if target.index else 0
                inside = {target.index: element} if target.index else {}
                self.states[id] = self.reach(at(target.name, element), target.body, inside)
            else:
                options = [name for name, _, _ in branches(body)]
                if self.step == len(self.script):
                    self.others += [(*self.script, name) for name in options[1:]]
                    self.script = (*self.script, options[0])
                self.states[id] = self.script[self.step]
                self.step += 1
        return self.states[id]

    def mention(self, e: Expression, elements: Elements) -> None:
        if isinstance(e, Ref) and e.name in self.quantities:
            self.evaluate(e.name, elements)
        elif isinstance(e, Over):
            for element in self.rulebook.elements(e.index):
                self.mention(e.body, {**elements, e.index: element})
        elif isinstance(e, Op):
            self.mention(e.left, elements)
            self.mention(e.right, elements)
        elif isinstance(e, Neg):
            self.mention(e.operand, elements)
        elif isinstance(e, Call | Lookup):
            for argument in e.arguments:
                self.mention(argument, elements)
