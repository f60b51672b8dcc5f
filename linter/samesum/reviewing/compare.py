"""Two drafts held against each other: places opened, closed and changed, figures before and after, and
whether the new draft leaves more to somebody.

Places are matched by id, never by line, so that reordering and re-indenting compare as no change.
"""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Literal

from samesum.evidence.routes.closing import Bracket, figures_if_given
from samesum.evidence.routes.counting import FIGURES
from samesum.evidence.routes.layout import Given
from samesum.reading import model as m
from samesum.reviewing.apart import further_apart
from samesum.reviewing.places import Taken, changes, exact_percent, taken_of
from samesum.reviewing.rows import Register, Row, RowOption, routes_now

ONE_PROJECT = ("per_project_most", "developer_most", "over_periods_most")
"""The figures that say how much is left open to one project."""


@dataclass(frozen=True, slots=True)
class Change:
    """One place that is in both drafts. ``aspects``: what differs, before and after. ``closed`` and ``opened``: whether
    it leaves nothing, or something, to somebody only since. ``wider``: options whose condition changed, and whether
    some project has them only since; None where that was not worked out."""

    before: Row
    after: Row
    aspects: tuple[tuple[str, str, str], ...]
    wider: tuple[tuple[str, bool | None], ...] = ()

    @property
    def closed(self) -> bool:
        return self.before.leaves_something and not self.after.leaves_something

    @property
    def opened(self) -> bool:
        return self.after.leaves_something and not self.before.leaves_something

    @property
    def unsure(self) -> tuple[str, ...]:
        """Options of which it was not worked out whether more projects have them now."""
        return tuple(name for name, more in self.wider if more is None)


@dataclass(frozen=True, slots=True)
class Growth:
    """One reason to say that latitude grew. ``name`` is what ``--allow`` takes: a place's id or a figure's name."""

    name: str
    says: str
    clause: str = ""
    allowed: bool = False


@dataclass(frozen=True, slots=True)
class Moved:
    """A measure of the whole rulebook on the projects given, as a share; None where it could not be had. ``noise``:
    what a difference has to exceed."""

    name: str
    before: float | None
    after: float | None
    noise: float = 0.0

    @property
    def grew(self) -> bool:
        if self.after is None or self.before is None:
            return False
        return self.after - self.before > max(self.noise, 1e-9 * abs(self.before), 1e-12)


@dataclass(frozen=True, slots=True)
class Comparison:
    """``figures``: each figure of ``count`` before and after. ``growth`` in a fixed order. ``taken``: what the rulebook
    took and takes, where that differs."""

    old: Register
    new: Register
    added: tuple[Row, ...]
    removed: tuple[Row, ...]
    changed: tuple[Change, ...]
    figures: Mapping[str, tuple[Bracket, Bracket]]
    growth: tuple[Growth, ...]
    measured: tuple[Moved, ...] = ()
    taken: tuple[tuple[Taken, Taken], ...] = ()

    @property
    def grew(self) -> bool:
        """Whether latitude grew in a way that nobody allowed."""
        return any(not each.allowed for each in self.growth)

    @property
    def closed(self) -> tuple[Row, ...]:
        """Places that left something to somebody and are gone, or leave nothing any more."""
        gone = [row for row in self.removed if row.leaves_something]
        return (*gone, *(change.before for change in self.changed if change.closed))

    @property
    def opened(self) -> tuple[Row, ...]:
        """Places that leave something to somebody, and did not, or were not there."""
        fresh = [row for row in self.added if row.leaves_something]
        return (*fresh, *(change.after for change in self.changed if change.opened))


def compare(
    old: Register,
    new: Register,
    allow: Collection[str] = (),
    seconds: float = 10.0,
    measured: tuple[Moved, ...] = (),
) -> Comparison:
    """``allow`` names places and figures that may grow; what an allowed place brings about in the figures is
    taken out by counting it as given."""
    before = {row.id: row for row in old.rows}
    after = {row.id: row for row in new.rows}
    taken = _taken(old, new)
    changed = tuple(
        change
        for id, row in after.items()
        if id in before
        if (change := Change(before[id], row, _aspects(before[id], row, taken))).aspects
    )
    found = Comparison(
        old,
        new,
        tuple(row for row in new.rows if row.id not in before),
        tuple(row for row in old.rows if row.id not in after),
        tuple(replace(each, wider=_wider_conditions(each, old, new, min(seconds, 2.0))) for each in changed),
        {name: (routes_now(old.evidence, name), routes_now(new.evidence, name)) for name in FIGURES},
        (),
        measured,
        taken,
    )
    return replace(found, growth=_growth(found, frozenset(allow), seconds))


