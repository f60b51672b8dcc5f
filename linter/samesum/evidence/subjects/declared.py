"""Subjects that are declarations: facts, settings, constants, tables and the rest; and unit mismatches."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping

from samesum.evidence.evidence import Evidence
from samesum.evidence.subjects.kinds import CANNOT_TELL, AttributeValue, Subject
from samesum.evidence.subjects.usage import undated_latest, used_names
from samesum.graph import DecisionGraph
from samesum.problems import Problem
from samesum.reading import model as m
from samesum.reading import walk
from samesum.spans import Span
from samesum.written import as_sentence, percent, plain

Declared = m.Fact | m.Setting | m.Judgement | m.Constant | m.Table | m.Quantity | m.Index | m.Result


def declared_subjects(evidence: Evidence) -> Iterator[Subject]:
    """One subject a declaration of its own kind, and one of kind ``declaration`` for each."""
    model = evidence.model
    used, whole = used_names(model)

    def made(what: str, declared: Declared, more: Mapping[str, AttributeValue]) -> Iterator[Subject]:
        about = declared.about
        unit = getattr(declared, "unit", m.PLAIN)
        is_used = declared.name in used or isinstance(declared, m.Result)
        common: dict[str, AttributeValue] = {
            "name": declared.name,
            "has_clause": bool(about.clause),
            "clause_number": about.clause,
            "what": what,
            "used": True if is_used else False if whole else CANNOT_TELL,
            "has_source": bool(about.source.strip()),
            "source_text": about.source,
            "latest_undated": undated_latest(about.source),
            "has_note": bool(about.note),
            "unit_text": unit.text,
            "derived": isinstance(declared, m.Constant) and _refers(declared.expression),
        }
        where = (declared.name, declared.name, about.name_span, about.clause)
        if what != "result":
            yield Subject("declaration", *where, common)
        if what != "index":
            yield Subject(what, *where, {**common, **more})

    free = evidence.counts.free_values
    for fact in model.facts:
        yield from made("fact", fact, _fact(fact))
    for setting in model.settings:
        numeric = isinstance(setting.domain, m.Range)
        more: dict[str, AttributeValue] = {
            "decider": setting.by,
            "free_value": setting.name in free,
            "numeric": numeric,
            "domain_text": domain_text(setting.domain, setting.unit),
        }
        yield from made("setting", setting, more)
    for judgement in model.judgements:
        yield from made("judgement", judgement, {"decider": judgement.by, "wording": judgement.wording})
    for constant in model.constants:
        yield from made("constant", constant, {})
    for table in model.tables:
        yield from made("table", table, {"row_count": len(table.rows), "key_count": len(table.keys)})
    counted = _branch_points(evidence.graph)
    for quantity in model.quantities:
        yield from made(
            "quantity",
            quantity,
            {
                "branch_points": counted.get(quantity.name, 0),
                "is_result": model.result is not None and quantity.name == model.result.name,
                "per_index": bool(quantity.index),
            },
        )
    for index in model.indices:
        yield from made("index", index, {})
    if model.result is not None:
        rounding = model.result.rounding
        yield from made("result", model.result, {"has_rounding": bool(rounding), "rounding": rounding})
    yield _rulebook(evidence)


def _refers(expression: m.Expression) -> bool:
    return any(isinstance(node, m.Reference) for node in walk.inside(expression))


def _fact(fact: m.Fact) -> dict[str, AttributeValue]:
    numeric = isinstance(fact.domain, m.Range)
    low = fact.domain.low if isinstance(fact.domain, m.Range) else None
    high = fact.domain.high if isinstance(fact.domain, m.Range) else None
    return {
        "numeric": numeric,
        "bounded": not numeric or (low is not None and high is not None),
        "per_index": bool(fact.index),
        "only_low": numeric and low is not None and high is None,
        "only_high": numeric and low is None and high is not None,
    }


def domain_text(domain: m.Domain, unit: m.Unit) -> str:
    """``5 % to 20 %``, ``1 to 40 km``, ``one of a, b``, ``yes or no``."""
    match domain:
        case m.OneOf(values=values):
            return f"one of {', '.join(values)}"
        case m.YesNo():
            return "yes or no"
        case m.Range(low=low, high=high):
            if low is None or high is None:
                return "any number"
            if not unit.text and abs(low) <= 1 and abs(high) <= 1:
                return f"{percent(low)} to {percent(high)}"
            return f"{plain(low)} to {plain(high)}" + (f" {unit.text}" if unit.text else "")


def _branch_points(graph: DecisionGraph) -> dict[str, int]:
    found: dict[str, set[str]] = {}
    for point in graph.branch_points.values():
        found.setdefault(point.quantity, set()).add(point.general_id)
    return {name: len(points) for name, points in found.items()}


def _rulebook(evidence: Evidence) -> Subject:
    model, counts = evidence.model, evidence.counts
    choices = {point.general_id for point in evidence.graph.branch_points.values() if point.kind == "choice"}
    least = counts.at_least.get("per_project_least", counts.per_project_least)
    most = counts.at_least.get("per_project_most", counts.per_project_most)
    attributes: dict[str, AttributeValue] = {
        "name": model.title,
        "has_clause": False,
        "clause_number": "",
        "draft_name": model.draft,
        "has_result": model.result is not None,
        "period_count": model.periods,
        "choices": len(choices),
        "settings": len(model.settings),
        "judgements": len(model.judgements),
        "per_project_most": counts.per_project_most if most == counts.per_project_most else CANNOT_TELL,
        "per_project_least": counts.per_project_least if least == counts.per_project_least else CANNOT_TELL,
        "exact": counts.exact,
    }
    return Subject("rulebook", "", "", model.title_span, "", attributes)


def unit_mismatches(evidence: Evidence, problems: Iterable[Problem]) -> Iterator[Subject]:
    """One subject a unit mismatch, in the clause of the declaration it stands in."""
    for problem in problems:
        if problem.kind != "unit":
            continue
        name, clause = _standing_in(evidence.model, problem.span)
        attributes: dict[str, AttributeValue] = {
            "name": name,
            "has_clause": bool(clause),
            "clause_number": clause,
            "problem": problem.says,
            "help": as_sentence(problem.remedy) or "Correct one of the units, or the formula.",
        }
        yield Subject("unit_mismatch", name, problem.says, problem.span, clause, attributes)


def needed_mismatches(model: m.Model, problems: Iterable[Problem]) -> tuple[Problem, ...]:
    """The unit mismatches on the way to the result or to applicability: no number can be worked out past them."""
    used, _ = used_names(model)
    leading = {"", "applies when", *used}
    if model.result is not None:
        leading.add(model.result.name)
    return tuple(
        problem for problem in problems if problem.kind == "unit" and _standing_in(model, problem.span)[0] in leading
    )


def _standing_in(model: m.Model, span: Span) -> tuple[str, str]:
    """The name and clause of the declaration around a span."""
    named: list[Declared] = [
        *model.facts, *model.settings, *model.judgements, *model.constants, *model.tables, *model.quantities,
        *model.indices, *([model.result] if model.result is not None else []),
    ]  # fmt: skip
    for declared in named:
        if declared.about.span.line <= span.line <= declared.about.span.end_line:
            return declared.name, declared.about.clause
    for applies in model.applies:
        if applies.about.span.line <= span.line <= applies.about.span.end_line:
            return "applies when", applies.about.clause
    return "", ""
