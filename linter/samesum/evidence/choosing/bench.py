"""One block of projects on the bench: every behaviour tried on the same projects with the same errors.

``work`` gives sums by row; whoever adds up the blocks needs nothing else. All behaviours share the random numbers, so
that what they differ in is what the behaviour does.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import numpy.typing as npt

from samesum.evidence.choosing import behaviours as take
from samesum.evidence.choosing.latitudes import Latitude
from samesum.evidence.choosing.programs import Program
from samesum.evidence.choosing.projects import Projects, generator, truth
from samesum.evidence.choosing.simulate import World, evaluate
from samesum.evidence.choosing.tally import Tally, histogram, tally, truth_sums
from samesum.reading import model as m

Array = npt.NDArray[Any]
Row = tuple[str, ...]
MOST_SWEEPS = 2


@dataclass(frozen=True, slots=True)
class Terms:
    """What a simulation is asked: ``price`` money a credit (None: costs only order the options), ``join`` the k of
    enrolment (None: no enrolment)."""

    seed: int
    price: float | None = None
    join: float | None = None


@dataclass(slots=True)
class Sums:
    """What blocks add up to: tallies, histograms and plain sums by row."""

    tallies: dict[Row, Tally] = field(default_factory=dict)
    histograms: dict[Row, Array] = field(default_factory=dict)
    sums: dict[Row, float] = field(default_factory=dict)

    def add(self, other: Sums) -> None:
        for row, found in other.tallies.items():
            self.tallies[row] = self.tallies[row] + found if row in self.tallies else found
        for row, counts in other.histograms.items():
            self.histograms[row] = self.histograms[row] + counts if row in self.histograms else counts
        for row, value in other.sums.items():
            self.sums[row] = self.sums.get(row, 0.0) + value


@dataclass(frozen=True, slots=True)
class Decided:
    """What one latitude's developer does in each behaviour: a branch or an input's value, by point or name."""

    second: Mapping[str, Any]
    pick: Mapping[str, Any]
    indifferent: Mapping[str, Any]
    learned: Mapping[str, Any]


@dataclass(slots=True)
class Bench:
    """The projects of a block, their truth, and the errors of every option (``errors``; ``fresh``: those of a later
    period, drawn anew)."""

    program: Program
    projects: Projects
    terms: Terms
    number: int
    truth_values: list[Any]
    truth: Array
    errors: dict[tuple[str, int], Array]
    fresh: dict[tuple[str, int], Array]
    sums: Sums
    truth_sums: tuple[float, float] = (0.0, 0.0)

    # -- worlds -------------------------------------------------------------------------

    def full(self, values: Sequence[Any]) -> Array:
        return np.broadcast_to(np.asarray(values[self.program.result], dtype=np.float64), self.truth.shape)

    def values(self, world: World, base: Sequence[Any], keys: Sequence[str]) -> list[Any]:
        return evaluate(self.program, self.projects.inputs, world, base, self.program.after(keys))

    def column(self, value: Any) -> Array:
        return np.broadcast_to(np.asarray(value), self.truth.shape)

    def set_to(self, name: str, value: Any) -> Any:
        """An input at a value, except where the project gives it."""
        held = self.projects.given.get(name)
        return self.column(value) if held is None else np.where(held, self.projects.inputs[name], value)


def prepare(projects: Projects, number: int, latitudes: Sequence[Latitude], terms: Terms, periods: int) -> Bench:
    """The bench of a block of projects."""
    program = projects.program
    values = evaluate(program, projects.inputs, truth(program))
    bench = Bench(program, projects, terms, number, values, np.zeros(projects.count), {}, {}, Sums())
    bench.truth = bench.full(values)
    bench.truth_sums = truth_sums(bench.truth)
    bench.errors = draw_errors(program, terms.seed, number, projects.count, "error")
    if periods > 1 and any(latitude.kind == "choice" for latitude in latitudes):
        bench.fresh = draw_errors(program, terms.seed, number, projects.count, "error in a later period")
    return bench


def draw_errors(program: Program, seed: int, block: int, count: int, what: str) -> dict[tuple[str, int], Array]:
    """e of every option that states an error or a bias: normal, with the correlation that the choice states.

    e_i = b_i + s_i (a x_i + c Σx) with a² = 1−ρ and c = (√(a²+nρ) − a)/n gives n normals whose correlation with each
    other is ρ, for every ρ that n normals can have in common.
    """
    made: dict[tuple[str, int], Array] = {}
    for id, choosing in program.choosing.items():
        body = choosing.point.body
        options = body.options if isinstance(body, (m.Choice, m.Follows)) else ()
        correlation = float(body.correlated or 0) if isinstance(body, m.Choice) else 0.0
        noisy = [number for number, stated in enumerate(choosing.stated) if stated]
        draws = {
            number: generator(seed, block, what, id, options[number].name).standard_normal(count)
            for number in noisy
            if options[number].error
        }
        shared: Any = 0.0
        own = 1.0
        if correlation and len(draws) > 1:
            own = float(np.sqrt(1.0 - correlation))
            together = float(np.sqrt(max(0.0, 1.0 - correlation + len(draws) * correlation)))
            shared = (together - own) / len(draws) * sum(draws.values())
        for number in noisy:
            bias, error = float(options[number].bias or 0), float(options[number].error or 0)
            if number in draws:
                made[id, number] = bias + error * (own * draws[number] + shared)
            else:
                made[id, number] = np.full(count, bias)
    return made


# --- one latitude alone --------------------------------------------------------------------------


@dataclass(slots=True)
class Alone:
    """One latitude with all others on their reference and without error."""

    bench: Bench
    latitude: Latitude
    points: tuple[str, ...]
    base: list[Any]
    deduction: float = 0.0

    @property
    def errors(self) -> dict[tuple[str, int], Array]:
        return {key: error for key, error in self.bench.errors.items() if key[0] in self.points}

    def world(self, decided: Mapping[str, Any], errors: Mapping[tuple[str, int], Array]) -> World:
        program = self.bench.program
        withheld = {name: value if name in self.latitude.withheld else 0.0 for name, value in program.withheld.items()}
        factors = {self.latitude.id: 1.0 - self.deduction} if self.deduction else {}
        if self.latitude.is_input:
            return World(inputs={**withheld, **decided})
        return World(decided, withheld, errors, factors)

    def taking(self, decided: Mapping[str, Any], found: Mapping[str, tuple[take.Offer, list[Array]]]) -> Array:
        """What everybody is credited, told what each option alone gives: of a single choice nothing has to be worked
        out again."""
        point = self.points[0]
        if len(self.points) > 1 or point not in found or self.latitude.kind not in ("choice", "overlap"):
            return self.credited(decided)
        if ways_in(self.bench.program, point):
            return self.credited(decided)
        offer, credits = found[point]
        number = decided[point]
        if isinstance(number, int):
            return credits[number]
        return offer.at(decided[point].astype(np.int64), offer.credits)

    def credited(self, decided: Mapping[str, Any], errors: Mapping[tuple[str, int], Array] | None = None) -> Array:
        """What everybody is credited."""
        world = self.world(decided, self.errors if errors is None else errors)
        return self.bench.full(self.bench.values(world, self.base, self.points))


def alone(bench: Bench, latitude: Latitude, deduction: float = 0.0) -> Alone:
    """A latitude of this block on its own. ``deduction`` is taken off whatever the choice gives."""
    made = Alone(bench, latitude, latitude.points(bench.program), bench.truth_values, deduction)
    if latitude.withheld or deduction:
        keys = (*latitude.withheld, *made.points)
        made.base = bench.values(made.world({}, {}), bench.truth_values, keys)
    return made


def aimed_at(one: Alone, id: str) -> Array:
    """What a second look holds an element's credits against: those with this element at its truth and all else as
    it stands. Without a deduction that is the truth itself; with one, what the others lose is none of its doing."""
    bench = one.bench
    if one.base is bench.truth_values:
        return bench.truth
    select = bench.program.selects[id]
    pinned = list(one.base)
    pinned[select] = bench.truth_values[select]
    later = [number for number in bench.program.after((id,)) if number > select]
    return bench.full(evaluate(bench.program, bench.projects.inputs, one.world({}, {}), pinned, later))


def offers(one: Alone) -> dict[str, tuple[take.Offer, list[Array]]]:
    """What each point of a choice, an overlap or an input offers, decided for itself."""
    found = {}
    for point in one.points:
        if one.latitude.kind in ("setting", "judgement"):
            found[point] = _input_offer(one, point)
        else:
            offer = _branch_offer(one, point)
            if offer is not None:
                found[point] = offer
    return found


def _input_offer(one: Alone, name: str) -> tuple[take.Offer, list[Array]]:
    bench, latitude = one.bench, one.latitude
    held = bench.projects.given.get(name)
    stands = np.full(bench.truth.shape, latitude.reference)
    settings = [bench.set_to(name, value) for value in latitude.values]
    credits = [one.credited({name: value}) for value in settings]
    open_ones = np.ones((len(settings), len(stands)), dtype=bool)
    if held is not None:
        open_ones[:, held] = False
        open_ones[latitude.reference, held] = True
    nothing = np.zeros(open_ones.shape)
    order = take.by_cost(nothing, open_ones)
    return take.Offer(np.array(credits), open_ones, order, nothing, bench.truth, stands), credits


def _branch_offer(one: Alone, id: str) -> tuple[take.Offer, list[Array]] | None:
    bench, program = one.bench, one.bench.program
    forced = ways_in(program, id)
    base = one.base
    if forced:
        base = bench.values(one.world(forced, {}), one.base, tuple(forced))
    node = program.nodes[program.points[id]]
    conditions = program.graph.branch_points[id].conditions
    branches = len(conditions)
    reference = bench.column(base[program.points[id]][1]).astype(np.int64)
    open_ones = np.empty((branches, len(reference)), dtype=bool)
    for number in range(branches):
        open_ones[number] = base[node.args[number]] if conditions[number] is not None else True
    if one.latitude.kind == "overlap":
        for number in range(branches):
            if conditions[number] is None:
                open_ones[number] = False
        if not np.any(np.sum(open_ones, axis=0) > 1):
            return None
    none = ~np.any(open_ones, axis=0)
    open_ones[0, none] = True
    reference = np.maximum(reference, 0)
    credits = []
    for number in range(branches):
        world = one.world({**forced, id: number}, one.errors)
        credits.append(bench.full(bench.values(world, base, (*forced, id))))
    money = np.zeros(open_ones.shape)
    for number in range(branches):
        cost = program.costs.get((id, number))
        if cost is not None:
            money[number] = bench.truth_values[cost]
    cost_in_credits = money / bench.terms.price if bench.terms.price else np.zeros(money.shape)
    order = take.by_cost(money, open_ones)
    aim = bench.truth if forced else aimed_at(one, id)
    offer = take.Offer(np.array(credits), open_ones, order, cost_in_credits, aim, reference)
    return offer, credits


def ways_in(program: Program, id: str) -> dict[str, Any]:
    """The options that have to be taken for a nested choice to be met at all."""
    forced: dict[str, Any] = {}
    point = program.graph.branch_points[id]
    while point.parent is not None:
        outer, branch = point.parent
        point = program.graph.branch_points[outer]
        if outer in program.choosing and not point.leader:
            number = point.branches.index(branch)
            if program.choosing[outer].order[0] != number:
                forced[outer] = number
    return forced


def decide(one: Alone, found: Mapping[str, tuple[take.Offer, list[Array]]]) -> Decided:
    """What the developer takes at each point, each behaviour."""
    second, pick, any_one, learned = {}, {}, {}, {}
    for id, (offer, _) in found.items():
        chance = generator(one.bench.terms.seed, one.bench.number, "indifferent", id).random(len(offer.truth))
        pick[id] = take.pick_of_all(offer)
        if one.latitude.kind == "choice":
            second[id] = take.second_look(offer)
            learned[id] = take.learned(offer)
        else:
            # A value, a reading or an overlap costs nothing to look at: the best is taken at once.
            second[id] = learned[id] = pick[id]
        any_one[id] = take.indifferent(offer, chance)
    if one.latitude.kind not in ("setting", "judgement"):
        return Decided(second, pick, any_one, learned)
    name = one.latitude.id
    if one.latitude.kind == "setting" and one.latitude.high > one.latitude.low:
        spread = one.latitude.low + (one.latitude.high - one.latitude.low) * chance
    else:
        spread = np.asarray(one.latitude.values)[any_one[name]]
    best = {name: one.bench.set_to(name, np.asarray(one.latitude.values)[pick[name]])}
    return Decided(best, best, {name: one.bench.set_to(name, spread)}, best)


# --- rows ----------------------------------------------------------------------------------------


def record(bench: Bench, row: Row, issued: Array, comparison: Array | None = None) -> None:
    """One row's sums, and those of the projects that would join."""
    bench.sums.tallies[row] = tally(issued, bench.truth, comparison, sums=bench.truth_sums)
    if bench.terms.join is not None:
        joins = issued > bench.terms.join * bench.truth
        bench.sums.tallies[(*row, "joined")] = tally(issued, bench.truth, comparison, joins)


def record_histogram(bench: Bench, row: Row, issued: Array) -> None:
    bench.sums.histograms[row] = histogram(issued, bench.truth)
