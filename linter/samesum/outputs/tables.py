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
    for title in titles:
        table.add_column(title, justify="right" if title in numbers else "left", overflow="fold")
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
