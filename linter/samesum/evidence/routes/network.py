"""The relation between projects, human inputs and routes, as a product of small diagrams.

Every branch point has a state: a branch, ``not reached``, or ``stuck`` (no branch open, or something
it asks has no value). The relation says for each project (facts), each human input
(settings, judgements) which states go together; counting and the questions about overlaps and gaps
are eliminations on it.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, field

from samesum.evidence.routes import groups
from samesum.evidence.routes.diagrams import Diagrams
from samesum.evidence.routes.ranges import Bounds
from samesum.evidence.routes.readings import Variable
from samesum.graph import BranchPoint, DecisionGraph, Leaf
from samesum.reading import model as m


@dataclass(frozen=True, slots=True)
class PointRelation:
    """One branch point's part: where it is reached, where all it asks has a value, where each branch
    is open (both only meant where reached), and the relation of its state to the rest.

    ``lacking``: where operations written in its own conditions have no value although all that is asked has one, by
    the table that has no row ("" for calculations)."""

    point: BranchPoint
    level: int
    reach: int
    sound: int
    open: tuple[int, ...]
    factor: int
    lacking: Mapping[str, int]

    @property
    def not_reached(self) -> int:
        return len(self.open)

    @property
    def stuck(self) -> int:
        return len(self.open) + 1


@dataclass(frozen=True, slots=True)
class LeafRelation:
    """A formula whose own operations may lack a value: where it is evaluated, where they have one (only meant where
    all that it mentions has one), and ``lacking`` as for branch points."""

    leaf: Leaf
    evaluated: int
    sound: int
    lacking: Mapping[str, int]


@dataclass(frozen=True, slots=True)
class Network:
    """The whole relation.

    ``leaves``: formulas that may lack a value of their own. ``applies``: where the rulebook applies, as parts that must
    all hold. ``flows``: where the number of a formula reaches the result. ``cells``: of each number that is compared,
    by level.
    """

    graph: DecisionGraph
    diagrams: Diagrams
    variables: Mapping[int, Variable]
    levels: Mapping[str, int]
    points: Mapping[str, PointRelation]
    leaves: tuple[LeafRelation, ...]
    flows: tuple[tuple[Leaf, int], ...]
    applies: tuple[int, ...]
    cells: Mapping[int, tuple[Bounds, ...]]
    domains: Mapping[str, Bounds]
    values: Mapping[str, tuple[str, ...]]
    groups: tuple[groups.ListedGroup, ...]
    unsure: Mapping[int, m.Condition | m.Expression]
    memory: dict[object, object] = field(default_factory=dict, compare=False, repr=False)

    def by_level(self) -> dict[int, PointRelation]:
        """The branch points' relations by the level of their state."""
        found = self.memory.get("by level")
        if not isinstance(found, dict):
            found = self.memory["by level"] = {each.level: each for each in self.points.values()}
        return found


def complete_factors(network: Network) -> list[int]:
    """The relation of complete routes: nothing stuck, every formula with a value, the rulebook applies."""
    d = network.diagrams
    factors = [_not_stuck(network, each) for each in network.points.values()]
    factors += [d.either(d.negate(each.evaluated), each.sound) for each in network.leaves]
    return [d.numbers(factor) for factor in (*factors, *network.applies)]


def _not_stuck(network: Network, relation: PointRelation) -> int:
    d = network.diagrams
    return d.both(relation.factor, d.literal(relation.level, range(relation.stuck)))


def cone(network: Network, start: Iterable[int]) -> Iterator[int]:
    """The factors (with stuck states) of every branch point that the diagrams ``start`` depend on.

    The rest can be left out of a question: whatever the inputs, each branch point has some state.
    """
    d = network.diagrams
    by_level = network.by_level()
    todo = sorted({level for each in start for level in d.support(each) if level in by_level})
    seen: set[int] = set()
    while todo:
        level = todo.pop()
        if level in seen:
            continue
        seen.add(level)
        factor = by_level[level].factor
        yield d.numbers(factor)
        todo += sorted(other for other in d.support(factor) if other in by_level and other not in seen)
