"""How many routes: every figure of ``samesum count``, as exact whole numbers.

Each figure is one chain of eliminations on the network (see ``diagrams``):

* ``reachable``: project facts and human inputs out, then sum over states;
* ``per_project_*``: project human inputs out, sum over states, then the most or least over facts;
* ``developer_most``: the same, with what the verifier or the programme decides among the facts;
* ``over_periods_most``: human inputs out, sum over states that are free again each period, to the
  power of the periods, sum over states fixed at validation, then the most over facts.

A condition that was neither shown nor refuted makes two networks of one: with it taken either
way (upper bounds) and with it held against the route (lower bounds).
"""

from __future__ import annotations

import sys
import time
from collections.abc import Iterable, Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, field

from samesum.evidence.routes.diagrams import OUTSIDE, Limits, OutOfLimits
from samesum.evidence.routes.eliminating import Eliminated, eliminate, number, read_back
from samesum.evidence.routes.layout import ALL_BUT_DEVELOPER, EVERYTHING, NOTHING, Given, Layout
from samesum.evidence.routes.network import Network, complete_factors, cone
from samesum.evidence.routes.relating import build_network
from samesum.evidence.routes.witness import Witness, witness_from
from samesum.graph import DecisionGraph, mentions

FIGURES = (
    "on_paper",
    "reachable",
    "per_project_most",
    "per_project_least",
    "developer_most",
    "over_periods_most",
)


@dataclass(frozen=True, slots=True)
class Counts:
    """The figures of ``count``. Where ``exact`` is False the figures are upper bounds and ``at_least``
    holds the lower ones. ``most_at`` and ``least_at`` are projects that have the most and the fewest routes."""

    on_paper: int
    reachable: int
    per_project_most: int
    per_project_least: int
    developer_most: int
    over_periods_most: int
    exact: bool
    at_least: Mapping[str, int]
    periods: int
    free_values: tuple[str, ...]
    most_at: Witness | None = None
    least_at: Witness | None = None
    why_inexact: tuple[str, ...] = ()


@contextmanager
def deep() -> Iterator[None]:
    """Room for recursion over long chains of variables."""
    before = sys.getrecursionlimit()
    sys.setrecursionlimit(max(before, 50_000))
    try:
        yield
    finally:
        sys.setrecursionlimit(before)


@dataclass(slots=True)
class Side:
    """One of the two networks: what is admitted when something could not be told."""

    network: Network
    loose: bool
    factors: list[int] = field(default_factory=list)


def count(graph: DecisionGraph, seconds: float = 10.0, network: Network | None = None) -> Counts:
    """All figures of a rulebook with a result. ``seconds`` bounds the work; what could not be
    counted in time becomes a bracket. ``network`` may be handed in when it was built already."""
    deadline = time.monotonic() + seconds
    with deep():
        paper = _on_paper(graph, Limits(deadline))
        try:
            if network is None:
                network = build_network(graph, Limits(deadline))
        except OutOfLimits:
            network = None
        if network is None:
            known = {} if paper is None else {"on_paper": paper}
            reason = "the conditions are too many or too entangled for the limits"
            names = tuple(each.name for each in graph.model.settings)
            return _assembled(graph, names, known, dict(known), [reason], {})
        network.diagrams.limits.deadline = max(network.diagrams.limits.deadline, deadline)
        return _count(graph, network, paper, deadline)


def _on_paper(graph: DecisionGraph, limits: Limits) -> int | None:
    try:
        network = build_network(graph, limits, on_paper=True)
        levels = [each.level for each in network.points.values()]
        found: int = number(network.diagrams, eliminate(network.diagrams, complete_factors(network), levels, "sum"))
        return found
    except OutOfLimits:
        return None


