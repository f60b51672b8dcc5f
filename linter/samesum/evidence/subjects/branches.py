"""Subjects that follow from the decision graph: branch points, gaps, dead branches, choices not tied, applicability."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from fractions import Fraction
from itertools import combinations

from samesum.evidence.evidence import Evidence
from samesum.evidence.routes.conditions import Gap
from samesum.evidence.routes.control import Mover, movers_of
from samesum.evidence.subjects.kinds import CANNOT_TELL, AttributeValue, Subject
from samesum.evidence.subjects.pointwise import Calculation, NoValue, middle_project
from samesum.evidence.subjects.usage import used_names
from samesum.graph import BranchPoint, DecisionGraph
from samesum.reading import model as m
from samesum.reading import walk
from samesum.reading.words import listing
from samesum.spans import Span
from samesum.written import percent

WHAT = {"choice": "choice", "follows": "tied", "cases": "cases", "cases in order": "ordered_cases"}
TIMING = {"validation": "validation", "period": "each_period", "": "not_stated"}


def general_points(graph: DecisionGraph) -> dict[str, BranchPoint]:
    """One branch point for all elements, by general id, in the graph's order."""
    found: dict[str, BranchPoint] = {}
    for point in graph.branch_points.values():
        if point.is_written:
            found.setdefault(point.general_id, point)
    return found


def element_counts(graph: DecisionGraph) -> dict[str, int]:
    found: dict[str, int] = {}
    for point in graph.branch_points.values():
        found[point.general_id] = found.get(point.general_id, 0) + 1
    return found


def basics(name: str, clause: str) -> dict[str, AttributeValue]:
    return {"name": name, "has_clause": bool(clause), "clause_number": clause}


def branch_subjects(evidence: Evidence) -> Iterator[Subject]:
    """All of them, in the graph's order by kind."""
    graph = evidence.graph
    points = general_points(graph)
    elements = element_counts(graph)
    used, whole = used_names(evidence.model)
    costs = Calculation(graph, middle_project(graph))
    for id, point in points.items():
        control = evidence.control.get(id)
        movers = control.movers if control is not None else ()
        attributes: dict[str, AttributeValue] = {
            **basics(id, point.clause),
            **steered(movers, conditions_of(point)),
            "quantity_name": point.quantity,
            "what": WHAT[point.kind],
            "decider": (control.decided_by if control is not None else None) or "nobody",
            "timing": TIMING[point.timing] if point.kind == "choice" else "never",
            "period_count": evidence.model.periods,
            "branch_count": len(point.branches),
            "branch_names": listing(point.branches, "or"),
            "element_count": elements[id],
            "nested": point.parent is not None,
            "reaches_result": True if point.quantity in used else False if whole else CANNOT_TELL,
            **_options(point, costs),
        }
        yield Subject("branch_point", id, "", point.span, point.clause, attributes)
    yield from _gaps(evidence, points)
    yield from _dead(evidence, points)
    yield from _untied(evidence, points, used)
    yield from _applicability(evidence)


def conditions_of(point: BranchPoint) -> list[m.Condition]:
    return [condition for condition in point.conditions if condition is not None]


def steered(movers: Sequence[Mover], conditions: Iterable[m.Condition]) -> dict[str, AttributeValue]:
    """Who can move these conditions, and through what."""
    judgements = dict.fromkeys(
        node.name
        for condition in conditions
        for node in walk.inside(condition)
        if isinstance(node, m.Holds) and node.kind == "judgement"
    )
    through = {mover.through for mover in movers}
    return {
        "steered": bool(movers),
        "rests_on_judgement": bool(judgements),
        "steered_through_judgement": "judgement" in through,
        "steered_through_setting": "setting" in through,
        "steered_through_choice": "choice" in through,
        "steered_through_overlap": "overlap" in through,
        "steered_indirectly": any(mover.source not in judgements for mover in movers),
        "judgements": listing([f"`{name}`" for name in judgements], "and"),
        "steerers": listing([spoken(mover) for mover in movers], "and"),
    }


