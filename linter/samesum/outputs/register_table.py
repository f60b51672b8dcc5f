"""The register as a table for people in the terminal.

As many columns as the width carries; the rest stands in the other formats. What leaves nothing to anybody
is quiet, what is accepted is marked.
"""

from __future__ import annotations

from samesum.outputs.counts import figure, title_of
from samesum.outputs.page import CAUTION, Page, Paper, clean
from samesum.outputs.register_cells import bracket_text, decider, decision, share, stale_lines
from samesum.outputs.tables import table_lines
from samesum.reviewing.rows import Register, Row


def register_text(register: Register, paper: Paper, everything: bool = False) -> str:
    """Title, table, closing line. ``everything`` shows also what facts alone decide."""
    page = Page(paper)
    page.heading(title_of(register.evidence.model))
    page.blank()
    rows = [row for row in register.rows if everything or row.leaves_something or row.standing]
    if rows:
        titles, cells = _cells(rows, paper.width)
        styles = ["" if row.leaves_something else "quiet" for row in rows]
        page.lines.extend(table_lines(titles, cells, paper, styles=styles, numbers=_NUMBERS))
    else:
        page.line("No branch point leaves anything to anybody.", "good")
    page.blank()
    _summary(page, register, len(register.rows) - len(rows))
    page.blank()
    page.paragraph(CAUTION, style="quiet")
    return page.text


_NUMBERS = frozenset(("Without it", "Swing", "Left", "Over-issues"))


def _cells(rows: list[Row], width: int) -> tuple[list[str], list[list[str]]]:
    titles = ["Clause", "Branch point", "Kind", "Who decides"]
    cells = [[row.place.clause, row.id, row.kind, _who(row)] for row in rows]

    def add(title: str, values: list[str]) -> None:
        if any(values):
            titles.append(title)
            for line, value in zip(cells, values, strict=True):
                line.append(value)

    if width >= 60:
        add("Without it", [bracket_text(row.without) if row.leaves_something else "" for row in rows])
    add("Swing", [_share(row.measures.swing) for row in rows])
    if width >= 90:
        add("Left", [_share(row.measures.left_if_closed) for row in rows])
    add("Over-issues", [_share(row.measures.over_issuance) for row in rows])
    add("Decision", [decision(row) for row in rows])
    return titles, cells


def _who(row: Row) -> str:
    who = decider(row)
    return f"{who}, {row.fixed}" if row.fixed in ("at validation", "each period") else who


def _share(value: float | None) -> str:
    return "" if value is None else share(value)


def _summary(page: Page, register: Register, hidden: int) -> None:
    leaving = sum(row.leaves_something for row in register.rows)
    accepted = sum(row.standing is not None and row.standing.accepted for row in register.rows)
    said = f"{leaving} of {len(register.rows)} places leave something to somebody"
    page.paragraph(said + (f"; {accepted} accepted by the review." if accepted else "."), style="strong")
    page.paragraph(
        f"Routes open to one project, at most: {figure(register.evidence.counts, 'per_project_most')}. "
        "Without it: the most that are left when this one place is closed."
    )
    if hidden:
        page.paragraph(f"{hidden} that facts alone decide are not shown; --all shows them.", style="quiet")
    for line in stale_lines(register):
        page.paragraph(clean(f"Stale: {line}."), style="warn", hanging=2)