def _taken(old: Register, new: Register) -> tuple[tuple[Taken, Taken], ...]:
    before, after = (taken_of(each.evidence.graph.written) for each in (old, new))
    pairs = ((before[id], now) for id, now in after.items() if id in before)
    return tuple((was, now) for was, now in pairs if was.value != now.value)


def _wider_conditions(
    change: Change, old: Register, new: Register, seconds: float
) -> tuple[tuple[str, bool | None], ...]:
    if not change.before.kind == change.after.kind == "choice":
        return ()
    was = {option.name: option.when for option in change.before.options}
    names = [each.name for each in change.after.options if each.when and was.get(each.name, "") not in ("", each.when)]
    if not names:
        return ()
    from samesum.reviewing.wider import lets_more_through

    points = [
        (register.evidence.graph.model, row.place.points[0])
        for register, row in ((old, change.before), (new, change.after))
    ]
    return tuple((name, lets_more_through(points[0], points[1], name, seconds)) for name in names)


def _aspects(before: Row, after: Row, taken: tuple[tuple[Taken, Taken], ...]) -> tuple[tuple[str, str, str], ...]:
    """What differs in the text, and in what the text amounts to (who can steer it; whether branches overlap). What is
    taken under a branch is told where it is taken."""
    found: list[tuple[str, str, str]] = []
    earlier = {option.name: option for option in before.options}
    later = {f"option {option.name}": option for option in after.options}
    under = {now.id: (was.text, now.text) for was, now in taken}
    for name, old_text, new_text in changes(before.place, after.place):
        inner = under.get(f"{after.id}/{name.rpartition(' ')[2]}")
        if inner is not None and old_text == new_text.replace(f"that {inner[1]}", f"that {inner[0]}"):
            continue
        option = later.get(name)
        if option is not None and option.name in earlier:
            found += _attributes(name, earlier[option.name], option)
        else:
            found.append((name, old_text, new_text))
    if before.kind != after.kind:
        found.insert(0, ("kind", before.kind, after.kind))
    old, new = _steered(before), _steered(after)
    if old != new:
        found.append(("steered through", old, new))
    return tuple(found)


def _attributes(name: str, before: RowOption, after: RowOption) -> list[tuple[str, str, str]]:
    """What differs in an option, one thing at a time, so that a figure is not lost in a long formula."""
    pairs = [
        (f"{name}, open when", before.when, after.when),
        (f"{name}, error", _stated(before.error), _stated(after.error)),
        (f"{name}, bias", _stated(before.bias), _stated(after.bias)),
        (f"{name}, cost", before.cost, after.cost),
        (f"{name}, reference", "yes" if before.reference else "no", "yes" if after.reference else "no"),
        (name, _body(before), _body(after)),
    ]
    return [pair for pair in pairs if pair[1] != pair[2]]


def _body(option: RowOption) -> str:
    return option.body if option.nested else f"= {option.body}"


def _stated(share: Fraction | None) -> str:
    return "" if share is None else exact_percent(share)


def _steered(row: Row) -> str:
    return ", ".join(sorted(f"{mover.source} ({mover.by})" for mover in row.movers))


def known_names(comparison: Comparison) -> set[str]:
    """What ``--allow`` can name."""
    rows = (*comparison.old.rows, *comparison.new.rows)
    return {*FIGURES, *MEASURED, *(row.id for row in rows)}


MEASURED: tuple[str, ...] = ("spread", "over_issuance")
"""What trial and bias add to the reasons, by the name that ``--allow`` takes."""


def _growth(found: Comparison, allow: frozenset[str], seconds: float) -> tuple[Growth, ...]:
    reasons: list[Growth] = []

    def add(name: str, says: str, clause: str = "") -> None:
        reasons.append(Growth(name, says, clause, name in allow))

    for row in found.added:
        if row.leaves_something:
            add(row.id, f"new: {_leaves(row)}", row.place.clause)
    for change in found.changed:
        for says in _loosened(change, found.old.evidence.model, found.new.evidence.model):
            add(change.after.id, says, change.after.place.clause)
    for row in found.new.rows:
        earlier = next((each for each in found.old.rows if each.id == row.id), None)
        if row.gaps and not (earlier and earlier.gaps):
            add(row.id, "some projects have no result here now", row.place.clause)
    figures = {name: found.figures[name][1] for name in ONE_PROJECT}
    grown = [name for name in ONE_PROJECT if exceeds(found.figures[name][1], found.figures[name][0])]
    given = _given(found.new, allow)
    if grown and given != Given():
        asked = [(name, _with_others(name, given)) for name in grown]
        less = figures_if_given(found.new.evidence.graph, asked, seconds)
        figures.update(zip(grown, less, strict=True))
        grown = [name for name in grown if exceeds(figures[name], found.figures[name][0])]
    for name in grown:
        add(name, "grew")
    for each in found.measured:
        if each.grew:
            add(each.name, "grew on the projects given")
    return tuple(reasons)


