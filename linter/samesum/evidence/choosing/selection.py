"""What choice does to a programme as a whole: over-issuance by behaviour, for the rulebook and for each choice alone.

Takes a model, gives a ``Selection``. Over-issuance is all credits issued over all true credits, less 1, so that a
project counts by its tonnes. Figures come from a simulation in blocks (``trials_of_choice``); where a closed form holds
exactly for one choice, its value stands in front and the simulated one beside it.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from samesum.evidence.choosing.bench import Row, Sums, Terms
from samesum.evidence.choosing.closed_forms import enrolment_by_estimate, enrolment_by_truth
from samesum.evidence.choosing.deductions import Deduction, solve_deductions
from samesum.evidence.choosing.latitudes import Latitude, find_latitudes
from samesum.evidence.choosing.leaning import leaning
from samesum.evidence.choosing.projects import Stretch, Supply, projects_of, stretches
from samesum.evidence.choosing.tally import BINS, Tally
from samesum.evidence.choosing.trials_of_choice import (
    ANEW,
    INDIFFERENT,
    LOWEST,
    MANDATED,
    PICK,
    SECOND,
    STAY,
    WHOLE,
    work,
)
from samesum.evidence.choosing.workers import worked
from samesum.reading import model as m

HEADLINE = SECOND
"""The behaviour that rankings, closures and findings go by: common practice, no source."""


@dataclass(frozen=True, slots=True)
class Figure:
    """One row. ``over_issuance`` is the closed form's where one holds (``closed_form``), else the simulated one; the
    standard error is that of the same number. ``difference``: against everybody on the reference, same projects and
    errors. ``joined``: the same among projects that enrol, and the share that does."""

    behaviour: str
    option: str
    over_issuance: float
    standard_error: float
    over_credited: float
    closed_form: float | None
    simulated: float
    simulated_error: float
    difference: float
    difference_error: float
    joined: Enrolment | None = None


@dataclass(frozen=True, slots=True)
class Enrolment:
    over_issuance: float
    standard_error: float
    share: float
    closed_form: float | None = None
    closed_share: float | None = None


@dataclass(frozen=True, slots=True)
class Estimate:
    """A simulated number and its standard error."""

    value: float
    error: float


@dataclass(frozen=True, slots=True)
class Periods:
    """Mean over-issuance over the whole crediting period. ``stay``: each option errs alike in every period, and the
    developer knows from then on what was tried; ``anew``: every estimate is made afresh each period."""

    behaviour: str
    stay: Mapping[str, Estimate]
    anew: Mapping[str, Estimate]


@dataclass(frozen=True, slots=True)
class Closure:
    """``kind``: mandate, lowest, fixed, deduct, in order. ``left``: over-issuance of this latitude alone when it is
    closed so; ``whole_left``: of the whole rulebook, the others left as they are. ``percent``: what is deducted.
    ``fixed`` is judged over the whole crediting period: ``left`` with errors made anew each period, ``stay`` with the
    same in each."""

    kind: str
    option: str
    left: Estimate
    whole_left: Estimate | None
    percent: Estimate | None = None
    behaviour: str = ""
    stay: Estimate | None = None


@dataclass(frozen=True, slots=True)
class Found:
    """All about one latitude. ``per_thousand``: tonnes over-issued for 1,000 true in the headline behaviour, beyond
    what is over-issued when everybody takes the reference."""

    latitude: Latitude
    figures: tuple[Figure, ...]
    per_thousand: float
    per_thousand_error: float
    histograms: Mapping[str, tuple[int, ...]]
    periods: tuple[Periods, ...]
    truth_scatters: Mapping[str, Enrolment]
    closures: tuple[Closure, ...]


@dataclass(frozen=True, slots=True)
class Selection:
    """The answer of ``samesum bias``."""

    model: m.Model
    terms: Terms
    projects: int
    supply: Supply
    figures: tuple[Figure, ...]
    histograms: Mapping[str, tuple[int, ...]]
    periods: tuple[Periods, ...]
    found: tuple[Found, ...]

    @property
    def ranking(self) -> tuple[Found, ...]:
        """What is over-issued most stands first."""
        return tuple(sorted(self.found, key=lambda each: (-each.per_thousand, each.latitude.id)))


NO_TRUE_CREDITS = (
    "all projects together have no true credits above zero, so that nothing can be measured against them; "
    "give projects with --inputs"
)
NO_RESULT = "no project has a result with what the rulebook takes; `samesum check` names the gap"


class NothingTrue(Exception):
    """The true credits of all projects together are not above zero, so that nothing can be measured against them."""


Progress = Callable[[int, int], None]


def select(
    supply: Supply,
    projects: int,
    terms: Terms,
    jobs: int = 1,
    progress: Progress | None = None,
    closures: bool = True,
) -> Selection:
    """Simulates so many projects. ``progress`` is told how many of how many are done. The answer does not depend on
    ``jobs``. Raises ``NothingTrue``, and ``projects.CannotDraw`` when projects cannot be drawn."""
    model = supply.model
    latitudes = _latitudes(supply)
    if closures:
        latitudes = tuple(
            replace(each, leaning=leaning(supply, each, terms)) if each.kind == "choice" else each for each in latitudes
        )
    sums = Sums()
    done = 0
    parts = stretches(supply, projects)
    _keep_memory()

    def one(stretch: Stretch) -> Sums:
        return work(projects_of(supply, stretch, terms.seed), stretch.number, latitudes, terms, model.periods)

    for stretch, found in worked(parts, one, jobs):
        sums.add(found)
        done += stretch.count
        if progress is not None:
            progress(done, projects)
    everything = sums.tallies.get((WHOLE, MANDATED, "reference"))
    if everything is None or not everything.t > 0:
        nowhere = everything is not None and not everything.projects
        raise NothingTrue(NO_RESULT if nowhere else NO_TRUE_CREDITS)
    rows = _Rows(sums, latitudes, terms.join)
    deductions: Mapping[tuple[str, str], Deduction] = {}
    if closures:
        deductions = solve_deductions(supply, parts, latitudes, terms, (SECOND, PICK))
    return Selection(
        model=model,
        terms=terms,
        projects=everything.projects + everything.outside,
        supply=supply,
        figures=rows.figures(WHOLE),
        histograms=rows.histograms(WHOLE),
        periods=rows.periods(WHOLE),
        found=tuple(rows.found(each, deductions, closures) for each in latitudes if rows.has(each)),
    )


def _latitudes(supply: Supply) -> tuple[Latitude, ...]:
    """Those of the largest projects first, then what only others have."""
    found: dict[str, Latitude] = {}
    for source in sorted(supply.sources, key=lambda each: -len(each.program.points)):
        for latitude in find_latitudes(source.program):
            found.setdefault(latitude.id, latitude)
    return tuple(found.values())


def _keep_memory() -> None:
    """Arrays of a block are made and dropped by the thousand. Once the C library has seen a large array come and go,
    it keeps such memory at hand instead of giving it back to the system each time (twice as fast)."""
    large = np.empty(31 * 2**20, dtype=np.uint8)
    del large


# --- rows → figures ------------------------------------------------------------------------------


class _Rows:
    def __init__(self, sums: Sums, latitudes: Sequence[Latitude], k: float | None) -> None:
        self.sums, self.latitudes, self.k = sums, latitudes, k
        there = [each for each in latitudes if self.has(each)]
        alone = len(there) == 1 and there[0].kind == "choice" and there[0].by == "developer"
        self.only = there[0] if alone else None

    def has(self, latitude: Latitude) -> bool:
        return any(row[0] == latitude.id for row in self.sums.tallies)

    def figures(self, id: str) -> tuple[Figure, ...]:
        made = []
        for row, found in self.sums.tallies.items():
            if len(row) == 3 and row[0] == id and row[1] in (MANDATED, SECOND, PICK, INDIFFERENT):
                made.append(self.figure(row, found))
        order = (MANDATED, SECOND, PICK, INDIFFERENT)
        return tuple(sorted(made, key=lambda each: order.index(each.behaviour)))

    def figure(self, row: Row, found: Tally) -> Figure:
        closed = self.closed(row)
        # A formula counts only when it held for every project.
        holds = closed is not None and closed.projects == found.projects + found.outside
        joined = self.sums.tallies.get((*row, "joined"))
        return Figure(
            behaviour=row[1],
            option=row[2],
            over_issuance=closed.over_issuance if closed is not None and holds else found.over_issuance,
            standard_error=closed.standard_error if closed is not None and holds else found.standard_error,
            over_credited=found.over_credited,
            closed_form=closed.over_issuance if closed is not None and holds else None,
            simulated=found.over_issuance,
            simulated_error=found.standard_error,
            difference=found.difference,
            difference_error=found.difference_error,
            joined=self.enrolment(row, joined) if joined is not None else None,
        )

    def closed(self, row: Row) -> Tally | None:
        """The closed form's row. A rulebook with one latitude, the developer's, is that latitude."""
        if row[0] != WHOLE:
            return self.sums.tallies.get((*row, "closed"))
        if self.only is None:
            return None
        if row[2] == "cheapest":
            return self.sums.tallies.get((*row, "closed"))
        reference = self.only.candidates[self.only.reference]
        return self.sums.tallies.get((self.only.id, row[1], reference if row[2] == "reference" else row[2], "closed"))

    def enrolment(self, row: Row, joined: Tally, truth_scatters: bool = False) -> Enrolment:
        """A row among those who join; with the closed form where one option is mandated and counts with the same
        weight in every project."""
        found = Enrolment(joined.over_issuance, joined.standard_error, joined.share)
        latitude = next((each for each in self.latitudes if each.id == row[0]), None)
        if latitude is None or row[1] != MANDATED or self.k is None:
            return found
        weights = [each for key, each in self.sums.tallies.items() if key[:2] == (row[0], "weight")]
        if len(weights) != 1 or weights[0].standard_error > 0 or row[2] not in latitude.noises:
            return found
        weight = weights[0].over_issuance
        bias, error = (weight * part for part in latitude.noises[row[2]])
        form = enrolment_by_truth if truth_scatters else enrolment_by_estimate
        exact = form(abs(error), self.k, bias)
        return replace(found, closed_form=exact.over_issuance, closed_share=exact.share)

    def histograms(self, id: str) -> dict[str, tuple[int, ...]]:
        found = {}
        for behaviour in (MANDATED, SECOND):
            counts = self.sums.histograms.get((id, behaviour))
            found[behaviour] = tuple(int(each) for each in counts) if counts is not None else (0,) * BINS
        return found

    def estimate(self, row: Row) -> Estimate | None:
        found = self.sums.tallies.get(row)
        return None if found is None else Estimate(found.over_issuance, found.standard_error)

    def periods(self, id: str) -> tuple[Periods, ...]:
        made = []
        names = ("as written", "all fixed") if id == WHOLE else ("open", "fixed")
        for behaviour in (SECOND, PICK):
            stay, anew = (
                {name: found for name in names if (found := self.estimate((id, "periods", behaviour, how, name)))}
                for how in (STAY, ANEW)
            )
            if stay:
                made.append(Periods(behaviour, stay, anew))
        return tuple(made)

    def found(self, latitude: Latitude, deductions: Mapping[tuple[str, str], Deduction], closures: bool) -> Found:
        id = latitude.id
        figures = self.figures(id)
        headline = next((each for each in figures if each.behaviour == HEADLINE), None)
        reference = latitude.candidates[latitude.reference] if latitude.kind != "overlap" else "in order"
        mandated = next((each for each in figures if each.behaviour == MANDATED and each.option == reference), None)
        more = error = 0.0
        if headline is not None and latitude.withheld:
            # A deduction against this choice lowers the reference as well: what it leaves is held against the truth.
            more, error = headline.over_issuance, headline.standard_error
        elif headline is not None and mandated is not None:
            exact = headline.closed_form is not None and mandated.closed_form is not None
            more = headline.over_issuance - mandated.over_issuance if exact else headline.difference
            error = headline.standard_error if exact else headline.difference_error
        scatters = {
            row[2]: self.enrolment(row, found, truth_scatters=True)
            for row, found in self.sums.tallies.items()
            if row[0] == id and row[3:] == ("truth scatters", "joined")
        }
        return Found(
            latitude=latitude,
            figures=figures,
            per_thousand=1000 * more,
            per_thousand_error=1000 * error,
            histograms=self.histograms(id),
            periods=self.periods(id),
            truth_scatters=scatters,
            closures=self.closures(latitude, figures, deductions) if closures else (),
        )

    def closures(
        self, latitude: Latitude, figures: Sequence[Figure], deductions: Mapping[tuple[str, str], Deduction]
    ) -> tuple[Closure, ...]:
        id = latitude.id
        if latitude.kind == "stated":
            return ()
        made = []
        for each in figures:
            if each.behaviour == MANDATED:
                kind = "in order" if latitude.kind == "overlap" else "mandate"
                left = Estimate(each.over_issuance, each.standard_error)
                whole = self.estimate((WHOLE, id, MANDATED, each.option))
                made.append(Closure(kind, "" if kind == "in order" else each.option, left, whole))
        if latitude.kind != "choice":
            return tuple(made)
        if latitude.leaning:
            lowest = self.figure((id, LOWEST, ""), self.sums.tallies[id, LOWEST, ""])
            left = Estimate(lowest.over_issuance, lowest.standard_error)
            made.append(Closure("lowest", "", left, self.estimate((WHOLE, id, LOWEST, ""))))
        fixed = self.estimate((id, "periods", SECOND, ANEW, "fixed"))
        if fixed is not None and latitude.timing != "validation":
            stay = self.estimate((id, "periods", SECOND, STAY, "fixed"))
            made.append(Closure("fixed", "", fixed, None, behaviour=SECOND, stay=stay))
        for behaviour in (SECOND, PICK):
            found = deductions.get((id, behaviour))
            if found is not None:
                made.append(
                    Closure(
                        "deduct",
                        "",
                        Estimate(found.left, found.left_error),
                        None,
                        Estimate(found.share, found.error),
                        behaviour,
                    )
                )
        return tuple(made)
