"""The routes open to one project, one by one.

The project's values narrow every domain to a point; what people decide is projected out; then the states
are eliminated once more, and the way back through that elimination meets every route and no dead end. So the first
routes come at once however many there are.
"""

from __future__ import annotations

import time
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace

from samesum.evidence.routes.counting import deep
from samesum.evidence.routes.diagrams import Diagrams, Limits, OutOfLimits
from samesum.evidence.routes.eliminating import Eliminated, eliminate, evaluate, number
from samesum.evidence.routes.layout import NOTHING, Layout
from samesum.evidence.routes.network import Network, complete_factors
from samesum.evidence.routes.ranges import Bounds
from samesum.evidence.routes.relating import build_network
from samesum.evidence.routes.witness import Value, usual
from samesum.graph import DecisionGraph, build

Given = Value | tuple[Value, ...]
Route = tuple[tuple[str, str], ...]


@dataclass(frozen=True, slots=True)
class Routes:
    """``open``: how many routes are open to the project (at most so many when not ``exact``; None when that
    could not be counted in time). ``first``: the first of them, each as branch points with the branch taken."""

    open: int | None
    exact: bool
    first: tuple[Route, ...]


def list_routes(graph: DecisionGraph, project: Mapping[str, Given], most: int, seconds: float = 10.0) -> Routes:
    """The first ``most`` routes open to one project. ``project`` gives values by declared name, a tuple with one
    value an element for a name per index; elements beyond those given are not there. Facts left out are taken
    in the middle of their domain; settings and judgements left out are free."""
    graph = _as_large(graph, project)
    values = _by_element(graph, project)
    domains = {name: Bounds(value, value) for name, value in values.items() if not isinstance(value, str | bool)}
    with deep():
        try:
            network = build_network(graph, Limits(time.monotonic() + seconds), domains=domains)
            return _listed(network, values, most)
        except OutOfLimits:
            return Routes(None, False, ())


def _as_large(graph: DecisionGraph, project: Mapping[str, Given]) -> DecisionGraph:
    """The graph with as many elements of each index as the project has."""
    sizes = dict(graph.sizes)
    for fact in graph.model.facts:
        given = project.get(fact.name)
        if fact.index and isinstance(given, tuple) and given:
            sizes[fact.index] = len(given)
    if sizes == dict(graph.sizes):
        return graph
    indices = tuple(replace(index, most=sizes[index.name]) for index in graph.model.indices)
    return build(replace(graph.model, indices=indices))


def _by_element(graph: DecisionGraph, project: Mapping[str, Given]) -> dict[str, Value]:
    values: dict[str, Value] = {}
    for fact in graph.model.facts:
        given = project.get(fact.name)
        if not fact.index:
            values[fact.name] = given if given is not None and not isinstance(given, tuple) else usual(fact.domain)
            continue
        for element in range(1, graph.sizes.get(fact.index, 0) + 1):
            here = given[element - 1 : element] if isinstance(given, tuple) else ()
            values[f"{fact.name}@{element}"] = here[0] if here else usual(fact.domain)
    for name in (*(each.name for each in graph.model.settings), *(each.name for each in graph.model.judgements)):
        given = project.get(name)
        if given is not None and not isinstance(given, tuple):
            values[name] = given
    return values


def _held(network: Network, values: Mapping[str, Value]) -> list[int]:
    """Named values and judgements that are given, as factors."""
    d = network.diagrams
    factors = []
    for level, variable in network.variables.items():
        value = values.get(variable.name)
        if variable.kind == "judgement" and value is not None:
            factors.append(d.numbers(d.literal(level, (int(value is True),))))
        elif variable.kind == "named" and value is not None:
            known = network.values[variable.name]
            spoken = value if isinstance(value, str) else "yes" if value is True else "no"
            factors.append(d.numbers(d.literal(level, [known.index(spoken)] if spoken in known else [])))
    return factors


def _listed(network: Network, values: Mapping[str, Value], most: int) -> Routes:
    d = network.diagrams
    layout = Layout.of(network, NOTHING, True)
    factors = [*complete_factors(network), *_held(network, values), *layout.projects, *layout.inputs]
    factors = eliminate(d, factors, layout.unsure, "exists")
    factors = eliminate(d, factors, [*layout.humans, *layout.facts], "exists")
    open_routes = int(number(d, eliminate(d, factors, layout.states, "sum")))
    trail: list[Eliminated] = []
    if not number(d, eliminate(d, factors, layout.states, "exists", trail)):
        return Routes(0, layout.exact, ())
    found: list[Route] = []
    for states in _walk(d, list(reversed(trail))):
        if len(found) == most:
            break
        taken = []
        for relation in network.points.values():
            state = states[relation.level]
            if state < relation.not_reached and relation.point.is_written:
                taken.append((relation.point.id, relation.point.branches[state]))
        found.append(tuple(taken))
    return Routes(open_routes, layout.exact, tuple(found))


def _walk(d: Diagrams, steps: Sequence[Eliminated]) -> Iterator[dict[int, int]]:
    """Every assignment that the elimination lets through; no step is ever taken back in vain."""
    states: dict[int, int] = {}
    next_value = [0] * (len(steps) + 1)
    at = 0
    while at >= 0:
        if at == len(steps):
            yield states
            at -= 1
            continue
        step = steps[at]
        value = next_value[at]
        if value >= d.size[step.level]:
            states.pop(step.level, None)
            at -= 1
            continue
        next_value[at] = value + 1
        states[step.level] = value
        if all(evaluate(d, factor, states) for factor in step.factors):
            at += 1
            if at < len(steps):
                next_value[at] = 0
