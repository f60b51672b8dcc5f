"""The rows of one block: every latitude alone, then the whole rulebook with all of them acting together."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from samesum.evidence.choosing.behaviours import Offer, pick_of_all
from samesum.evidence.choosing.bench import (
    MOST_SWEEPS,
    Alone,
    Array,
    Bench,
    Decided,
    Row,
    Sums,
    Terms,
    alone,
    decide,
    offers,
    prepare,
    record,
    record_histogram,
)
from samesum.evidence.choosing.closed_rows import closed_rows
from samesum.evidence.choosing.latitudes import Latitude
from samesum.evidence.choosing.programs import HIGHEST as MOST
from samesum.evidence.choosing.programs import LOWEST as LEAST
from samesum.evidence.choosing.projects import Projects
from samesum.evidence.choosing.simulate import World

Offers = Mapping[str, tuple[Offer, list[Array]]]
WHOLE = "whole"
SECOND, PICK, LOWEST, INDIFFERENT, MANDATED = "second look", "pick of all", "lowest", "indifferent", "mandated"
STAY, ANEW = "errors stay", "errors anew"


def work(projects: Projects, number: int, latitudes: Sequence[Latitude], terms: Terms, periods: int) -> Sums:
    """The sums of one block of projects, by row: (latitude or ``whole``, behaviour, option, …)."""
    bench = prepare(projects, number, latitudes, terms, periods)
    decided: dict[str, Decided] = {}
    offered: dict[str, Offers] = {}
    for latitude in latitudes:
        one = alone(bench, latitude)
        if not one.points:
            continue
        if latitude.kind == "stated":
            _stated_rows(one)
            continue
        found = offers(one)
        if not found:
            continue
        offered[latitude.id] = found
        decided[latitude.id] = decide(one, found)
        _alone_rows(one, found, decided[latitude.id], periods)
    _Whole(bench, latitudes, decided, offered, periods).rows()
    return bench.sums


def _stated_rows(one: Alone) -> None:
    program = one.bench.program
    held: Mapping[str, Any] = program.prescribed if one.latitude.is_input else program.taken
    decided = {id: held[id] for id in one.points if id in held}
    record(one.bench, (one.latitude.id, MANDATED, one.latitude.candidates[0]), one.credited(decided))


def _alone_rows(one: Alone, found: Offers, decided: Decided, periods: int) -> None:
    bench, latitude = one.bench, one.latitude
    reference = latitude.candidates[latitude.reference]
    if latitude.kind == "overlap":
        comparison = one.credited({})
        record(bench, (latitude.id, MANDATED, "in order"), comparison)
    else:
        mandated = {name: _everybody(one, found, number) for number, name in enumerate(latitude.candidates)}
        comparison = mandated[reference]
        for name, credited in mandated.items():
            record(bench, (latitude.id, MANDATED, name), credited, comparison)
    rows = {SECOND: decided.second, PICK: decided.pick, INDIFFERENT: decided.indifferent}
    credited_by: dict[str, Array] = {}
    for behaviour, taken in rows.items():
        same = next((other for other in credited_by if rows[other] is taken), None)
        credited_by[behaviour] = one.taking(taken, found) if same is None else credited_by[same]
        record(bench, (latitude.id, behaviour, ""), credited_by[behaviour], comparison)
    record_histogram(bench, (latitude.id, MANDATED), comparison)
    record_histogram(bench, (latitude.id, SECOND), credited_by[SECOND])
    if latitude.kind != "choice":
        return
    if latitude.leaning:
        record(bench, (latitude.id, LOWEST, ""), one.credited(_least(latitude, one.points)), comparison)
    if periods > 1:
        learned = one.taking(decided.learned, found)
        fresh = {key: error for key, error in bench.fresh.items() if key[0] in one.points}
        for behaviour, taken, later in ((SECOND, decided.second, learned), (PICK, decided.pick, credited_by[PICK])):
            first = credited_by[behaviour]
            redrawn = one.credited(taken, fresh)
            row = (latitude.id, "periods", behaviour)
            record(bench, (*row, STAY, "open"), _over_periods(first, later, periods))
            record(bench, (*row, STAY, "fixed"), first)
            record(bench, (*row, ANEW, "open"), first)
            record(bench, (*row, ANEW, "fixed"), _over_periods(first, redrawn, periods))
    closed_rows(one, found)
    if bench.terms.join is not None:
        _truth_scatters(one)


def _least(latitude: Latitude, points: Sequence[str]) -> dict[str, Any]:
    """The rule that takes whichever option credits least."""
    return dict.fromkeys(points, LEAST if latitude.leaning > 0 else MOST)


def _everybody(one: Alone, found: Offers, number: int) -> Array:
    """What is credited when all take the same option or value, at every element."""
    latitude = one.latitude
    if latitude.kind in ("setting", "judgement"):
        return found[latitude.id][1][number]
    return one.taking(dict.fromkeys(one.points, number), found)


def _over_periods(first: Array, later: Array, periods: int) -> Array:
    return np.asarray((first + (periods - 1) * later) / periods)


def _truth_scatters(one: Alone) -> None:
    """The other reading of enrolment: what a mandated option credits is fixed, and the truth scatters around it."""
    bench, latitude = one.bench, one.latitude
    join = bench.terms.join
    assert join is not None
    point = bench.program.choosing[one.points[0]].point
    for number, option in enumerate(getattr(point.body, "options", ())):
        if option.error is None and option.bias is None:
            continue
        bias = float(option.bias or 0)
        everybody = dict.fromkeys(one.points, number)
        level = {(id, number): np.full(bench.truth.shape, bias) for id in one.points}
        scatter = {(id, number): bench.errors[id, number] - bias for id in one.points if (id, number) in bench.errors}
        credited = one.credited(everybody, level)
        true = one.credited(everybody, scatter)
        row = (latitude.id, MANDATED, option.name, "truth scatters", "joined")
        from samesum.evidence.choosing.tally import tally

        bench.sums.tallies[row] = tally(credited, true, None, credited > join * true)


# --- the whole rulebook ----------------------------------------------------------------------------


class _Whole:
    """All latitudes together: the developer's act, the others' stand on their reference, and every option that
    states an error errs."""

    def __init__(
        self,
        bench: Bench,
        latitudes: Sequence[Latitude],
        decided: Mapping[str, Decided],
        offered: Mapping[str, Offers],
        periods: int,
    ) -> None:
        self.bench, self.decided, self.offered, self.periods = bench, decided, offered, periods
        self.acting = [each for each in latitudes if each.id in decided and each.by == "developer"]
        self.inputs = {each.id for each in latitudes if each.kind in ("setting", "judgement")}
        self.fixed = {
            point for each in latitudes if each.timing == "validation" for point in each.points(bench.program)
        }
        self.choices = [each for each in latitudes if each.id in decided]
        program = bench.program
        keys = {id for id, _ in bench.errors} | {*program.withheld, *program.taken, *program.prescribed}
        self.start = bench.values(self.world({}), bench.truth_values, sorted(keys))

    def world(self, taken: Mapping[str, Any], errors: Mapping[tuple[str, int], Array] | None = None) -> World:
        program = self.bench.program
        branches = {**program.taken, **{key: value for key, value in taken.items() if key not in self.inputs}}
        inputs = {key: value for key, value in taken.items() if key in self.inputs}
        inputs = {**program.withheld, **program.prescribed, **inputs}
        return World(branches, inputs, self.bench.errors if errors is None else errors)

    def credited(
        self, taken: Mapping[str, Any], errors: Mapping[tuple[str, int], Array] | None = None
    ) -> tuple[Array, list[Any]]:
        keys = set(taken) | ({id for id, _ in errors} if errors is not None else set())
        values = self.bench.values(self.world(taken, errors), self.start, sorted(keys))
        return self.bench.full(values), values

    def taken(self, behaviour: str) -> dict[str, Any]:
        found: dict[str, Any] = {}
        for each in self.acting:
            found.update(getattr(self.decided[each.id], behaviour))
        return found

    def rows(self) -> None:
        bench = self.bench
        comparison = bench.full(self.start)
        record(bench, (WHOLE, MANDATED, "reference"), comparison)
        record_histogram(bench, (WHOLE, MANDATED), comparison)
        cheapest = {
            id: offer.order[0]
            for each in self.acting
            if each.kind == "choice"
            for id, (offer, _) in self.offered[each.id].items()
        }
        record(bench, (WHOLE, MANDATED, "cheapest"), self.credited(cheapest)[0], comparison)
        self.cheapest_closed(cheapest)
        record(bench, (WHOLE, INDIFFERENT, ""), self.credited(self.taken("indifferent"))[0], comparison)
        second = self.taken("second")
        looked, values = self.credited(second)
        record(bench, (WHOLE, SECOND, ""), looked, comparison)
        record_histogram(bench, (WHOLE, SECOND), looked)
        pick = self.improved(self.taken("pick"))
        picked = self.credited(pick)[0]
        record(bench, (WHOLE, PICK, ""), picked, comparison)
        if self.periods > 1:
            later = {**second, **{id: branch for id, branch in self.taken("learned").items() if id not in self.fixed}}
            self.period_rows(SECOND, second, looked, later)
            self.period_rows(PICK, pick, picked, pick)
        self.closures(second, values)

    def cheapest_closed(self, cheapest: Mapping[str, Array]) -> None:
        """The closed form of a single choice's cheapest option, where that is the same one in every project."""
        if len(self.acting) != 1 or not cheapest:
            return
        numbers = {int(number) for order in cheapest.values() for number in np.unique(order)}
        [latitude] = self.acting
        name = latitude.candidates[numbers.pop()] if len(numbers) == 1 else ""
        found = self.bench.sums.tallies.get((latitude.id, MANDATED, name, "closed"))
        if found is not None:
            self.bench.sums.tallies[WHOLE, MANDATED, "cheapest", "closed"] = found

    def period_rows(self, behaviour: str, taken: Mapping[str, Any], first: Array, later: Mapping[str, Any]) -> None:
        """A choice that is open decides again on new errors, which is the first period over again; one that is fixed
        keeps its option while the errors are drawn anew."""
        bench = self.bench
        row = (WHOLE, "periods", behaviour)
        learned = first if later is taken else self.credited(later)[0]
        redrawn = self.credited(taken, bench.fresh)[0]
        kept = first
        if any(id in self.fixed for id, _ in bench.errors):
            errors = {key: bench.fresh[key] if key[0] in self.fixed else error for key, error in bench.errors.items()}
            kept = self.credited(taken, errors)[0]
        record(bench, (*row, STAY, "as written"), _over_periods(first, learned, self.periods))
        record(bench, (*row, STAY, "all fixed"), first)
        record(bench, (*row, ANEW, "as written"), _over_periods(first, kept, self.periods))
        record(bench, (*row, ANEW, "all fixed"), _over_periods(first, redrawn, self.periods))

    def closures(self, second: Mapping[str, Any], values: Sequence[Any]) -> None:
        """The whole rulebook's second look with one latitude closed."""
        bench = self.bench
        for each in self.choices:
            points = each.points(bench.program)
            found = self.offered[each.id]
            closed: dict[str, Mapping[str, Any]] = {}
            if each.kind in ("choice", "overlap"):
                for number, name in enumerate(each.candidates if each.kind == "choice" else ()):
                    closed[name] = dict.fromkeys(points, number)
                if each.kind == "overlap":
                    closed["in order"] = {id: found[id][0].reference for id in points if id in found}
            else:
                for value, name in zip(each.values, each.candidates, strict=True):
                    closed[name] = {each.id: bench.set_to(each.id, value)}
            for name, taken in closed.items():
                self._closure((WHOLE, each.id, MANDATED, name), {**second, **taken}, values, points)
            if each.leaning:
                lowest = {**second, **_least(each, points)}
                self._closure((WHOLE, each.id, LOWEST, ""), lowest, values, points)

    def _closure(self, row: Row, taken: Mapping[str, Any], values: Sequence[Any], keys: Sequence[str]) -> None:
        record(self.bench, row, self.bench.full(self.bench.values(self.world(taken), values, keys)))

    def improved(self, taken: dict[str, Any]) -> dict[str, Any]:
        """Option after option tried again with everything else as it now stands, until hardly a project gains."""
        bench = self.bench
        places = [(each, id, self.offered[each.id][id][0]) for each in self.acting for id in self.offered[each.id]]
        if len(places) < 2:
            return taken
        standing = {id: self.numbers(each, taken[id], offer) for each, id, offer in places}
        credited, values = self.credited(taken)
        for _ in range(MOST_SWEEPS):
            gained = 0
            for each, id, offer in places:
                now = standing[id]
                spent = offer.at(now, offer.cost)
                best = np.where(np.isfinite(credited), credited - spent, -np.inf)
                chosen = now
                # Every other option of each project is tried once, by going round from the one it takes.
                for step in range(1, len(offer.open)):
                    other = (now + step) % len(offer.open)
                    world = self.world({**taken, id: self.candidate(each, other)})
                    tried = bench.full(bench.values(world, values, (id,)))
                    worth = tried - offer.at(other, offer.cost)
                    better = offer.at(other, offer.open) & (worth > best + 1e-9 * np.abs(best))
                    best = np.where(better, worth, best)
                    chosen = np.where(better, other, chosen)
                if chosen is not now and (moved := int(np.count_nonzero(chosen != now))):
                    gained += moved
                    standing[id] = chosen
                    taken = {**taken, id: self.candidate(each, chosen)}
                    values = bench.values(self.world(taken), values, (id,))
                    credited = bench.full(values)
            if gained <= bench.projects.count // 100:
                break
        return taken

    def candidate(self, latitude: Latitude, numbers: Array) -> Array:
        """Options by their number, as a world wants them: branches, or values of an input."""
        if latitude.id not in self.inputs:
            return numbers.astype(np.int8)
        found: Array = self.bench.set_to(latitude.id, np.asarray(latitude.values)[numbers])
        return found

    def numbers(self, latitude: Latitude, taken: Any, offer: Offer) -> Array:
        """The options that are taken, by their number."""
        if latitude.id not in self.inputs:
            return np.asarray(taken, dtype=np.int64)
        return np.asarray(pick_of_all(offer), dtype=np.int64)
