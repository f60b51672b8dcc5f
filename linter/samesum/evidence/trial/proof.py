"""What is proved for all projects: one route, one number, a tolerance, or a project that refutes it."""

from __future__ import annotations

import math
import time
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING, Literal

from samesum.evidence.routes.conditions import Gap
from samesum.evidence.routes.witness import usual
from samesum.evidence.trial.deviation import Deviations
from samesum.evidence.trial.figures import Figures, codes_of
from samesum.evidence.trial.plan import Plan, Unplannable, make_plan
from samesum.evidence.trial.ways import Apart, further_apart
from samesum.evidence.trial.worst import Project, Worst, project_at, values_of, widest, worst_at, worst_case_of
from samesum.graph import DecisionGraph
from samesum.written import percent

if TYPE_CHECKING:
    from samesum.evidence.evidence import Evidence

Verdict = Literal["single route", "same number", "within tolerance", "agrees on these cases", "differs", "gap"]


@dataclass(frozen=True, slots=True)
class Proof:
    """``low`` is reached by ``witness``; ``high`` is proved, None where no bound was. ``by`` says how it was proved.
    ``gaps``: branch points at which some project has no result. ``harmless``: overlaps proved to give one number
    (branch point, branches)."""

    verdict: Verdict
    says: str
    low: float | None
    high: float | None
    by: str
    witness: Worst | None
    gaps: tuple[Gap, ...]
    harmless: tuple[tuple[str, tuple[str, str]], ...]
    stuck_cases: tuple[str, ...]


def prove(
    graph: DecisionGraph,
    figures: Sequence[Figures],
    names: Sequence[str],
    at: Sequence[tuple[int, int]],
    deadline: float,
    tolerance: Fraction = Fraction(0),
    evidence: Evidence | None = None,
) -> Proof:
    """The verdict on a rulebook, from what is proved for all projects and what the cases given show."""
    from samesum.evidence.gather import gather

    if evidence is None:
        evidence = gather(graph, max(1.0, (deadline - time.monotonic()) / 2))
    stuck = tuple(
        names[place]
        for place, (batch, row) in enumerate(at)
        if not figures[batch].outside[row] and figures[batch].routes[row] == 0
    )
    harmless = harmless_overlaps(evidence, max(0.5, (deadline - time.monotonic()) / 4))
    try:
        plan = make_plan(graph)
    except Unplannable as unplannable:
        says = f"the number cannot be worked out: {unplannable}"
        return Proof("agrees on these cases", says, None, None, "", None, evidence.conditions.gaps, harmless, stuck)
    settled = _single_route(evidence, stuck)
    if settled:
        return Proof("single route", settled, 0.0, 0.0, "counting", None, (), harmless, ())
    overlapping = frozenset(overlap.branch_point for overlap in evidence.conditions.overlaps) | {
        each.branch_point for each in evidence.conditions.undecided if each.asks == "overlap"
    }
    high, by = _upper(plan, overlapping, tolerance, deadline)
    worst = _lower(plan, figures, names, at, high, tolerance, deadline)
    case = worst_case_of(figures, names)
    given = None if case is None else (case[0], case[1])
    return _verdict(evidence, stuck, tolerance, high, by, worst, harmless, bool(len(names)), given)


def _single_route(evidence: Evidence, stuck: Sequence[str]) -> str:
    counts, conditions = evidence.counts, evidence.conditions
    one = counts.exact and counts.per_project_most == 1 == counts.per_project_least
    clean = not (conditions.gaps or conditions.overlaps or conditions.undecided or counts.free_values or stuck)
    return "one route for every project: no choice, no overlap, no gap, no free value" if one and clean else ""


def harmless_overlaps(evidence: Evidence, seconds: float) -> tuple[tuple[str, tuple[str, str]], ...]:
    """Overlaps whose two branches are proved to give one number wherever both hold."""
    from samesum.evidence.routes.counting import deep
    from samesum.evidence.subjects.equal import Workshop, same_number

    if not evidence.conditions.overlaps:
        return ()
    found = []
    with deep():
        workshop = Workshop.of(evidence.graph, seconds)
        for overlap in evidence.conditions.overlaps:
            point = evidence.graph.branch_points[overlap.branch_point]
            first, second = (point.branches.index(branch) for branch in overlap.branches)
            if same_number(workshop, point, first, second, together=True) == "yes":
                found.append((overlap.branch_point, overlap.branches))
    return tuple(found)