def spoken(mover: Mover) -> str:
    """``the developer through the choice soil_gain (soil_uncertainty, soil_gain)``."""
    chain = f", by way of {' → '.join(f'`{name}`' for name in mover.chain)}" if len(mover.chain) > 1 else ""
    return f"the {mover.by} (through the {mover.through} `{mover.source}`{chain})"


def _options(point: BranchPoint, costs: Calculation) -> dict[str, AttributeValue]:
    options = point.body.options if not isinstance(point.body, m.Cases) else ()
    pair = _cheap_and_dear(point, options, costs)
    cheap, dear = pair if pair is not None else (None, None)
    return {
        "with_error": sum(option.error is not None for option in options),
        "with_cost": sum(option.cost is not None for option in options),
        "has_reference": any(option.reference for option in options),
        "has_cheap_default": pair is not None,
        "cheap_option": cheap.name if cheap is not None else "",
        "cheap_error": percent(cheap.error or Fraction(0)) if cheap is not None else "",
        "dear_option": dear.name if dear is not None else "",
        "dear_error": percent(dear.error or Fraction(0)) if dear is not None else "",
    }


def _cheap_and_dear(
    point: BranchPoint, options: Sequence[m.Option], calculation: Calculation
) -> tuple[m.Option, m.Option] | None:
    """An option that costs less (for a project near the middle of its domains) and errs more than another: the
    pair with the widest gap in error."""
    elements = calculation.graph.instances[point.instance].elements
    known: list[tuple[m.Option, Fraction, Fraction]] = []
    for option in options:
        if option.error is not None and option.cost is not None:
            try:
                known.append((option, option.error, calculation.number(option.cost, elements)))
            except NoValue:
                continue
    best: tuple[Fraction, m.Option, m.Option] | None = None
    for cheap, cheap_error, cheap_cost in known:
        for dear, dear_error, dear_cost in known:
            wider = cheap_error - dear_error
            if wider > 0 and cheap_cost < dear_cost and (best is None or wider > best[0]):
                best = (wider, cheap, dear)
    return None if best is None else (best[1], best[2])


# --- gaps and dead branches ----------------------------------------------------------------


def _gaps(evidence: Evidence, points: Mapping[str, BranchPoint]) -> Iterator[Subject]:
    graph = evidence.graph
    together: dict[tuple[str, str], list[Gap]] = {}
    for gap in evidence.conditions.gaps:
        together.setdefault((_general(gap.branch_point, graph), gap.kind), []).append(gap)
    for (id, kind), gaps in together.items():
        yield _gap(evidence, points, id, kind, gaps)
    shown = {id for id, _ in together}
    for undecided in evidence.conditions.undecided:
        id = _general(undecided.branch_point, graph)
        if undecided.asks == "gap" and id not in shown:
            shown.add(id)
            yield _gap(evidence, points, id, "conditions", [])


def _gap(evidence: Evidence, points: Mapping[str, BranchPoint], id: str, kind: str, gaps: Sequence[Gap]) -> Subject:
    point = points.get(id)
    span, clause = _place(evidence.graph.model, id, point)
    first = gaps[0] if gaps else None
    tables = _rowless(evidence, first) if first is not None else ()
    attributes: dict[str, AttributeValue] = {
        **basics(id, clause),
        "exists": True if gaps else CANNOT_TELL,
        "missing": kind,
        "tables": listing([f"`{name}`" for name in tables], "or"),
        "element_count": max(1, len(gaps)),
        "is_choice": point is not None and point.kind in ("choice", "follows"),
    }
    return Subject("gap", id, kind, span, clause, attributes, first.witness if first is not None else None)


