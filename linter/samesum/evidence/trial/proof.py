"""What is proved for all projects: one route, one number, a tolerance, or a project that refutes it."""

from __future__ import annotations

import math
import time
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING, Literal

from samesum.evidence.routes.conditions import Gap
from samesum.evidence.trial.apart import further_apart
from samesum.evidence.trial.bounds import Ranges, domain_boxes
from samesum.evidence.trial.bracket import CLOSE, proved_worst, sizes_below
from samesum.evidence.trial.deviation import Deviations
from samesum.evidence.trial.figures import Figures, codes_of
from samesum.evidence.trial.plan import Plan, Unplannable, make_plan, resized
from samesum.evidence.trial.projects import values_of
from samesum.evidence.trial.unbounded import no_bound
from samesum.evidence.trial.worst import Worst, project_at, project_of, wider, widest, worst_at, worst_case_of
from samesum.graph import DecisionGraph
from samesum.written import of_reference

if TYPE_CHECKING:
    from samesum.evidence.evidence import Evidence

INTERVALS = "outward-rounded intervals"
MOST_SIZES = 200

Verdict = Literal["single route", "same number", "within tolerance", "agrees on these cases", "differs", "gap"]


@dataclass(frozen=True, slots=True)
class Proof:
    """``low`` is reached by ``witness`` (surpassed where its reference is zero, so that it has no spread); ``high`` is
    proved, None where no bound was. ``by`` says how it was proved, ``unbounded`` why there can be no bound, where that
    is known. ``gaps``: branch points at which some project has no result. ``harmless``: overlaps proved to give one
    number (branch point, branches)."""

    verdict: Verdict
    says: str
    low: float | None
    high: float | None
    by: str
    witness: Worst | None
    gaps: tuple[Gap, ...]
    harmless: tuple[tuple[str, tuple[str, str]], ...]
    stuck_cases: tuple[str, ...]
    unbounded: str = ""


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
    if _without_results(plan):
        says = "no project has a result"
        return Proof("gap", says, None, None, "", None, evidence.conditions.gaps, harmless, stuck)
    overlapping = frozenset(overlap.branch_point for overlap in evidence.conditions.overlaps) | {
        each.branch_point for each in evidence.conditions.undecided if each.asks == "overlap"
    }
    high, by = _upper(plan, overlapping, tolerance, deadline)
    worst = _lower(plan, figures, names, at, high, tolerance, deadline)
    low, high, by, worst, unbounded = _closer(plan, high, by, worst, deadline)
    case = worst_case_of(figures, names)
    given = None if case is None else (case[0], case[1])
    return _verdict(evidence, stuck, tolerance, low, high, by, worst, harmless, bool(len(names)), given, unbounded)


def _without_results(plan: Plan) -> bool:
    """Whether it is proved that no project has a result, whatever its size."""
    if not _is_empty(plan):
        return False
    smaller = _smaller(plan)
    return smaller is not None and all(_is_empty(each) for each in smaller)


def _is_empty(plan: Plan) -> bool:
    value = Ranges(plan, domain_boxes(plan)).number(plan.root).value
    return bool(value.low[0] > value.high[0])


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
    high, by = _upper_of(plan, overlapping, tolerance, until)
    smaller = None if high is None else _smaller(plan)
    if high is None or smaller is None:
        return None, ""
    for each in smaller:
        also, how = _upper_of(each, overlapping | _loose(each), tolerance, until)
        if also is None:
            return None, ""
        high, by = max((high, by), (also, how))
    return high, by


def _upper_of(plan: Plan, overlapping: frozenset[str], tolerance: Fraction, until: float) -> tuple[float | None, str]:
    """The same over projects of the plan's size."""
    found = Deviations(plan, overlapping, until).result()
    if found is None:
        return 0.0, "the formulas are the same"
    high = math.nextafter(float(found.high[0]) - float(found.low[0]), math.inf)
    bound = high if math.isfinite(high) else None
    if bound is not None and bound <= tolerance:
        return bound, INTERVALS
    apart = further_apart(plan, tolerance, until)
    if apart.answer == "no":
        return min(float(tolerance), math.inf if bound is None else bound), "the solver"
    return bound, INTERVALS if bound is not None else ""


def _smaller(plan: Plan) -> list[Plan] | None:
    """The plans of all projects with fewer elements; None when there are too many sizes."""
    model = plan.graph.model
    if math.prod(each.most for each in model.indices) > MOST_SIZES:
        return None
    sizes = sizes_below([(each.name, each.most) for each in model.indices])
    return [make_plan(resized(model, each)) for each in sizes]


