"""The report: one HTML page that needs nothing else, to read, print and hand on.

Every text from a rulebook goes through Jinja2's escaping; control characters are made visible before. The page
holds one script of ours, named by its hash in the content security policy, so that nothing else can run.
"""

from __future__ import annotations

import base64
import hashlib
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING

from samesum import __version__
from samesum.evidence.routes.counting import FIGURES as COUNTED
from samesum.outputs.counts import FIGURES, figure, title_of
from samesum.outputs.page import CAUTION, clean
from samesum.outputs.projects import project, words_for
from samesum.outputs.register_cells import bracket_text, decider, decision, share, simulated_text, stale_lines
from samesum.outputs.report.chart import charts_of, says
from samesum.outputs.report.figures import (
    CaseSpread,
    ClosingStep,
    Histogram,
    across,
    bars,
    spread_bars,
    ticks,
)
from samesum.outputs.report.layers import path
from samesum.outputs.verdict import waiting
from samesum.reviewing.places import exact_percent
from samesum.reviewing.rows import Register, Row
from samesum.written import whole

if TYPE_CHECKING:
    from markupsafe import Markup


@dataclass(frozen=True, slots=True)
class Extra:
    """What the page shows beyond the register, where it is known. ``origins``: names and values of versions and
    hashes. ``findings``: what the lint rules say, by place. ``mistakes``: how many stand in the rulebook."""

    cases: tuple[CaseSpread, ...] = ()
    closing: tuple[ClosingStep, ...] = ()
    closing_complete: bool = True
    worst_case: str = ""
    proved: str = ""
    histogram: Histogram | None = None
    findings: Mapping[str, Sequence[tuple[str, str]]] = field(default_factory=dict)
    origins: tuple[tuple[str, str], ...] = ()
    only_register: bool = False
    mistakes: int = 0


def register_page(register: Register, text: str, mistakes: int = 0) -> str:
    """The register alone as a page. ``mistakes``: how many stand in the rulebook."""
    return report_page(register, text, Extra(only_register=True, mistakes=mistakes))


def report_page(register: Register, text: str, extra: Extra) -> str:
    """The whole page. The same register and figures give the same bytes."""
    from jinja2 import Environment, FileSystemLoader, StrictUndefined
    from markupsafe import Markup

    folder = Path(__file__).parent

    def shown(value: object) -> object:
        return clean(value) if isinstance(value, str) and not isinstance(value, Markup) else value

    environment = Environment(
        loader=FileSystemLoader(folder),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        finalize=shown,
    )
    script = (folder / "report.js").read_text(encoding="utf-8")
    style = (folder / "report.css").read_text(encoding="utf-8")
    digest = base64.b64encode(hashlib.sha256(script.encode()).digest()).decode()
    environment.filters.update(breakable=breakable, spoken=spoken, share=share, percent=exact_percent)
    environment.filters.update(bracket=bracket_text, path=path)
    template = environment.get_template("report.html.j2")
    charts = () if extra.only_register else charts_of(register)
    return template.render(
        # ours, not the rulebook's: they go in as they are
        script=Markup(script),
        style=Markup(style),
        script_hash=digest,
        title=title_of(register.evidence.model),
        model=register.evidence.model,
        verdict=sentence(register, extra),
        key_figures=_key_figures(register, extra),
        counts=[
            (label, figure(register.evidence.counts, name), says) for name, label, says in FIGURES if name in COUNTED
        ],
        charts=charts,
        rows=[_row(number, row, register, extra) for number, row in enumerate(register.rows)],
        any_swing=any(row.measures.swing is not None for row in register.rows),
        any_left=any(row.measures.left_if_closed is not None for row in register.rows),
        simulated=simulated_text(register),
        any_over=any(row.measures.over_issuance is not None for row in register.rows),
        kinds=list(dict.fromkeys(row.kind for row in register.rows)),
        deciders=[
            who for who in ("developer", "verifier", "programme") if any(who in row.decides for row in register.rows)
        ],
        decisions=list(dict.fromkeys(verdict for row in register.rows if (verdict := _verdict(row)))),
        leaving=sum(row.leaves_something for row in register.rows),
        stale=stale_lines(register),
        spreads=spread_bars(extra.cases),
        closing=_closing(register, extra.closing),
        closing_complete=extra.closing_complete,
        worst_case=extra.worst_case,
        proved=extra.proved,
        histogram=extra.histogram,
        bars=bars(extra.histogram) if extra.histogram else (),
        ticks=ticks(extra.histogram) if extra.histogram else (),
        marks=_marks(extra.histogram),
        origins=[*_origins(text), *extra.origins],
        only_register=extra.only_register,
        caution=CAUTION,
        chart_margin=16,
    )


def spoken(text: str) -> Markup:
    """A sentence with what stands between backticks as code; everything in it is escaped."""
    from markupsafe import Markup, escape

    parts = [escape(clean(part)) for part in text.split("`")]
    if len(parts) % 2 == 0:
        return escape(clean(text))
    return Markup("").join(Markup("<code>{}</code>").format(part) if at % 2 else part for at, part in enumerate(parts))


def breakable(name: str) -> Markup:
    """A name that breaks behind its joints, where there is no room for it on one line; everything in it is escaped."""
    from markupsafe import Markup, escape

    parts = re.split(r"(?<=[_/@])", clean(name))
    return Markup("<wbr>").join(escape(part) for part in parts)


