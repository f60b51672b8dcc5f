"""``samesum bias --write-closed``: the rulebook with branch points closed, as text."""

from __future__ import annotations

import argparse
import re
from dataclasses import replace
from typing import TYPE_CHECKING, Any

from samesum.cli import shared

if TYPE_CHECKING:
    from samesum.evidence.choosing.selection import Selection
    from samesum.outputs.closed import Closing
    from samesum.reading.read import Reading

KINDS = ("mandate", "lowest", "fixed", "deduct", "in-order")


def write_closed(reading: Reading, arguments: argparse.Namespace) -> int:
    """Closes one place after the other and writes the text to ``-o`` or standard output; gives the exit status."""
    from samesum.evidence.choosing.projects import CannotDraw
    from samesum.evidence.trial.plan import Unplannable
    from samesum.outputs.closed import closed
    from samesum.outputs.closed_text import CannotClose
    from samesum.reading.read import default_cache_folder, make_reader

    wanted = []
    for words in arguments.write_closed:
        found = asked(words)
        if isinstance(found, str):
            return shared.refuse(found)
        wanted.append(found)
    reader = make_reader(default_cache_folder())
    for number, closing in enumerate(wanted):
        try:
            ready = worked_out(reading, closing, arguments)
            reading = closed(reading, ready, reader)
        except (CannotClose, CannotDraw, Unplannable) as trouble:
            return shared.refuse(f"{arguments.write_closed[number]}: {trouble}; nothing was written")
    return shared.deliver(reading.text, arguments.output)


def asked(words: str) -> Closing | str:
    """``KIND[=VALUE]:BRANCH_POINT`` taken apart; or what is wrong with it."""
    from samesum.outputs.closed import Closing
    from samesum.reading.words import nearest

    found = re.fullmatch(r"([\w-]+)(?:=([^:]*))?:(.+)", words.strip())
    if found is None:
        return f"{words!r} is no way of closing; write KIND:BRANCH_POINT, as in `mandate:soil_carbon`"
    kind, value, id = found[1], (found[2] or "").strip(), found[3].strip()
    if kind not in KINDS:
        close = nearest(kind, KINDS)
        return f"there is no way of closing called {kind!r}; " + (
            f"did you mean `{close}`?" if close else f"the ways are {', '.join(KINDS)}"
        )
    if value and kind not in ("mandate", "deduct"):
        return f"`{kind}` takes no value: write `{kind}:{id}`"
    if kind != "deduct":
        return Closing(kind.replace("-", " "), id, value)
    if not value:
        return Closing(kind, id)
    number = re.fullmatch(r"(-?[0-9.]+) ?%", value)
    try:
        share = float(number[1]) / 100 if number else 0.0
    except ValueError:
        share = 0.0
    if not share or abs(share) >= 1:
        return f"{value!r} is no percentage to deduct; write it as in `deduct=12.5%:{id}`"
    return Closing(kind, id, value, share)


def worked_out(reading: Reading, closing: Closing, arguments: argparse.Namespace) -> Closing:
    """What the simulation has to say first: which end credits least, how much has to be deducted."""
    needs_share = closing.kind == "deduct" and not closing.option
    if closing.kind != "lowest" and not needs_share:
        return closing
    from samesum.cli.bias import supply_for
    from samesum.evidence.choosing.bench import Terms
    from samesum.evidence.choosing.deductions import solve_deductions
    from samesum.evidence.choosing.latitudes import find_latitudes
    from samesum.evidence.choosing.leaning import leaning
    from samesum.evidence.choosing.projects import stretches
    from samesum.evidence.choosing.selection import HEADLINE
    from samesum.outputs.closed import find_body
    from samesum.outputs.closed_text import CannotClose
    from samesum.reading.model import Choice

    assert reading.model is not None
    inputs = {each.name for each in reading.model.settings} | {each.name for each in reading.model.judgements}
    if closing.id in inputs:
        return closing  # what cannot be done with it is said where it would be written
    body = find_body(reading.model, closing.id)[1]
    if needs_share and isinstance(body, Choice) and body.takes:
        return closing
    supply = supply_for(reading.model, arguments.inputs)
    if supply is None:
        raise CannotClose("the projects given could not be used")
    latitudes = {each.id: each for source in supply.sources for each in find_latitudes(source.program)}
    latitude = latitudes.get(closing.id)
    if latitude is None or latitude.is_input or not isinstance(body, Choice):
        raise CannotClose("it is no choice that the result depends on")
    terms = Terms(arguments.seed, arguments.price)
    if closing.kind == "lowest":
        direction = leaning(supply, latitude, terms)
        if direction == 0:
            raise CannotClose("more of it credits more in some projects and less in others; mandate one of the options")
        return replace(closing, subtracted=direction < 0)
    parts = stretches(supply, arguments.projects)
    found = solve_deductions(supply, parts, [latitude], terms, (HEADLINE,)).get((latitude.id, HEADLINE))
    if found is None:
        raise CannotClose("no deduction brings its over-issuance to zero; mandate one of the options")
    return replace(closing, share=found.share)


def routes_left(reading: Reading, selection: Selection, seconds: float) -> dict[tuple[str, str, str], Any]:
    """The counts of the rulebook with each closure written out, by id, kind and option; those that cannot be written
    out are left out."""
    from samesum.evidence.routes.counting import count
    from samesum.graph import build
    from samesum.outputs.closed import Closing, closed
    from samesum.outputs.closed_text import CannotClose
    from samesum.outputs.counts import paths_json
    from samesum.reading.read import default_cache_folder, make_reader

    reader = make_reader(default_cache_folder())
    made: dict[tuple[str, str, str], Any] = {}
    for found in selection.found:
        latitude = found.latitude
        for closure in found.closures:
            key = (latitude.id, closure.kind, closure.option)
            if key in made:
                continue
            subtracted = latitude.leaning < 0
            share = closure.percent.value if closure.percent is not None else 0.0
            closing = Closing(closure.kind, latitude.id, closure.option, share, subtracted)
            try:
                after = closed(reading, closing, reader)
            except CannotClose:
                continue
            if after.model is not None:
                made[key] = paths_json(count(build(after.model), seconds))
    return made