def _loose(plan: Plan) -> frozenset[str]:
    """Cases that ask for sums over elements: whether two of them hold at once may rest on how many there are."""
    asked: list[frozenset[str]] = []
    for node in plan.nodes:
        own = {node.name.rpartition("@")[2]} if node.kind in ("input", "code", "holds") and "@" in node.name else set()
        asked.append(frozenset(own).union(*(asked[each] for each in node.args)))
    return frozenset(
        id
        for id, number in plan.points.items()
        if plan.graph.branch_points[id].kind == "cases"
        and asked[number] - {id.partition("/")[0].rpartition("@")[2] if "@" in id else ""}
    )


def _closer(
    plan: Plan, high: float | None, by: str, worst: Worst | None, deadline: float
) -> tuple[float | None, float | None, str, Worst | None, str]:
    """Both ends of the worst case nearer to each other: the widest spread found, the bound, by what, the project that
    shows it, and why there is no bound where there is none. A project that shows that there is none has no spread
    where its reference is zero; it lies further apart than the widest spread found all the same."""
    low = None if worst is None else worst.spread
    if high is not None and high <= (low or 0.0) * (1 + CLOSE):
        return low, high, by, worst, ""
    if high is None:
        none = no_bound(plan, time.monotonic() + (deadline - time.monotonic()) / 3)
        if none is not None:
            shown = worst_at(plan, none.project)
            return (low if shown.spread is None else shown.spread), None, "", shown, none.why
    smaller = _smaller(plan)
    if smaller is not None:
        until = time.monotonic() + (deadline - time.monotonic()) * 2 / 3
        proved, found = proved_worst((plan, *smaller), low or 0.0, until)
        worst = worst if found is None else found
        if proved is not None and (high is None or proved < high):
            high, by = proved, INTERVALS
    low = None if worst is None else worst.spread
    if high is None or high > (low or 0.0) * (1 + CLOSE):
        worst = wider(plan, worst, deadline) or worst
    return None if worst is None else worst.spread, high, by, worst, ""


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
            shown = worst_at(plan, project_of(plan, apart.point, apart.names))
            if shown.spread is not None and (best is None or best.spread is None or shown.spread > best.spread):
                best = shown
    return best


def _verdict(
    evidence: Evidence,
    stuck: tuple[str, ...],
    tolerance: Fraction,
    low: float | None,
    high: float | None,
    by: str,
    worst: Worst | None,
    harmless: tuple[tuple[str, tuple[str, str]], ...],
    any_cases: bool,
    given: tuple[float, str] | None,
    unbounded: str,
) -> Proof:
    gaps = evidence.conditions.gaps
    if high is not None and low is not None:
        # what rounding of floats makes of two equal numbers is no difference
        low = 0.0 if high == 0.0 or low < 1e-12 else min(low, high)
    witness = worst if low or unbounded else None

    def made(verdict: Verdict, says: str) -> Proof:
        return Proof(verdict, says, low, high, by, witness, gaps, harmless, stuck, unbounded)

    if given is not None and given[0] > max(float(tolerance), 1e-12):
        return made("differs", f"the results of {given[1]} lie {of_reference(given[0])} apart")
    if unbounded and (worst is None or worst.spread is None):
        return made("differs", "a project was found whose reference result is zero and whose results lie apart")
    if low is not None and low > tolerance:
        return made("differs", f"a project was found whose results lie {of_reference(low)} apart")
    if gaps or stuck or (evidence.counts.exact and evidence.counts.per_project_least == 0):
        places = ", ".join(dict.fromkeys(gap.branch_point for gap in gaps))
        return made("gap", f"some project has no result at {places}" if places else "some project has no result")
    certain = evidence.counts.exact and not evidence.conditions.undecided
    if high == 0.0 and certain:
        return made("same number", f"several routes, proved to give one number ({by})")
    if high is not None and high <= tolerance and certain:
        if high == 0.0 or not tolerance:
            return made("same number", f"several routes, proved to give one number ({by})")
        return made("within tolerance", f"no project's results lie further apart than {of_reference(high)} ({by})")
    if any_cases:
        return made("agrees on these cases", "no difference was found, and none was ruled out")
    return made("agrees on these cases", "no difference was found among the projects tried, and none was ruled out")