def sentence(register: Register, extra: Extra) -> str:
    """The verdict that counting allows, in a sentence that a committee member understands."""
    if extra.mistakes:
        return f"The verdict {waiting(extra.mistakes)}."
    counts = register.evidence.counts
    most = counts.per_project_most
    gap = bool(register.evidence.conditions.gaps) or (counts.exact and counts.per_project_least == 0)
    if most <= 1 and counts.exact and not gap:
        if counts.free_values:
            names = ", ".join(counts.free_values)
            return f"Everybody takes the same route, but somebody sets a number on the way: {names}."
        return "Everybody who applies this rulebook to the same project takes the same route."
    ways = figure(counts, "per_project_most")
    first = f"This rulebook leaves up to {ways} routes open to one and the same project"
    if most <= 1:
        first = "No project has more than one route"
    said = f"{first}, and some projects have no result at all." if gap else f"{first}."
    spreads = [case.spread for case in extra.cases if case.spread is not None]
    if not spreads:
        return said
    widest = max(spreads)
    if not widest:
        return f"{said} On the cases given they all lead to one number."
    case = next(case for case in extra.cases if case.spread == widest)
    return (
        f"{said} For {case.name} alone the result can be anything from {case.low_text} to {case.high_text}: "
        f"{share(widest)} of the reference."
    )


def _key_figures(register: Register, extra: Extra) -> list[tuple[str, str, str]]:
    """Figure, what it is, and its tone."""
    counts = register.evidence.counts
    loud = [row for row in register.rows if row.leaves_something]
    found = [
        (
            figure(counts, "per_project_most"),
            "routes open to one project at most; 1 is what repeatability needs",
            "loud" if counts.per_project_most > 1 else "calm",
        ),
        (
            f"{whole(len(loud))} of {whole(len(register.rows))}",
            "places leave something to somebody",
            "loud" if loud else "calm",
        ),
    ]
    spreads = [case.spread for case in extra.cases if case.spread is not None]
    if spreads:
        found.append(
            (
                share(max(spreads)),
                "between the lowest and the highest result, at the widest case",
                "loud" if max(spreads) else "calm",
            )
        )
    if extra.histogram is not None:
        over = extra.histogram.chosen_mean
        found.append(
            (share(over), "over-issued when developers take a second look", "loud" if over > 0.0005 else "calm")
        )
    accepted = sum(row.standing is not None and row.standing.accepted for row in register.rows)
    if accepted:
        found.append((whole(accepted), "accepted by the review", "calm"))
    return found


@dataclass(frozen=True, slots=True)
class Shown:
    """A row with the texts that the page needs."""

    number: int
    row: Row
    decider: str
    says: str
    decision: str
    verdict: str
    witnesses: tuple[tuple[str, str], ...]
    findings: Sequence[tuple[str, str]]
    without_sort: str
    wording: str
    closure: str


def _row(number: int, row: Row, register: Register, extra: Extra) -> Shown:
    words = words_for(register.evidence.model)
    witnesses = []
    pairs = {overlap.branches: overlap for overlap in reversed(row.overlaps)}
    for overlap in sorted(pairs.values(), key=row.overlaps.index)[:6]:
        shown = project(overlap.witness, words) if overlap.witness is not None else "some project"
        witnesses.append((f"Branches {' and '.join(overlap.branches)} are both open for", shown))
    for gap in row.gaps[:1]:
        missing = {"row": "No row of a table answers", "value": "A calculation has no value"}
        shown = project(gap.witness, words) if gap.witness is not None else "some project"
        witnesses.append((f"{missing.get(gap.kind, 'No branch is open')} for", shown))
    high = row.without.high
    return Shown(
        number,
        row,
        decider(row),
        says(row),
        decision(row),
        _verdict(row),
        tuple(witnesses),
        extra.findings.get(row.id, ()),
        "" if high is None else f"{len(_digits(high)):06d}{_digits(high)[:15]}",
        " ".join(row.place.wording.split()),
        row.measures.closure or row.closure,
    )


def _digits(number: int) -> str:
    from samesum.written import long_integers

    with long_integers():
        return str(number)


def _verdict(row: Row) -> str:
    """The decision in a word, for the filter."""
    if row.standing is None:
        return "open" if row.leaves_something else ""
    return "stale" if row.standing.stale else row.standing.decision.verdict


def _closing(register: Register, steps: Sequence[ClosingStep]) -> list[tuple[ClosingStep, int, float]]:
    """Each step with its row's number (-1 for none) and the width of its bar."""
    place = {row.id: number for number, row in enumerate(register.rows)}
    most = max((step.left for step in steps if step.left is not None), default=0.0) or 1.0
    return [(step, place.get(step.place, -1), (step.left or 0.0) / most * 100) for step in steps]


def _marks(histogram: Histogram | None) -> list[tuple[str, float, str]]:
    if histogram is None:
        return []
    return [
        ("mandated", across(histogram, 1 + histogram.mandated_mean), share(histogram.mandated_mean)),
        ("chosen", across(histogram, 1 + histogram.chosen_mean), share(histogram.chosen_mean)),
    ]


def _origins(text: str) -> list[tuple[str, str]]:
    return [
        ("samesum", __version__),
        ("Rulebook, SHA-256", hashlib.sha256(text.encode()).hexdigest()),
    ]
