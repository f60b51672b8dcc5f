"""A quick look at what each choice with stated errors over-issues, for lint rules: ``bias`` on few projects.

Only the second look, each choice alone with the others on their reference, on projects drawn from the declared domains
(a fact without one stands at one value). Always the same seed, so that a finding comes and goes with the text alone.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

from samesum.evidence.choosing.behaviours import second_look
from samesum.evidence.choosing.bench import Terms, alone, offers, prepare
from samesum.evidence.choosing.latitudes import Latitude, find_latitudes
from samesum.evidence.choosing.projects import CannotDraw, from_domains, projects_of, stretches
from samesum.evidence.choosing.tally import tally
from samesum.evidence.trial.plan import Unplannable
from samesum.reading import model as m
from samesum.reading import walk

PROJECTS = 2048


@dataclass(frozen=True, slots=True)
class OverIssuing:
    """Over-issuance of one choice by a second look, beyond that of everybody on the reference, and its standard error;
    both None when it could not be worked out."""

    id: str
    by: m.Decider
    value: float | None
    error: float | None


def errs(body: m.Body) -> bool:
    """Whether this is a choice of which two options or more say how they err."""
    if not isinstance(body, m.Choice) or body.takes:
        return False
    return sum(option.error is not None or option.bias is not None for option in body.options) > 1


def over_issuing(model: m.Model) -> Iterator[OverIssuing]:
    """For every choice that the result depends on and that states errors, in the rulebook's order."""
    stating = any(errs(body) for quantity in model.quantities for body in walk.bodies(quantity.body))
    if model.result is None or not stating:
        return
    try:
        supply = from_domains(model, unbounded=True)
        latitudes = find_latitudes(supply.sources[0].program)
        stretch = stretches(supply, PROJECTS)[0]
        terms = Terms(0)
        bench = prepare(projects_of(supply, stretch, terms.seed), stretch.number, (), terms, 1)
    except (CannotDraw, Unplannable):
        yield from _not_told(model)
        return
    for latitude in latitudes:
        if latitude.kind != "choice" or len(latitude.noises) < 2:
            continue
        one = alone(bench, latitude)
        reference = one.credited(dict.fromkeys(one.points, latitude.reference))
        looked = one.credited({id: second_look(offer) for id, (offer, _) in offers(one).items()})
        found = tally(looked, bench.truth, reference)
        if found.t > 0 and latitude.withheld:
            yield OverIssuing(latitude.id, latitude.by, found.over_issuance, found.standard_error)
        elif found.t > 0:
            yield OverIssuing(latitude.id, latitude.by, found.difference, found.difference_error)
        else:
            yield _unknown(latitude)


def _unknown(latitude: Latitude) -> OverIssuing:
    return OverIssuing(latitude.id, latitude.by, None, None)


def _not_told(model: m.Model) -> Iterator[OverIssuing]:
    for quantity in model.quantities:
        for id, body in _inside(quantity.body, quantity.name):
            if errs(body) and isinstance(body, m.Choice):
                yield OverIssuing(id, body.by, None, None)


def _inside(body: m.Body, id: str) -> Iterator[tuple[str, m.Body]]:
    yield id, body
    for branch in walk.branches(body):
        yield from _inside(branch.body, f"{id}/{branch.name}")
