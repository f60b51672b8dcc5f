"""Worked examples of the methodology itself: does its own number come out?"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction

import numpy as np

from samesum.evidence.routes.replay import route_codes
from samesum.evidence.routes.witness import Value
from samesum.evidence.trial.deciding import decision
from samesum.evidence.trial.figures import Figures, issued
from samesum.evidence.trial.values import Evaluator
from samesum.evidence.trial.working import why_no_result
from samesum.reading.cases import Case
from samesum.spans import Span
from samesum.written import plain


@dataclass(frozen=True, slots=True)
class Example:
    """A worked example. ``agrees``: the expected number came out, on the expected route. ``astray``: branches of the
    expected route that are not open or not reached there. ``route`` is the whole route taken. ``trouble``: why there is
    no value, "" where that is not known."""

    case: str
    span: Span
    expected: Fraction | None
    value: float | None
    issued: float | None
    agrees: bool
    astray: tuple[tuple[str, str], ...]
    route: tuple[tuple[str, str], ...]
    inputs: Mapping[str, Value | tuple[Value, ...]]
    trouble: str = ""


def examples_of(figures: Sequence[Figures], at: Sequence[tuple[int, int]], cases: Sequence[Case]) -> list[Example]:
    """Every project that says what is expected, worked out on the route it names; the reference elsewhere."""
    found = []
    for place, case in enumerate(cases):
        if case.expected is not None:
            batch, row = at[place]
            found.append(_example(case, figures[batch], row))
    return found


def _example(case: Case, figures: Figures, row: int) -> Example:
    plan = figures.batch.plan
    expected = case.expected
    assert expected is not None
    points = plan.graph.branch_points
    codes = {
        id: np.array([points[id].branches.index(branch)])
        for id, branch in expected.route
        if id in points and branch in points[id].branches
    }
    inputs = replace(figures.batch.rows.part(slice(row, row + 1)), free={})
    evaluator = Evaluator(plan, inputs, decide=decision(codes, plan))
    value = float(np.broadcast_to(evaluator.number(plan.root).data, (1,))[0])
    taken = {id: int(found[0]) for id, found in route_codes(evaluator).items() if found[0] >= 0}
    route = tuple((id, point.branches[taken[id]]) for id, point in points.items() if id in taken)
    astray = tuple((id, branch) for id, branch in expected.route if dict(route).get(id) != branch)
    result = plan.graph.model.result
    assert result is not None
    if np.isnan(value):
        trouble = why_no_result(plan.graph, case.values, dict(expected.route))
        return Example(case.name, expected.span, expected.value, None, None, False, astray, route, case.values, trouble)
    after = float(issued(np.array([value]), result)[0])
    agrees = not astray and (expected.value is None or _same(expected.value, expected.decimals, value, after))
    return Example(case.name, expected.span, expected.value, value, after, agrees, astray, route, case.values)


def _same(expected: Fraction, decimals: int, value: float, after: float) -> bool:
    """Whether the issued number is the expected one, or the number before rounding is, to the decimals written."""
    wanted = float(expected)
    if abs(after - wanted) <= 1e-9 * max(1.0, abs(wanted)):
        return True
    return decimals > 0 and abs(value - wanted) <= 0.5 * 10.0**-decimals * (1 + 1e-9)


def described(example: Example) -> str:
    """What went astray, in a sentence."""
    if example.value is None:
        why = f", because {example.trouble}" if example.trouble else ""
        return f"there is no result on the route of the worked example{why}"
    if example.astray:
        id, branch = example.astray[0]
        took = dict(example.route).get(id)
        now = f"takes {took}" if took is not None else "is not reached"
        return f"the worked example takes {branch} at {id}, but there {id} {now}"
    if example.agrees or example.expected is None or example.issued is None:
        return "the worked example comes out"
    return f"the worked example says {plain(example.expected)}, the rulebook gives {plain(Fraction(example.issued))}"
