"""The register as a table for people in the terminal.

As many columns as the width carries; the rest stands in the other formats. What leaves nothing to anybody
is quiet, what is accepted is marked.
"""

from __future__ import annotations

import re
from itertools import zip_longest

from samesum.outputs.counts import figure, title_of
from samesum.outputs.page import CAUTION, Page, Paper, clean, width_of
from samesum.outputs.register_cells import bracket_text, decider, decision, share, simulated_text, stale_lines
from samesum.outputs.tables import table_lines
from samesum.reviewing.rows import Register, Row
from samesum.written import whole


def register_text(register: Register, paper: Paper, everything: bool = False) -> str:
    """Title, table, closing line. ``everything`` shows also what facts alone decide."""
    page = Page(paper)
    page.heading(title_of(register.evidence.model))
    page.blank()
    rows = [row for row in register.rows if everything or row.leaves_something or row.standing]
    if rows:
        titles, cells = _cells(rows, paper.width)
        styles = ["" if row.leaves_something else "quiet" for row in rows]
        page.lines.extend(_table(titles, cells, styles, paper))
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


# Where a cell may be broken: at spaces and behind the signs that join the parts of a name; `12 %` stays whole.
_PIECE = re.compile(r"\S+ %|[^\s_/@-]*[_/@-]+|[^\s_/@-]+|\s+")
# What gives way on a narrow page, the first first.
_GIVES_WAY = ("Left", "Kind", "Without it", "Clause", "Swing", "Over-issues")


def _table(titles: list[str], cells: list[list[str]], styles: list[str], paper: Paper) -> list[str]:
    """The table with every cell broken here, so that no name is cut inside a word; each line of a row is a row of
    the table as it is drawn."""
    columns = [[title, *values] for title, values in zip(titles, zip(*cells, strict=True), strict=True)]
    for title in _GIVES_WAY:
        if sum(_least(column) for column in columns) > paper.width - 2 * len(columns):
            columns = [column for column in columns if column[0] != title]
    titles = [column[0] for column in columns]
    cells = [list(row) for row in zip(*(column[1:] for column in columns), strict=True)]
    widths = [max(width_of(text) for text in column) for column in columns]
    least = [_least(column) for column in columns]
    while sum(widths) > paper.width - 2 * len(columns) and widths != least:
        widest = max(range(len(widths)), key=lambda column: (widths[column] > least[column], widths[column], -column))
        widths[widest] -= 1
    wrapped_titles = ["\n".join(_broken(title, width)) for title, width in zip(titles, widths, strict=True)]
    numbers = {wrapped_titles[at] for at, title in enumerate(titles) if title in _NUMBERS}
    lines: list[list[str]] = []
    line_styles: list[str] = []
    for row, style in zip(cells, styles, strict=True):
        broken = [_broken(text, width) for text, width in zip(row, widths, strict=True)]
        for line in zip_longest(*broken, fillvalue=""):
            lines.append(list(line))
            line_styles.append(style)
    return table_lines(wrapped_titles, lines, paper, styles=line_styles, numbers=numbers)


def _least(column: list[str]) -> int:
    return max(width_of(piece) for text in column for piece in _PIECE.findall(text) or [""])


def _broken(text: str, width: int) -> list[str]:
    lines = [""]
    for piece in _PIECE.findall(text):
        if lines[-1] and not piece.isspace() and width_of(lines[-1] + piece) > width:
            lines.append("")
        if lines[-1] or not piece.isspace():
            lines[-1] += piece
    return [line.rstrip() for line in lines]


def _who(row: Row) -> str:
    who = decider(row)
    return f"{who}, {row.fixed}" if row.fixed in ("at validation", "each period") else who


def _share(value: float | None) -> str:
    return "" if value is None else share(value)


def _summary(page: Page, register: Register, hidden: int) -> None:
    leaving = sum(row.leaves_something for row in register.rows)
    accepted = sum(row.standing is not None and row.standing.accepted for row in register.rows)
    said = f"{whole(leaving)} of {whole(len(register.rows))} places leave something to somebody"
    page.paragraph(said + (f"; {whole(accepted)} accepted by the review." if accepted else "."), style="strong")
    page.paragraph(
        f"Routes open to one project, at most: {figure(register.evidence.counts, 'per_project_most')}. "
        "Without it: the most that are left when this one place is closed."
    )
    simulated = simulated_text(register)
    if simulated:
        page.paragraph(simulated)
    if hidden:
        page.paragraph(f"{whole(hidden)} that facts alone decide are not shown; --all shows them.", style="quiet")
    for line in stale_lines(register):
        page.paragraph(clean(f"Stale: {line}."), style="warn", hanging=2)
