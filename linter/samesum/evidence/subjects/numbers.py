"""Subjects that need the numbers: options that give nothing, branches that give one number, overlaps, jumps."""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction
from itertools import combinations

from samesum.evidence.evidence import Evidence
from samesum.evidence.routes.conditions import Overlap
from samesum.evidence.subjects.branches import basics, general_points
from samesum.evidence.subjects.equal import Answer, Workshop, is_zero, same_number
from samesum.evidence.subjects.jumps import Jump, find_jumps
from samesum.evidence.subjects.kinds import CANNOT_TELL, AttributeValue, Subject
from samesum.evidence.subjects.usage import used_names
from samesum.reading import model as m
from samesum.reading import walk
from samesum.settled.maker import WHERE_OPEN
from samesum.written import percent, plain

_TOLD: dict[Answer, AttributeValue] = {"yes": True, "no": False, "cannot tell": CANNOT_TELL}


def branches(evidence: Evidence, workshop: Workshop) -> Iterator[Subject]:
    """One subject a branch."""
    used, whole = used_names(evidence.model)
    for id, point in general_points(evidence.graph).items():
        made = walk.branches(point.body)
        zeros = [_TOLD[is_zero(workshop, point, number)] for number in range(len(made))]
        errors = [isinstance(each, m.Option) and each.error is not None for each in made]
        costs = [isinstance(each, m.Option) and each.cost is not None for each in made]
        what = {"choice": "option", "follows": "tied_option"}.get(point.kind, "when")
        for number, branch in enumerate(made):
            others = [place for place in range(len(made)) if place != number]
            other_zero = [zeros[place] for place in others]
            attributes: dict[str, AttributeValue] = {
                **basics(branch.name, point.clause),
                "point": id,
                "what": what,
                "decider": point.by or "nobody",
                "value_is_zero": zeros[number],
                "other_is_zero": True if True in other_zero else CANNOT_TELL if CANNOT_TELL in other_zero else False,
                "has_error": errors[number],
                "has_cost": costs[number],
                "other_has_error": any(errors[place] for place in others),
                "other_has_cost": any(costs[place] for place in others),
                "is_reference": isinstance(branch, m.Option) and branch.reference,
                "conditional": walk.condition_of(branch) is not None,
                "reaches_result": True if point.quantity in used else False if whole else CANNOT_TELL,
            }
            attributes["lacking"] = _lacking(
                not errors[number] and attributes["other_has_error"] is True,
                not costs[number] and attributes["other_has_cost"] is True,
            )
            yield Subject("branch", id, branch.name, branch.span, point.clause, attributes)


def _lacking(error: bool, cost: bool) -> str:
    if error and cost:
        return "neither an error nor a cost"
    return "no error" if error else "no cost" if cost else ""


def equal_branches(evidence: Evidence, workshop: Workshop) -> Iterator[Subject]:
    """Pairs of options of one choice, of which one follows no less than the other, that give one number."""
    for id, point in general_points(evidence.graph).items():
        if point.kind != "choice":
            continue
        for first, second in combinations(range(len(point.branches)), 2):
            answer = same_number(workshop, point, first, second, together=False)
            attributes: dict[str, AttributeValue] = {
                **basics(id, point.clause),
                "first": point.branches[first],
                "second": point.branches[second],
                "exists": _TOLD[answer],
                "decider": point.by or "nobody",
            }
            key = f"{point.branches[first]} {point.branches[second]}"
            span = walk.branches(point.body)[second].span
            yield Subject("equal_branches", id, key, span, point.clause, attributes)