def _count(graph: DecisionGraph, network: Network, paper: int | None, deadline: float) -> Counts:
    upper: dict[str, int] = {}
    lower: dict[str, int] = {}
    reasons: list[str] = []
    certain = not network.unsure and all(each.listing.complete and not each.listing.open for each in network.groups)
    if network.unsure:
        reasons.append("a condition compares a number that could not be written out for every route")
    if any(not each.listing.complete or each.listing.open for each in network.groups):
        reasons.append("comparisons of several facts could not all be decided in the time given")
    witnesses: dict[str, Witness | None] = {}
    base = network.diagrams.limits.nodes
    remaining = len(FIGURES) - 1
    for name in FIGURES[1:]:
        share = (deadline - time.monotonic()) / remaining if remaining else 0
        remaining -= 1
        for loose in (True, False) if not certain else (True,):
            limits = network.diagrams.limits
            limits.deadline = min(deadline, time.monotonic() + max(share * (1.0 if certain else 0.5), 0.05))
            limits.nodes = len(network.diagrams.level) + base // 2
            try:
                value, exact, witness = _figure(name, Side(network, loose))
            except OutOfLimits:
                reasons.append("counting ran into its limits")
                continue
            if not exact and certain:
                reasons.append("what a setting can bring about beside a fact could not be told for every project")
            if value is None:  # no project was shown to be inside: nothing is known on this side
                continue
            if exact and name in ("per_project_most", "per_project_least"):
                witnesses[name] = witness
            if exact or (loose != (name == "per_project_least")):
                upper[name] = value
            if exact or (loose == (name == "per_project_least")):
                lower[name] = value
            if exact:
                break
    if paper is None:
        reasons.append("counting ran into its limits")
    else:
        upper["on_paper"] = lower["on_paper"] = paper
    return _assembled(graph, free_values(network), upper, lower, reasons, witnesses)


def _assembled(
    graph: DecisionGraph,
    free: tuple[str, ...],
    upper: dict[str, int],
    lower: dict[str, int],
    reasons: Sequence[str],
    witnesses: Mapping[str, Witness | None],
) -> Counts:
    ceiling = all_states(graph)
    periods = graph.model.periods
    for name in FIGURES:
        most = ceiling**periods if name == "over_periods_most" else ceiling
        upper.setdefault(name, most)
        lower.setdefault(name, 0)
    # what one project has is reachable, and the other way round; what the developer alone has is open to the project
    upper["per_project_most"] = min(upper["per_project_most"], upper["reachable"])
    upper["developer_most"] = min(upper["developer_most"], upper["per_project_most"])
    upper["over_periods_most"] = min(upper["over_periods_most"], upper["per_project_most"] ** periods)
    upper["per_project_least"] = min(upper["per_project_least"], upper["per_project_most"])
    lower["per_project_most"] = max(lower["per_project_most"], lower["developer_most"], min(lower["reachable"], 1))
    lower["over_periods_most"] = max(lower["over_periods_most"], lower["per_project_most"])
    lower["reachable"] = max(lower["reachable"], lower["per_project_most"])
    exact = all(upper[name] == lower[name] for name in FIGURES)
    return Counts(
        on_paper=upper["on_paper"],
        reachable=upper["reachable"],
        per_project_most=upper["per_project_most"],
        per_project_least=upper["per_project_least"],
        developer_most=upper["developer_most"],
        over_periods_most=upper["over_periods_most"],
        exact=exact,
        at_least={} if exact else dict(lower),
        periods=periods,
        free_values=free,
        most_at=witnesses.get("per_project_most"),
        least_at=witnesses.get("per_project_least"),
        why_inexact=() if exact else tuple(dict.fromkeys(reasons)),
    )


def all_states(graph: DecisionGraph) -> int:
    """More routes than there can be: every branch point in any of its branches, or not reached."""
    result = 1
    for point in graph.branch_points.values():
        if point.kind != "follows":
            result *= len(point.branches) + 1
    return result


# --- one figure --------------------------------------------------------------------------


def _figure(name: str, side: Side) -> tuple[int | None, bool, Witness | None]:
    """The figure on one side (None when it says nothing), and whether it is exact (then both sides are equal)."""
    if name == "reachable":
        value, exact = _reachable(side)
        return value, exact, None
    return per_project(side, name, ALL_BUT_DEVELOPER if name == "developer_most" else NOTHING)


def _reachable(side: Side) -> tuple[int, bool]:
    network = side.network
    d = network.diagrams
    layout = Layout.of(network, EVERYTHING, side.loose)
    factors = complete_factors(network) + list(layout.projects) + list(layout.inputs)
    factors = eliminate(d, factors, layout.unsure, "exists" if side.loose else "all")
    factors = eliminate(d, factors, [*layout.humans, *layout.facts], "exists")
    factors = eliminate(d, factors, layout.states, "sum")
    return int(number(d, factors)), layout.exact


