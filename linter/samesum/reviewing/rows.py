"""The register: one row a branch point, setting or judgement, with all that is known about it.

Takes evidence; gives rows that outputs write. Rows whose kind is ``cases`` leave nothing to anybody.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Literal

from samesum.evidence.evidence import Evidence
from samesum.evidence.routes.closing import Bracket, figures_if_given
from samesum.evidence.routes.conditions import Gap, Overlap
from samesum.evidence.routes.control import Control, Mover, movers_of
from samesum.evidence.routes.layout import Given
from samesum.reading import model as m
from samesum.reading import walk
from samesum.reviewing.places import Place, Source, branch_noun, domain_text, exact_percent, places_of
from samesum.reviewing.record import Record, Standing, standings
from samesum.spans import Span

Kind = Literal["choice", "overlap", "judgement", "setting", "steered", "cases"]
Timing = Literal["at validation", "each period", "not stated", ""]


@dataclass(frozen=True, slots=True)
class RowOption:
    """A branch, or an option with what the rulebook says of it; texts as written, "" where nothing is said.
    ``body`` is its formula, or what stands under it (``a choice``, ``cases``) when it is ``nested``."""

    name: str
    when: str
    error: Fraction | None
    bias: Fraction | None
    cost: str
    reference: bool
    body: str
    nested: bool = False


@dataclass(frozen=True, slots=True)
class Simulated:
    """What over-issuance was simulated on: how many ``projects``; ``given`` ones in turn, or, at 0, drawn from the
    declared domains."""

    projects: int
    given: int
    seed: int


@dataclass(frozen=True, slots=True)
class Measures:
    """What ``trial`` and ``bias`` found about one place; None where they were not asked or cannot tell.
    ``swing``, ``left_if_closed`` and ``over_issuance`` are shares (0.05 for 5 %). ``closure`` is the closing
    that bias evidence speaks for, "" when it has none. ``simulated`` goes with ``over_issuance``."""

    swing: float | None = None
    left_if_closed: float | None = None
    over_issuance: float | None = None
    closure: str = ""
    simulated: Simulated | None = None


NOT_MEASURED = Measures()


@dataclass(frozen=True, slots=True)
class Row:
    """``decides``: who, "" for nobody; ``movers`` who can steer its conditions. ``fixed``: when, "" where the language
    lets nobody say it (only a choice can). ``without``: routes of one project when the place is closed. ``parent`` and
    ``leader`` are ids of other places, "" for none."""

    place: Place
    kind: Kind
    quantity: str
    decides: str
    fixed: Timing
    elements: int
    options: tuple[RowOption, ...]
    movers: tuple[Mover, ...]
    moves: tuple[str, ...]
    leader: str
    parent: str
    routes: Bracket
    without: Bracket
    overlaps: tuple[Overlap, ...]
    gaps: tuple[Gap, ...]
    closure: str
    measures: Measures = NOT_MEASURED
    standing: Standing | None = None

    @property
    def id(self) -> str:
        return self.place.id

    @property
    def span(self) -> Span:
        return self.place.span

    @property
    def leaves_something(self) -> bool:
        """Whether somebody can move the number here."""
        return self.kind != "cases"


@dataclass(frozen=True, slots=True)
class Register:
    """Rows in reading order. ``stale`` are decisions whose place is gone or has changed since."""

    evidence: Evidence
    rows: tuple[Row, ...]
    record: Record
    stale: tuple[Standing, ...]

    @property
    def simulated(self) -> Simulated | None:
        """What over-issuance was simulated on; None when no row has any."""
        return next((row.measures.simulated for row in self.rows if row.measures.simulated is not None), None)

    def measured(self, measures: Mapping[str, Measures]) -> Register:
        """The same register with what trial and bias found, by id of the place."""
        rows = tuple(replace(row, measures=measures.get(row.id, row.measures)) for row in self.rows)
        return replace(self, rows=rows)


def register_of(evidence: Evidence, text: str, record: Record, seconds: float = 10.0) -> Register:
    """The register of a rulebook. ``text`` is its text; ``seconds`` bounds the counting of what closing leaves."""
    source = Source.of(text)
    places = places_of(evidence.graph, source)
    standing = standings(record, {id: place.fingerprint for id, place in places.items()})
    rows = _rows(evidence, places, source)
    leaving = [row for row in rows if row.leaves_something]
    asked = [("per_project_most", _given(row)) for row in leaving]
    figures = figures_if_given(evidence.graph, asked, seconds)
    without = {row.id: _at_most(found, row.routes) for row, found in zip(leaving, figures, strict=True)}
    settled = tuple(
        replace(row, without=without.get(row.id, row.routes), standing=standing.get(row.id)) for row in rows
    )
    return Register(evidence, settled, record, tuple(each for each in standing.values() if each.stale))


def routes_now(evidence: Evidence, figure: str = "per_project_most") -> Bracket:
    """A figure of ``count`` as a bracket."""
    counts = evidence.counts
    most: int = getattr(counts, figure)
    return Bracket(counts.at_least.get(figure, most), most)


def _at_most(found: Bracket, most: Bracket) -> Bracket:
    """Closing never adds a route, so what is open now bounds what is left."""
    high = most.high if found.high is None else found.high if most.high is None else min(found.high, most.high)
    return Bracket(found.low, high)


def _given(row: Row) -> Given:
    if row.place.points:
        return Given(points=frozenset((row.id,)))
    return Given(names=frozenset((row.id,)))


def _rows(evidence: Evidence, places: Mapping[str, Place], source: Source) -> list[Row]:
    conditions = evidence.conditions
    general = {point.id: point.general_id for point in evidence.graph.branch_points.values()}
    overlaps: dict[str, list[Overlap]] = {}
    for overlap in conditions.overlaps:
        overlaps.setdefault(general[overlap.branch_point], []).append(overlap)
    gaps: dict[str, list[Gap]] = {}
    for gap in conditions.gaps:
        gaps.setdefault(general.get(gap.branch_point, gap.branch_point), []).append(gap)
    moved = _moved(evidence)
    routes = routes_now(evidence)
    rows: list[Row] = []
    for place in places.values():
        if place.points:
            control = evidence.control[place.id]
            rows.append(
                _branch_point(
                    place, control, tuple(overlaps.get(place.id, ())), tuple(gaps.get(place.id, ())), routes, source
                )
            )
        elif place.kind in ("setting", "judgement") and place.id in moved:
            rows.append(_input(place, evidence.model, moved[place.id], routes))
    return rows


def _moved(evidence: Evidence) -> dict[str, tuple[str, ...]]:
    """What each setting and judgement moves: the result, eligibility, the conditions of branch points."""
    found: dict[str, list[str]] = {}
    for name in evidence.counts.free_values:
        found.setdefault(name, []).append("the result")
    overlapping = [overlap.branch_point for overlap in evidence.conditions.overlaps]
    for applies in evidence.model.applies:
        for mover in movers_of(applies.condition, evidence.graph, overlapping):
            if mover.through in ("setting", "judgement"):
                found.setdefault(mover.source, []).append("eligibility")
    for id, control in evidence.control.items():
        for mover in control.movers:
            if mover.through in ("setting", "judgement"):
                found.setdefault(mover.source, []).append(id)
    return {name: tuple(dict.fromkeys(targets)) for name, targets in found.items()}


def _branch_point(
    place: Place,
    control: Control,
    overlaps: tuple[Overlap, ...],
    gaps: tuple[Gap, ...],
    routes: Bracket,
    source: Source,
) -> Row:
    point = place.points[0]
    kind: Kind = "cases"
    if overlaps:
        kind = "overlap"
    elif control.decided_by is not None:
        kind = "choice"
    elif control.movers:
        kind = "steered"
    who = [control.decided_by] if control.decided_by else [mover.by for mover in control.movers]
    fixed: Timing = ""
    if kind == "choice":
        timings: dict[str, Timing] = {"validation": "at validation", "period": "each period", "": "not stated"}
        fixed = timings[point.timing]
    options = tuple(_option(branch, source) for branch in walk.branches(point.body))
    row = Row(
        place=place,
        kind=kind,
        quantity=point.quantity.partition("/")[0],
        decides=", ".join(sorted(set(who), key=_ORDER.index)),
        fixed=fixed,
        elements=len(place.points),
        options=options,
        movers=control.movers,
        moves=(),
        leader=point.leader.split("@")[0],
        parent=_parent(place),
        routes=routes,
        without=routes,
        overlaps=overlaps,
        gaps=gaps,
        closure="",
    )
    return replace(row, closure=suggested(row, branch_noun(point)))


_ORDER = ("developer", "verifier", "programme")


def _parent(place: Place) -> str:
    point = place.points[0]
    if point.parent is None:
        return ""
    return place.id.rpartition("/")[0]


def _option(branch: m.When | m.Option, source: Source) -> RowOption:
    condition = walk.condition_of(branch)
    body = {m.Choice: "a choice", m.Follows: "a choice that follows another", m.Cases: "cases"}.get(
        type(branch.body), ""
    )
    nested = bool(body)
    if isinstance(branch.body, m.Formula):
        body = source.quoted(branch.body.expression.span)
    when = source.quoted(condition.span) if condition is not None else ""
    if isinstance(branch, m.When):
        return RowOption(branch.name, when, None, None, "", False, body, nested)
    cost = source.quoted(branch.cost.span) if branch.cost is not None else ""
    return RowOption(branch.name, when, branch.error, branch.bias, cost, branch.reference, body, nested)


def _input(place: Place, model: m.Model, moves: tuple[str, ...], routes: Bracket) -> Row:
    setting = next((each for each in model.settings if each.name == place.id), None)
    by = setting.by if setting is not None else next(each.by for each in model.judgements if each.name == place.id)
    options: tuple[RowOption, ...]
    if setting is not None:
        options = (RowOption(domain_text(setting.domain, setting.unit), "", None, None, "", False, ""),)
    else:
        options = tuple(RowOption(name, "", None, None, "", False, "") for name in ("yes", "no"))
    row = Row(
        place=place,
        kind="setting" if setting is not None else "judgement",
        quantity="",
        decides=by,
        fixed="",
        elements=1,
        options=options,
        movers=(),
        moves=moves,
        leader="",
        parent="",
        routes=routes,
        without=routes,
        overlaps=(),
        gaps=(),
        closure="",
    )
    return replace(row, closure=suggested(row, ""))


# --- what to write instead ---------------------------------------------------------------


def suggested(row: Row, noun: str) -> str:
    """A way of closing the place that needs no numbers, in a sentence; "" where nothing is left to anybody."""
    match row.kind:
        case "choice":
            return _close_choice(row.options, row.decides)
        case "overlap":
            pairs = _pairs(row.overlaps)
            return f"Let {noun}es {pairs} exclude each other, or write `cases in order` so that the first one holds."
        case "judgement":
            return "Replace the wording by a test that two people answer alike: a number, a record, a list."
        case "setting":
            return "State the value, or the table it is taken from."
        case "steered":
            return f"Let the condition rest on a fact, or close {_listed(_sources(row.movers))}."
    gap = "State what holds where no branch does." if row.gaps else ""
    return gap


def _close_choice(options: Sequence[RowOption], decides: str) -> str:
    best = next((option for option in options if option.reference), None)
    if best is None:
        told = [option for option in options if option.error is not None]
        best = min(told, key=lambda option: option.error or Fraction(0), default=None)
    if best is None:
        return "Name the one option that holds" + (
            ", or the edition or table it comes from." if decides == "programme" else "."
        )
    error = f" (error {exact_percent(best.error)})" if best.error is not None else ""
    return f"Mandate `{best.name}`{error}, or take the option that credits least."


def _pairs(overlaps: Sequence[Overlap]) -> str:
    names = list(dict.fromkeys(name for overlap in overlaps for name in overlap.branches))
    return _listed(names)


def _sources(movers: Sequence[Mover]) -> list[str]:
    return [f"`{name}`" for name in dict.fromkeys(mover.source for mover in movers)]


def _listed(names: Sequence[str]) -> str:
    from samesum.reading.words import listing

    shown = [*names[:3], f"{len(names) - 3} more"] if len(names) > 4 else list(names)
    return listing(shown, "and")