def _upper(plan: Plan, overlapping: frozenset[str], tolerance: Fraction, deadline: float) -> tuple[float | None, str]:
    """A proved bound of the spread over all projects, and by what."""
    until = time.monotonic() + max(0.2, (deadline - time.monotonic()) / 3)
    found = Deviations(plan, overlapping, until).result()
    if found is None:
        return 0.0, "the formulas are the same"
    high = math.nextafter(float(found.high[0]) - float(found.low[0]), math.inf)
    bound = high if math.isfinite(high) else None
    if bound is not None and bound <= tolerance:
        return bound, "outward-rounded intervals"
    apart = further_apart(plan, tolerance, until)
    if apart.answer == "no":
        return float(tolerance), "the solver"
    return bound, "outward-rounded intervals" if bound is not None else ""


def _lower(
    plan: Plan,
    figures: Sequence[Figures],
    names: Sequence[str],
    at: Sequence[tuple[int, int]],
    high: float | None,
    tolerance: Fraction,
    deadline: float,
) -> Worst | None:
    """The widest spread found: among the cases, by search, and by asking the solver."""
    best: Worst | None = None
    given = worst_case_of(figures, names)
    if given is not None:
        spread, name, where, row = given
        own = where.batch.plan
        points = own.graph.branch_points
        values = values_of(own, project_at(own, where.batch.rows, row))

        def route(codes: dict[str, int]) -> tuple[tuple[str, str], ...]:
            return tuple((id, point.branches[codes[id]]) for id, point in points.items() if id in codes)

        best = Worst(
            spread, values, route(dict(codes_of(where.lowest, row))), route(dict(codes_of(where.highest, row))), name
        )
    if high == 0.0:
        return best
    found = widest(plan, deadline)
    if found.spread is not None and (best is None or best.spread is None or found.spread > best.spread):
        best = found
    if (best is None or best.spread is None or best.spread <= float(tolerance)) and time.monotonic() < deadline:
        apart = further_apart(plan, tolerance, deadline)
        if apart.answer == "yes":
            shown = worst_at(plan, _project(plan, apart))
            if shown.spread is not None and (best is None or best.spread is None or shown.spread > best.spread):
                best = shown
    return best


def _project(plan: Plan, apart: Apart) -> Project:
    project: Project = {}
    for fact in plan.graph.model.facts:
        size = plan.graph.sizes.get(fact.index, 0)
        for element in range(1, size + 1) if fact.index else (0,):
            id = f"{fact.name}@{element}" if fact.index else fact.name
            value = usual(fact.domain)
            if id in apart.point:
                value = apart.point[id]
            elif id in apart.names:
                code = apart.names[id]
                value = plan.named[id][code] if id in plan.named else bool(code)
            project[id] = value
    return project


def _share(value: float) -> str:
    if value >= 10:
        return f"{value:,.3g} times" if value < 1e6 else f"{value:.2e} times"
    return percent(Fraction(f"{value:.6g}"))


def _verdict(
    evidence: Evidence,
    stuck: tuple[str, ...],
    tolerance: Fraction,
    high: float | None,
    by: str,
    worst: Worst | None,
    harmless: tuple[tuple[str, tuple[str, str]], ...],
    any_cases: bool,
    given: tuple[float, str] | None,
) -> Proof:
    gaps = evidence.conditions.gaps
    low = worst.spread if worst is not None else None
    if high is not None and low is not None:
        # what rounding of floats makes of two equal numbers is no difference
        low = 0.0 if high == 0.0 or low < 1e-12 else min(low, high)
    witness = worst if low else None

    def made(verdict: Verdict, says: str) -> Proof:
        return Proof(verdict, says, low, high, by, witness, gaps, harmless, stuck)

    if low is not None and low > tolerance:
        if given is not None and given[0] > max(float(tolerance), 1e-12):
            return made("differs", f"the results of {given[1]} lie {_share(given[0])} of the reference apart")
        return made("differs", f"a project was found whose results lie {_share(low)} of the reference apart")
    if gaps or stuck or (evidence.counts.exact and evidence.counts.per_project_least == 0):
        places = ", ".join(dict.fromkeys(gap.branch_point for gap in gaps))
        return made("gap", f"some project has no result at {places}" if places else "some project has no result")
    certain = evidence.counts.exact and not evidence.conditions.undecided
    if high == 0.0 and certain:
        return made("same number", f"several routes, proved to give one number ({by})")
    if high is not None and high <= tolerance and certain:
        if high == 0.0 or not tolerance:
            return made("same number", f"several routes, proved to give one number ({by})")
        return made(
            "within tolerance", f"no project's results lie further apart than {_share(high)} of the reference ({by})"
        )
    if any_cases:
        return made("agrees on these cases", "no difference was found, and none was ruled out")
    return made("agrees on these cases", "no difference was found among the projects tried, and none was ruled out")