def per_project(side: Side, name: str, given: Given) -> tuple[int | None, bool, Witness | None]:
    """A figure of one project when what is ``given`` counts as a fact: the figure on this side (None when there is
    no project on it), whether it is exact, and a project that has it. ``name`` is any figure but ``on_paper`` and
    ``reachable``."""
    network = side.network
    d = network.diagrams
    least = name == "per_project_least"
    generous = side.loose != least
    layout = Layout.of(network, given, side.loose, generous)
    if least and generous and layout.inputs and not layout.exact:
        return None, False, None  # generous inputs are tied to no project, so that the fewest may be too few
    trail: list[Eliminated] = []
    factors = complete_factors(network) + list(layout.inputs)
    extra: list[int] = []
    if given != NOTHING:
        linked, extra = _held(network, given)
        factors += linked
    factors = eliminate(d, factors, layout.unsure, "exists" if generous else "all", trail)
    factors = eliminate(d, factors, layout.humans, "exists", trail)
    if name == "over_periods_most" and network.graph.model.periods > 1:
        fixed = {
            each.level
            for each in network.points.values()
            if each.point.kind == "choice" and each.point.timing == "validation"
        }
        factors = eliminate(d, factors, [level for level in layout.states if level not in fixed], "sum", trail)
        periods = network.graph.model.periods
        factors = [d.map(f"power {periods}", lambda x: x**periods, factor) for factor in factors]
        factors = eliminate(d, factors, sorted(fixed), "sum", trail)
    else:
        factors = eliminate(d, factors, layout.states, "sum", trail)
    domain = _domain(network, layout, side.loose)
    if least:
        outside = [d.map("outside", lambda x: 1 if x else OUTSIDE, each) for each in (*domain, *layout.projects)]
        remaining = eliminate(d, [*factors, *outside], [*layout.facts, *extra], "least", trail)
    else:
        remaining = eliminate(d, [*factors, *domain, *layout.projects], [*layout.facts, *extra], "most", trail)
    value = number(d, remaining)
    if value == OUTSIDE:
        return 0 if side.loose or layout.exact else None, layout.exact, None
    witness = None
    if layout.exact and name in ("per_project_most", "per_project_least") and (value or least):
        found = read_back(d, trail)
        if not value:  # a project without a route: its facts are the witness
            found = {level: each for level, each in found.items() if level in layout.facts}
        witness = witness_from(network, found)
    return int(value), layout.exact, witness


def _held(network: Network, given: Given) -> tuple[list[int], list[int]]:
    """What somebody else chooses, as a fact: a variable for the branch, tied to the state."""
    d = network.diagrams
    factors: list[int] = []
    levels: list[int] = []
    for each in network.points.values():
        if each.point.general_id in given.points or (each.point.kind == "choice" and each.point.by in given.deciders):
            level = each.level - 2
            count = len(each.open)
            d.size[level] = count
            levels.append(level)
            same = d.some(d.both(d.literal(each.level, (k,)), d.literal(level, (k,))) for k in range(count))
            free = d.literal(each.level, (each.not_reached, each.stuck))
            factors.append(d.numbers(d.either(same, free)))
    return factors, levels


def _domain(network: Network, layout: Layout, loose: bool) -> list[int]:
    """Projects inside the rulebook: those for which somebody's decisions make it apply. ``loose`` admits those for
    which that could not be told."""
    d = network.diagrams
    if not network.applies:
        return []
    factors = [*map(d.numbers, network.applies), *cone(network, network.applies)]
    relevant = {level for factor in factors for level in d.support(factor)}
    inputs = [each for each in layout.inputs if d.support(each) & relevant]
    levels = {level for factor in (*factors, *inputs) for level in d.support(factor)} - set(layout.facts)
    unsure = levels & set(layout.unsure)
    factors = eliminate(d, [*factors, *inputs], sorted(unsure), "exists" if loose else "all")
    return eliminate(d, factors, sorted(levels - unsure), "exists")


def free_values(network: Network) -> tuple[str, ...]:
    """Settings whose number reaches the result on some complete route."""
    found: dict[str, None] = {}
    for leaf, flow in network.flows:
        elements = network.graph.instances[leaf.instance].elements
        names = [id for kind, id in mentions(leaf.expression, elements, network.graph.sizes) if kind == "setting"]
        if all(name in found for name in names):
            continue
        if _can_be(network, flow):
            found.update(dict.fromkeys(names))
    order = [each.name for each in network.graph.model.settings]
    return tuple(name for name in order if name in found)


def _can_be(network: Network, condition: int) -> bool:
    """Whether some complete route meets the condition (yes when it could not be told)."""
    d = network.diagrams
    try:
        layout = Layout.of(network, EVERYTHING, True)
        factors = [*complete_factors(network), d.numbers(condition), *layout.projects, *layout.inputs]
        levels: Iterable[int] = [*layout.unsure, *layout.humans, *layout.facts, *layout.states]
        return bool(number(d, eliminate(d, factors, levels, "exists")))
    except OutOfLimits:
        return True