def overlaps(evidence: Evidence, workshop: Workshop) -> Iterator[Subject]:
    """One subject a pair of branches that hold together, all elements in one."""
    graph = evidence.graph
    found: dict[tuple[str, tuple[str, str]], list[Overlap]] = {}
    for overlap in evidence.conditions.overlaps:
        key = (graph.branch_points[overlap.branch_point].general_id, overlap.branches)
        found.setdefault(key, []).append(overlap)
    asked = {
        (graph.branch_points[each.branch_point].general_id, (each.branches[0], each.branches[1]))
        for each in evidence.conditions.undecided
        if each.asks == "overlap" and each.branches  # else time ran out before its pairs were looked at
    }
    for id, pair in sorted({*found, *asked}):
        shown = found.get((id, pair), [])
        first_shown = shown[0].branch_point if shown else ""
        point = graph.branch_points.get(first_shown) or general_points(graph)[id]
        first, second = (point.branches.index(name) for name in pair)
        same = same_number(workshop, point, first, second, together=True)
        attributes: dict[str, AttributeValue] = {
            **basics(id, point.clause),
            "exists": True if shown else CANNOT_TELL,
            "first": pair[0],
            "second": pair[1],
            "same_number": _TOLD[same],
            "element_count": max(1, len(shown)),
        }
        span = walk.branches(point.body)[second].span
        witness = shown[0].witness if shown else None
        yield Subject("overlap", id, f"{pair[0]} {pair[1]}", span, point.clause, attributes, witness)


def jumps(evidence: Evidence, seconds: float) -> Iterator[Subject]:
    """One subject a threshold at which a number jumps; one that cannot be told for each place left unlooked at."""
    found = find_jumps(evidence.graph, seconds)
    clauses = {quantity.name: quantity.about.clause for quantity in evidence.graph.model.quantities}
    tables = {table.name: table for table in evidence.model.tables}
    units = {quantity.name: quantity.unit.text for quantity in evidence.graph.model.quantities}
    points = general_points(evidence.graph)
    for jump in found.found:
        if WHERE_OPEN in jump.place:
            continue  # told at the option itself
        name = points[jump.place].quantity if jump.place in points else jump.place
        clause = tables[jump.table].about.clause if jump.table else clauses[name]
        threshold = _with_unit(jump.at, jump.unit.text, share=True)
        attributes: dict[str, AttributeValue] = {
            **basics(jump.place, clause),
            "exists": True,
            "through_table": bool(jump.table),
            "table_name": jump.table,
            "asked": jump.asked,
            "threshold": threshold,
            "own_size": abs(jump.size),
            "size": abs(jump.size if jump.result_size is None else jump.result_size),
            "size_percent": _signed(jump.size if jump.result_size is None else jump.result_size),
            "own_percent": _signed(jump.size),
            "before": _with_unit(jump.before, units[name]),
            "after": _with_unit(jump.after, units[name]),
            "at_result": jump.result_size is not None,
        }
        yield Subject("jump", jump.place, _key(jump), jump.span, clause, attributes)
    for place in found.untold:
        if WHERE_OPEN in place:
            continue
        point = points.get(place)
        quantity = next(each for each in evidence.model.quantities if each.name == place.split("/")[0])
        attributes = {
            **basics(place, quantity.about.clause),
            "exists": CANNOT_TELL,
            "through_table": point is None,
            "table_name": "",
            "asked": "",
            "threshold": "",
            "own_size": CANNOT_TELL,
            "size": CANNOT_TELL,
            "size_percent": "",
            "own_percent": "",
            "before": "",
            "after": "",
            "at_result": False,
        }
        span = point.span if point is not None else quantity.body.span
        yield Subject("jump", place, "untold", span, quantity.about.clause, attributes)


def _key(jump: Jump) -> str:
    """A name for the jump, which a finding's ``id`` leans on: without the commas that are for people."""
    return f"{jump.table} {jump.asked} {plain(jump.at).replace(',', '')}"


def _signed(size: Fraction) -> str:
    return ("+" if size > 0 else "−") + percent(abs(size)) if size else "0 %"


def _with_unit(value: Fraction, unit: str, share: bool = False) -> str:
    if share and not unit and abs(value) <= 1:
        return percent(value)
    return plain(value) + (f" {unit}" if unit else "")
