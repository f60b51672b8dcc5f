"""What counts as a fact and what as somebody's decision in one question to the network."""

from __future__ import annotations

from dataclasses import dataclass

from samesum.evidence.routes import groups
from samesum.evidence.routes.network import Network
from samesum.evidence.routes.symbols import generators


@dataclass(frozen=True, slots=True)
class Given:
    """What counts as a fact instead of somebody's decision: all that some ``deciders`` decide, settings and
    judgements by their ``names``, branch points by their general id (``points``, all elements together)."""

    deciders: frozenset[str] = frozenset()
    names: frozenset[str] = frozenset()
    points: frozenset[str] = frozenset()


NOTHING = Given()
EVERYTHING = Given(frozenset({"developer", "verifier", "programme"}))
"""For questions whether anything at all is possible, facts and decisions alike."""
ALL_BUT_DEVELOPER = Given(frozenset({"verifier", "programme"}))


@dataclass(frozen=True, slots=True)
class Layout:
    """Which levels are facts, human inputs, states or unsure, and what can occur together."""

    facts: tuple[int, ...]
    humans: tuple[int, ...]
    states: tuple[int, ...]
    unsure: tuple[int, ...]
    projects: tuple[int, ...]
    inputs: tuple[int, ...]
    exact: bool

    @staticmethod
    def of(network: Network, given: Given, loose: bool, generous: bool | None = None) -> Layout:
        """What is ``given`` counts among the facts. ``loose`` admits projects that were not
        refuted, ``generous`` (as ``loose`` unless given) human inputs that were not."""
        key = (given.deciders, given.names, loose, loose if generous is None else generous)
        known = network.memory.get(key)
        if isinstance(known, Layout):
            return known
        d = network.diagrams
        model = network.graph.model
        free = {each.name for each in model.settings if each.by not in given.deciders}
        free |= {each.name for each in model.judgements if each.by not in given.deciders}
        free -= given.names
        facts: list[int] = []
        humans: list[int] = []
        states: list[int] = []
        unsure: list[int] = []
        projects: list[int] = []
        inputs: list[int] = []
        kinds: list[int] = []
        exact = not network.unsure
        for listed in network.groups:
            kind_level = min(listed.name_levels) - 3 - 2 * len(network.memory)  # one of its own for every layout
            made = groups.validity(d, listed, free, kind_level, loose)
            projects += made.projects
            if generous is None or generous == loose or made.exact:
                inputs += made.inputs
            else:
                inputs += groups.validity(d, listed, free, kind_level - 1, generous).inputs
            exact = exact and made.exact
            if made.kind_level is not None:
                network.memory["kind", made.kind_level] = (listed, made.kind_points)
            kinds += [level for level in (kind_level, kind_level - 1) if level in d.size]
        for level, variable in network.variables.items():
            if variable.kind == "point":
                states.append(level)
            elif variable.kind == "unsure":
                unsure.append(level)
            elif variable.kind == "sum":
                assert variable.sum is not None
                (humans if generators(variable.sum) & free else facts).append(level)
            else:
                (humans if variable.name in free else facts).append(level)
        states = [level for level in states if network.variables[level].name in network.points]
        made_layout = Layout(
            tuple(facts + kinds), tuple(humans), tuple(states), tuple(unsure), tuple(projects), tuple(inputs), exact
        )
        network.memory[key] = made_layout
        return made_layout
