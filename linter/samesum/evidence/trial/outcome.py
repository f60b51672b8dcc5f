"""The evidence of a trial: what every project gets on every route, who moves it, and what is proved for all."""

from __future__ import annotations

import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING

import numpy as np

from samesum.evidence.choosing.batches import Batch, batches_of
from samesum.evidence.routes.witness import Value
from samesum.evidence.trial.blame import Blame, Closing, closing_order, find_blame
from samesum.evidence.trial.examples import Example, examples_of
from samesum.evidence.trial.extremes import Extreme
from samesum.evidence.trial.figures import NO_COUNT, Figures, figures_of, issued
from samesum.evidence.trial.working import Line, working
from samesum.graph import DecisionGraph
from samesum.reading import model as m
from samesum.reading.cases import Case
from samesum.written import plain

if TYPE_CHECKING:
    from samesum.evidence.evidence import Evidence
    from samesum.evidence.trial.proof import Proof

Progress = Callable[[int, int], None]
"""Called with how many projects are done, out of how many."""
AT_ONCE = 2_000


@dataclass(frozen=True, slots=True)
class End:
    """A result: ``value`` before and ``issued`` after rounding, the ``route`` in the graph's order, and every setting
    and judgement as it stands there."""

    value: float
    issued: float
    route: tuple[tuple[str, str], ...]
    settings: tuple[tuple[str, Value | float], ...]
    judgements: tuple[tuple[str, bool], ...]


@dataclass(frozen=True, slots=True)
class CaseTrial:
    """The figures of one project. None where there is none: no route, no reference, too many to count. ``proved``:
    between what every result is proved to lie, where ``complete`` is false."""

    name: str
    outside: bool
    routes: int | None
    distinct_results: int | None
    lowest: End | None
    highest: End | None
    reference: End | None
    spread: float | None
    complete: bool
    proved: tuple[float | None, float | None] | None


@dataclass(frozen=True, slots=True)
class TrialEvidence:
    """``names`` of the projects; ``figures`` by batches of one size; ``at``: batch and row of each project.
    ``closing_complete`` is false when the time was up before the order's end."""

    graph: DecisionGraph
    names: Sequence[str]
    figures: tuple[Figures, ...]
    at: Sequence[tuple[int, int]]
    blame: tuple[Blame, ...]
    closing: tuple[Closing, ...]
    closing_complete: bool
    examples: tuple[Example, ...]
    proof: Proof

    def __len__(self) -> int:
        return len(self.names)

    def case(self, place: int) -> CaseTrial:
        """The figures of one project."""
        batch, row = self.at[place]
        return case_trial(self.names[place], self.figures[batch], row)

    def spreads(self) -> list[float]:
        """The spread of each project, NaN where it has none."""
        return [float(self.figures[batch].spread[row]) for batch, row in self.at]


def try_out(
    graph: DecisionGraph,
    cases: Sequence[Case],
    seconds: float = 10.0,
    tolerance: Fraction = Fraction(0),
    evidence: Evidence | None = None,
    progress: Progress | None = None,
) -> TrialEvidence:
    """Tries a rulebook out on projects, within about ``seconds``. ``evidence`` may be handed in when it was gathered
    already. Raises ``Unplannable`` when a part of the rulebook that the result needs could not be read."""
    return try_batches(
        graph,
        batches_of(graph.model, cases),
        [case.name for case in cases],
        cases,
        seconds,
        tolerance,
        evidence,
        progress,
    )


def try_batches(
    graph: DecisionGraph,
    batches: Sequence[Batch],
    names: Sequence[str],
    cases: Sequence[Case] = (),
    seconds: float = 10.0,
    tolerance: Fraction = Fraction(0),
    evidence: Evidence | None = None,
    progress: Progress | None = None,
) -> TrialEvidence:
    """The same for projects that stand in arrays already; ``cases`` only for worked examples."""
    from samesum.evidence.trial.proof import prove

    start = time.monotonic()
    figures: list[Figures] = []
    at: list[tuple[int, int]] = [(0, 0)] * len(names)
    done = 0
    for batch in batches:
        for first in range(0, batch.rows.count, AT_ONCE):
            which = slice(first, min(first + AT_ONCE, batch.rows.count))
            part = Batch(batch.plan, batch.rows.part(which), batch.places[which])
            for row, place in enumerate(part.places.tolist()):
                at[place] = (len(figures), row)
            figures.append(figures_of(part, start + max(seconds * 0.4, 1.0)))
            done += part.rows.count
            if progress is not None:
                progress(done, len(names))
    examples = examples_of(figures, at, cases)
    blame = find_blame(figures, time.monotonic() + seconds * 0.4)
    closing, complete = closing_order(figures, time.monotonic() + seconds * 0.2)
    proof = prove(graph, figures, names, at, time.monotonic() + seconds * 0.4, tolerance, evidence)
    return TrialEvidence(
        graph, names, tuple(figures), at, tuple(blame), tuple(closing), complete, tuple(examples), proof
    )


