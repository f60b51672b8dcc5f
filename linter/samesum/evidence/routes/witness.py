"""A project that shows something: values for everything that matters, and the branches on the way."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from fractions import Fraction

from samesum.evidence.routes import solver as s
from samesum.evidence.routes.cells import cell_at, representative
from samesum.evidence.routes.groups import ListedGroup
from samesum.evidence.routes.network import Network
from samesum.evidence.routes.ranges import Bounds, has_no_value
from samesum.evidence.routes.symbols import nearest
from samesum.reading import model as m

Value = Fraction | str | bool
"""A number in its declared unit, a named value, or yes (True) or no (False)."""


@dataclass(frozen=True, slots=True)
class Witness:
    """``facts``, ``settings`` and ``judgements`` by name in the order declared (a tuple of values for a
    name per index); ``route`` the branches taken, in the graph's order. Replaying the inputs with
    these branches shows what the witness claims."""

    facts: tuple[tuple[str, Value | tuple[Value, ...]], ...]
    settings: tuple[tuple[str, Value], ...]
    judgements: tuple[tuple[str, bool], ...]
    route: tuple[tuple[str, str], ...]

    @property
    def inputs(self) -> tuple[tuple[str, Value | tuple[Value, ...]], ...]:
        """Everything that is given from outside, in one list."""
        return (*self.facts, *self.settings, *self.judgements)


def witness_from(network: Network, values: Mapping[int, int], everything: bool = False) -> Witness | None:
    """The witness of an assignment to levels. Names that no value was needed for are left out, or
    (``everything``) given a value inside their domain. None when the solver could not find the point again."""
    known: dict[str, Value] = {}
    for level, value in values.items():
        variable = network.variables.get(level)
        if variable is None:
            continue
        if variable.kind == "named":
            names = network.values[variable.name]
            known[variable.name] = value == 1 if names == ("no", "yes") else names[value]
        elif variable.kind == "judgement":
            known[variable.name] = value == 1
        elif variable.kind == "numeric":
            known[variable.name] = representative(network.cells[level][value])
    for listed in network.groups:
        if any(level in values for level in listed.levels):
            point = group_point(network, listed, values, _kind_point(network, listed, values))
            if point is None:
                return None
            known.update(point)
    model = network.graph.model
    sizes = network.graph.sizes
    facts: list[tuple[str, Value | tuple[Value, ...]]] = []
    for fact in model.facts:
        if fact.index:
            ids = [f"{fact.name}@{element}" for element in range(1, sizes[fact.index] + 1)]
            if everything or any(id in known for id in ids):
                facts.append((fact.name, tuple(known.get(id, usual(fact.domain)) for id in ids)))
        elif everything or fact.name in known:
            facts.append((fact.name, known.get(fact.name, usual(fact.domain))))
    settings = tuple(
        (each.name, known.get(each.name, usual(each.domain)))
        for each in model.settings
        if everything or each.name in known
    )
    judgements = tuple(
        (each.name, bool(known.get(each.name, True))) for each in model.judgements if everything or each.name in known
    )
    route = []
    for id, relation in network.points.items():
        state = values.get(relation.level)
        if state is not None and state < relation.not_reached:
            route.append((id, relation.point.branches[state]))
    return Witness(tuple(facts), settings, judgements, tuple(route))


def usual(domain: m.Domain) -> Value:
    """A value inside a domain for a name that does not matter: the middle, or the first."""
    if isinstance(domain, m.OneOf):
        return domain.values[0]
    if isinstance(domain, m.YesNo):
        return True
    return representative(Bounds(domain.low, domain.high))


def _kind_point(network: Network, listed: ListedGroup, values: Mapping[int, int]) -> Mapping[str, Fraction]:
    """Facts of the kind of project that was assigned, where more than the cells makes the kind."""
    for level, value in values.items():
        known = network.memory.get(("kind", level))
        if isinstance(known, tuple) and known[0] is listed and value < len(known[1]):
            return known[1][value] or {}
    return {}


def group_point(
    network: Network, listed: ListedGroup, values: Mapping[int, int], given: Mapping[str, Fraction] | None = None
) -> dict[str, Value] | None:
    """Numbers for a group's names that lie in the cells that were assigned, and so do its sums. ``given``: names
    whose numbers are settled."""
    group = listed.group
    wanted: dict[str, Bounds] = {}
    for name, level, cells, domain in zip(
        group.names, listed.name_levels, group.name_cells, group.domains, strict=True
    ):
        wanted[name] = cells[values[level]] if level in values else domain
    wanted.update({name: Bounds(value, value) for name, value in (given or {}).items()})
    assigned = [values.get(level) for level in listed.sum_levels]

    def fits(point: Mapping[str, Fraction]) -> bool:
        if not all(_inside(point[name], cell) for name, cell in wanted.items()):
            return False
        return all(
            number is None or cell_at(each, cells, point) == number or has_no_value(each, point)
            for each, cells, number in zip(group.sums, group.sum_cells, assigned, strict=True)
        )

    for _, seen in listed.listing.points:
        found = dict(zip(group.names, seen, strict=True))
        if fits(found):
            return dict(found)
    middle = {name: representative(cell) for name, cell in wanted.items()}
    if fits(middle):
        return dict(middle)
    made = s.Solver(wanted, network.diagrams.limits.deadline + 2.0, whole=wanted)
    for each, cells, number in zip(group.sums, group.sum_cells, assigned, strict=True):
        if number is not None:
            made.add(*made.within(made.term(each), cells[number]))
    if made.check() != "yes":
        return None
    point = {name: value for name, value in made.point().items() if name in wanted}
    plain = _plainer(point, fits)
    return None if plain is None else dict(plain)


def _plainer(
    point: Mapping[str, Fraction], fits: Callable[[Mapping[str, Fraction]], bool]
) -> Mapping[str, Fraction] | None:
    """The same point in shorter decimals, when those still fit; None when not even the point does: what it stands
    for is irrational, or the solver guessed."""
    for digits in range(0, 7):
        step = Fraction(10) ** -digits
        rounded = {name: nearest(value / step) * step for name, value in point.items()}
        if fits(rounded):
            return rounded
    return point if fits(point) else None


def _inside(value: Fraction, cell: Bounds) -> bool:
    if cell.low is not None and (value < cell.low or (cell.low_open and value == cell.low)):
        return False
    return cell.high is None or value < cell.high or (not cell.high_open and value == cell.high)