def _given(new: Register, allow: frozenset[str]) -> Given:
    points = frozenset(row.id for row in new.rows if row.id in allow and row.place.points)
    names = frozenset(row.id for row in new.rows if row.id in allow and not row.place.points)
    return Given(points=points, names=names)


def _with_others(figure: str, given: Given) -> Given:
    from samesum.evidence.routes.layout import ALL_BUT_DEVELOPER

    return replace(given, deciders=ALL_BUT_DEVELOPER.deciders) if figure == "developer_most" else given


def exceeds(after: Bracket, before: Bracket) -> bool:
    """Whether a figure grew; of brackets, whether the most that it can be grew."""
    if after.high is None:
        return before.high is not None
    return before.high is not None and after.high > before.high


def _leaves(row: Row) -> str:
    whose = {"": "somebody"}.get(row.decides, f"the {row.decides.replace(', ', ' and the ')}")
    match row.kind:
        case "overlap":
            return "two branches are open at once"
        case "steered":
            return f"conditions that {whose} can move"
        case "setting":
            return f"a value that {whose} sets"
        case "judgement":
            return f"a wording that {whose} reads"
    return f"a choice by {whose}"


_TIGHTNESS = {"at validation": 0, "each period": 1, "not stated": 1, "": 0}


def _loosened(change: Change, old: m.Model, new: m.Model) -> list[str]:
    before, after = change.before, change.after
    if change.opened:
        return [f"leaves something to somebody now: {_leaves(after)}"]
    found: list[str] = []
    if not after.leaves_something:
        return found
    if before.kind != after.kind and after.kind == "overlap":
        found.append("two branches are open at once now")
    if after.kind == before.kind == "choice":
        more = [option.name for option in after.options if option.name not in {each.name for each in before.options}]
        if more and len(after.options) > len(before.options):
            found.append(f"more options: {', '.join(more)}")
        conditions = {option.name: option.when for option in before.options}
        freed = [option.name for option in after.options if conditions.get(option.name) and not option.when]
        if freed:
            found.append(f"options without their condition: {', '.join(freed)}")
        for name in [name for name, more in change.wider if more]:
            found.append(f"some projects have the option {name} now that had not: its condition changed")
        found += further_apart(before, after)
        if _TIGHTNESS[after.fixed] > _TIGHTNESS[before.fixed]:
            found.append("was fixed at validation, is open each period")
    sources = {mover.source for mover in before.movers}
    fresh = [mover for mover in after.movers if mover.source not in sources]
    if fresh:
        found.append("conditions can be moved through " + ", ".join(sorted({mover.source for mover in fresh})))
    if before.kind == after.kind == "setting" and _wider(before.id, old, new):
        found.append("the values that may be set are more")
    return found


def _wider(name: str, old: m.Model, new: m.Model) -> bool:
    """Whether a setting can be something that it could not be before."""
    before, after = (next(each for each in model.settings if each.name == name) for model in (old, new))
    match before.domain, after.domain:
        case m.Range(), m.Range() if before.unit.dimension == after.unit.dimension:
            first, second = before.unit.factor, after.unit.factor
            lows = (before.domain.low, after.domain.low)
            highs = (before.domain.high, after.domain.high)
            lower = lows[0] is not None and (lows[1] is None or lows[1] * second < lows[0] * first)
            higher = highs[0] is not None and (highs[1] is None or highs[1] * second > highs[0] * first)
            return lower or higher
        case m.OneOf(values=some), m.OneOf(values=more):
            return not set(more) <= set(some)
    return type(before.domain) is not type(after.domain)


Direction = Literal["grew", "fell", "same"]


def direction(before: Bracket, after: Bracket) -> Direction:
    """How a figure moved."""
    return "grew" if exceeds(after, before) else "fell" if exceeds(before, after) else "same"
