"""The register as columns: the one place that says which columns there are and how a cell is written.

Every tabular format (terminal, CSV, XLSX, Markdown, HTML) takes its columns from here.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

from samesum.evidence.routes.closing import Bracket
from samesum.outputs import amounts
from samesum.reviewing.places import exact_percent
from samesum.reviewing.rows import Register, Row, RowOption, Simulated
from samesum.written import whole

Cell = str | int | float | None
"""A text, a whole number, a share (0.05 for 5 %), or nothing known."""


@dataclass(frozen=True, slots=True)
class Column:
    """``kind`` is ``text``, ``count`` or ``share``; ``width`` in signs, for XLSX."""

    title: str
    kind: str
    width: int
    of: Callable[[Row], Cell]


COLUMNS: tuple[Column, ...] = (
    Column("Branch point", "text", 26, lambda row: row.id),
    Column("Clause", "text", 9, lambda row: row.place.clause),
    Column("Wording", "text", 48, lambda row: " ".join(row.place.wording.split())),
    Column("Quantity", "text", 22, lambda row: row.quantity),
    Column("Kind", "text", 11, lambda row: row.kind),
    Column("Who decides", "text", 20, lambda row: decider(row)),
    Column("Fixed", "text", 14, lambda row: row.fixed),
    Column("Options", "text", 48, lambda row: "; ".join(option_text(option) for option in row.options)),
    Column("Routes with it", "count", 15, lambda row: count(row.routes)),
    Column("Routes without it", "count", 15, lambda row: count(row.without)),
    Column("Swing", "share", 9, lambda row: row.measures.swing),
    Column("Left if closed", "share", 9, lambda row: row.measures.left_if_closed),
    Column("Over-issuance", "share", 9, lambda row: row.measures.over_issuance),
    Column("Simulated on", "text", 18, lambda row: drawn_from(row.measures.simulated)),
    Column("Suggested closure", "text", 44, lambda row: row.measures.closure or row.closure),
    Column("Decision", "text", 14, lambda row: decision(row)),
    Column("Reason", "text", 36, lambda row: row.standing.decision.reason if row.standing else ""),
    Column("Decided by", "text", 18, lambda row: row.standing.decision.by if row.standing else ""),
    Column("Decided on", "text", 12, lambda row: row.standing.decision.when if row.standing else ""),
)


def columns_for(register: Register) -> tuple[Column, ...]:
    """The columns that have anything to say: shares only when trial or bias was asked, the reviewers' words only
    when there are decisions; what is the same in every row is left to a sentence (``simulated_text``)."""
    measured = {"Swing", "Left if closed", "Over-issuance"}
    decided = {"Reason", "Decided by", "Decided on"}
    rows = register.rows
    return tuple(
        column
        for column in COLUMNS
        if column.title != "Simulated on"
        and (column.title not in measured | decided or any(column.of(row) not in (None, "") for row in rows))
    )


def drawn_from(simulated: Simulated | None) -> str:
    """``the 3 given cases``, ``declared domains``; "" where nothing was simulated."""
    if simulated is None:
        return ""
    if not simulated.given:
        return "declared domains"
    return "the given case" if simulated.given == 1 else f"the {whole(simulated.given)} given cases"


def simulated_text(register: Register) -> str:
    """What over-issuance rests on, in a sentence; "" where nothing was simulated."""
    simulated = register.simulated
    if simulated is None:
        return ""
    projects = f"{whole(simulated.projects)} projects"
    if not simulated.given:
        return f"Over-issuance is simulated on {projects} drawn from the declared domains."
    return f"Over-issuance is simulated on {drawn_from(simulated)} and no others ({projects}, the cases in turn)."


def decider(row: Row) -> str:
    """Who decides, and through what where a condition is steered."""
    if row.leader:
        return f"nobody (follows {row.leader})"
    if not row.decides:
        return "nobody"
    if row.kind == "steered":
        sources = list(dict.fromkeys(mover.source for mover in row.movers))
        return f"{row.decides}, through {', '.join(sources)}"
    return row.decides


def option_text(option: RowOption) -> str:
    """``plots: error 8 %, cost 40 [USD/ha] * area, reference``."""
    said = []
    if option.when:
        said.append(f"when {option.when}")
    if option.error is not None:
        said.append(f"error {exact_percent(option.error)}")
    if option.bias is not None:
        said.append(f"bias {exact_percent(option.bias)}")
    if option.cost:
        said.append(f"cost {option.cost}")
    if option.reference:
        said.append("reference")
    return f"{option.name}: {', '.join(said)}" if said else option.name


def count(figure: Bracket) -> Cell:
    """A count: a number when it is exact, else what is known of it."""
    if figure.exact:
        return figure.high
    return bracket_text(figure)


def bracket_text(figure: Bracket) -> str:
    """``12``, ``between 2 and 12``, ``at least 2``."""
    if figure.high is None:
        return f"at least {whole(figure.low)}" if figure.low else "not counted in time"
    return whole(figure.high) if figure.exact else f"between {whole(figure.low)} and {whole(figure.high)}"


def decision(row: Row) -> str:
    """``open``, ``accepted``, ``to be closed``, with what became of it; "" where nothing is left to decide."""
    if row.standing is None:
        return "open" if row.leaves_something else ""
    verdict = row.standing.decision.verdict
    return f"{verdict} (stale: {row.standing.stale} since)" if row.standing.stale else verdict


def share(value: float) -> str:
    """A measured share for people, short enough for a table: ``12.3 %``, ``0.4 %``, ``150 %``, ``12.5 times``."""
    hundred = value * 100
    if not hundred:
        return "0 %"
    if abs(value) >= 10:
        return amounts.share(value)
    digits = 0 if abs(hundred) >= 99.95 else 1 if abs(hundred) >= 1 else 2
    text = f"{hundred:.{digits}f}"
    return f"{text} %" if float(text) else f"{'-' if hundred < 0 else ''}< 0.01 %"


def stale_lines(register: Register) -> Sequence[str]:
    """One line for each decision that no longer fits the rulebook."""
    lines = []
    for standing in register.stale:
        decided = standing.decision
        by = f" by {decided.by}" if decided.by else ""
        when = f" on {decided.when}" if decided.when else ""
        what = "is no longer there" if standing.stale == "gone" else "says something else since"
        lines.append(f"{decided.place}: decided `{decided.verdict}`{by}{when}, but the place {what}")
    return lines