def case_trial(name: str, figures: Figures, row: int) -> CaseTrial:
    """The figures of one row."""
    routes = figures.routes[row]
    distinct = int(figures.distinct[row])
    spread = float(figures.spread[row])
    complete = bool(figures.complete[row])
    proved = None
    if not complete:
        low, high = float(figures.proved_low[row]), float(figures.proved_high[row])
        proved = (low if np.isfinite(low) else None, high if np.isfinite(high) else None)
    return CaseTrial(
        name,
        bool(figures.outside[row]),
        None if routes == NO_COUNT else int(routes),
        None if distinct == NO_COUNT else distinct,
        end_of(figures, figures.lowest, row, 0),
        end_of(figures, figures.highest, row, 1),
        end_of(figures, figures.reference, row, 2),
        spread if np.isfinite(spread) else None,
        complete,
        proved,
    )


def end_of(figures: Figures, extreme: Extreme, row: int, which: int) -> End | None:
    """One result of one row, None where there is none. ``which``: 0 lowest, 1 highest, 2 reference."""
    value = float(extreme.value[row])
    if not np.isfinite(value):
        return None
    plan = figures.batch.plan
    points = plan.graph.branch_points
    taken = ((points[id], codes[row]) for id, codes in extreme.route.items() if codes[row] >= 0)
    route = tuple([(point.id, point.branches[code]) for point, code in taken if point.is_written])
    settings: list[tuple[str, Value | float]] = []
    for setting in plan.graph.model.settings:
        if isinstance(setting.domain, m.Range):
            settings.append((setting.name, float(extreme.inputs.numbers[setting.name][row])))
        elif isinstance(setting.domain, m.OneOf):
            settings.append((setting.name, setting.domain.values[int(extreme.inputs.codes[setting.name][row])]))
        else:
            settings.append((setting.name, bool(extreme.inputs.flags[setting.name][row])))
    judgements = tuple((each.name, bool(extreme.inputs.flags[each.name][row])) for each in plan.graph.model.judgements)
    return End(value, float(figures.issued[which][row]), route, tuple(settings), judgements)


@dataclass(frozen=True, slots=True)
class Explained:
    """A calculation step by step, and what it comes to in a sentence."""

    lines: tuple[Line, ...]
    says: str


def explained(graph: DecisionGraph, case: Case, route: str) -> Explained | str:
    """The calculation of one project on a route: ``lowest``, ``highest``, ``reference``, or branches as in
    ``soil_carbon=plots,methane=2`` (the reference elsewhere). A text when the route cannot be understood."""
    from samesum.reading.cases import branch_points, matching
    from samesum.reading.words import nearest

    [batch] = batches_of(graph.model, [case])
    taken: dict[str, str] = {}
    values = dict(case.values)
    if route in ("lowest", "highest"):
        figures = figures_of(batch, time.monotonic() + 5.0)
        end = end_of(figures, figures.lowest if route == "lowest" else figures.highest, 0, int(route == "highest"))
        if end is None:
            return f"{case.name} has no result on any route"
        taken = dict(end.route)
        for name, value in (*end.settings, *end.judgements):
            values[name] = Fraction(repr(value)) if isinstance(value, float) else value
    elif route != "reference":
        known = branch_points(batch.plan.graph.model)
        for part in filter(None, (each.strip() for each in route.split(","))):
            id, equals, branch = (each.strip() for each in part.partition("="))
            points = matching(known, id)
            if not equals or not points:
                close = nearest(id, known)
                return f"`{id}` is no branch point of {case.name}" + (f"; did you mean `{close}`?" if close else "")
            if branch not in known[points[0]]:
                return f"`{id}` has no branch `{branch}`; its branches are {', '.join(known[points[0]])}"
            taken.update(dict.fromkeys(points, branch))
    lines = working(batch.plan.graph, values, taken)
    result = graph.model.result
    assert result is not None
    final = next((line.value for line in lines if line.id == result.name), None)
    if final is None:
        return Explained(tuple(lines), "There is no result on this route.")
    after = float(issued(np.array([float(final)]), result)[0])
    unit = f" {result.unit.text}" if result.unit.text else ""
    how = f", rounded {result.rounding} to {plain(result.step)}" if result.rounding and result.step else ""
    return Explained(tuple(lines), f"Issued: {after:,.10g}{unit}{how}")