def _rowless(evidence: Evidence, gap: Gap) -> tuple[str, ...]:
    """The tables that have no row for the project that shows the gap; all that are asked, where it cannot be told."""
    if len(gap.names) < 2 or gap.witness is None:
        return gap.names
    graph = evidence.graph
    values = middle_project(graph)
    for name, value in gap.witness.inputs:
        if isinstance(value, tuple):
            values.update({f"{name}@{element}": each for element, each in enumerate(value, start=1)})
        else:
            values[name] = value
    calculation = Calculation(graph, values)
    point = graph.branch_points.get(gap.branch_point)
    instance = graph.instances[point.instance if point is not None else gap.branch_point]
    found: dict[str, None] = {}
    for node in walk.written_in(instance.quantity.body):
        for part in walk.inside(node):
            if isinstance(part, m.Lookup) and part.table in gap.names:
                try:
                    calculation.number(part, instance.elements)
                except (NoValue, KeyError):
                    found[part.table] = None
    return tuple(found) or gap.names


def _general(id: str, graph: DecisionGraph) -> str:
    point = graph.branch_points.get(id)
    return point.general_id if point is not None else graph.instances[id].quantity.name


def _place(model: m.Model, id: str, point: BranchPoint | None) -> tuple[Span, str]:
    if point is not None:
        return point.span, point.clause
    quantity = next(each for each in model.quantities if each.name == id)
    return quantity.body.span, quantity.about.clause


def _dead(evidence: Evidence, points: Mapping[str, BranchPoint]) -> Iterator[Subject]:
    """A branch is dead when it is for every element."""
    graph = evidence.graph
    elements = element_counts(graph)
    dead: dict[tuple[str, str], int] = {}
    for each in evidence.conditions.dead_branches:
        key = (graph.branch_points[each.branch_point].general_id, each.branch)
        dead[key] = dead.get(key, 0) + 1
    open_questions = {
        (graph.branch_points[each.branch_point].general_id, each.branches[0])
        for each in evidence.conditions.undecided
        if each.asks == "dead branch"
    }
    for id, point in points.items():
        for branch in walk.branches(point.body):
            key = (id, branch.name)
            if dead.get(key) == elements[id] or key in open_questions:
                attributes: dict[str, AttributeValue] = {
                    **basics(id, point.clause),
                    "exists": True if dead.get(key) == elements[id] else CANNOT_TELL,
                    "branch_name": branch.name,
                    "is_option": isinstance(branch, m.Option),
                }
                yield Subject("dead_branch", id, branch.name, branch.span, point.clause, attributes)


# --- choices that are not tied ---------------------------------------------------------------


def _untied(evidence: Evidence, points: Mapping[str, BranchPoint], used: frozenset[str]) -> Iterator[Subject]:
    """Pairs of choices in different quantities with two or more option names in common."""
    choices = [point for point in points.values() if point.kind == "choice" and point.quantity in used]
    for first, second in combinations(sorted(choices, key=lambda point: point.span), 2):
        if first.quantity == second.quantity:
            continue
        shared = [name for name in first.branches if name in second.branches]
        if len(shared) < 2:
            continue
        attributes: dict[str, AttributeValue] = {
            **basics(second.general_id, second.clause),
            "other": first.general_id,
            "other_clause": first.clause,
            "shared": listing([f"`{name}`" for name in shared], "and"),
            "shared_count": len(shared),
            "same_decider": first.by == second.by,
            "decider": second.by or "nobody",
        }
        yield Subject("untied_choices", second.general_id, first.general_id, second.span, second.clause, attributes)


# --- applicability ---------------------------------------------------------------------------


def _applicability(evidence: Evidence) -> Iterator[Subject]:
    overlaps = [each.branch_point for each in evidence.conditions.overlaps]
    for number, applies in enumerate(evidence.model.applies, start=1):
        movers = movers_of(applies.condition, evidence.graph, overlaps)
        clause = applies.about.clause
        names = dict.fromkeys(
            name
            for node in walk.inside(applies.condition)
            if isinstance(node, (m.Reference, m.Holds))
            for name in (node.name,)
        )
        attributes: dict[str, AttributeValue] = {
            **basics(f"condition {number} of applicability", clause),
            **steered(movers, [applies.condition]),
        }
        key = " ".join(names)
        yield Subject("applicability", "applies when", key, applies.condition.span, clause, attributes)
