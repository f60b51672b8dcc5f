"""A table for people, drawn by rich: wrapped to the page, readable without colours."""

from __future__ import annotations

import io
from collections.abc import Collection, Sequence

from samesum.outputs.page import Paper, clean

_STYLES = {"": "", "quiet": "dim", "strong": "bold", "bad": "bold red", "warn": "yellow", "good": "green"}


def table_lines(
    titles: Sequence[str],
    cells: Sequence[Sequence[str]],
    paper: Paper,
    styles: Sequence[str] = (),
    numbers: Collection[str] = (),
) -> list[str]:
    """The lines of a table. ``styles`` one a row; ``numbers`` titles of columns that stand on the right."""
    from rich.box import SIMPLE_HEAD
    from rich.console import Console
    from rich.table import Table
    from rich.text import Text

    table = Table(box=SIMPLE_HEAD, padding=(0, 1, 0, 0), pad_edge=False, header_style="bold", expand=False)
    columns = [[clean(title), *(clean(row[place]) for row in cells)] for place, title in enumerate(titles)]
    widths = _widths(columns, paper.width)
    for title, width in zip(titles, widths, strict=True):
        table.add_column(title, justify="right" if title in numbers else "left", overflow="fold", width=width)
    for number, row in enumerate(cells):
        style = _STYLES[styles[number]] if number < len(styles) else ""
        table.add_row(*(Text(clean(text)) for text in row), style=style)
    out = io.StringIO()
    console = Console(
        file=out,
        width=paper.width,
        force_terminal=paper.colour,
        color_system="standard" if paper.colour else None,
        legacy_windows=False,
        highlight=False,
        markup=False,
        emoji=False,
        _environ={},
    )
    console.print(table)
    return [line.rstrip() for line in out.getvalue().split("\n")[:-1] if line.strip()]


def _widths(columns: Sequence[Sequence[str]], width: int) -> list[int | None]:
    """How wide each column is, so that no name is broken in the middle: the columns that can be wrapped between words
    give way. None for each where there is no room for that."""
    from rich.cells import cell_len

    widths = [max(cell_len(text) for text in column) for column in columns]
    words = [max(cell_len(word) for text in column for word in (text.split() or [""])) for column in columns]
    room = width - 2 * len(columns) - 1  # a space on either side
    if sum(words) > room:
        return [None] * len(columns)
    while sum(widths) > room:
        spare = max(range(len(widths)), key=lambda place: (widths[place] > words[place], widths[place]))
        widths[spare] -= 1
    return list(widths)
