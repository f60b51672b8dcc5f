"""The register as a Markdown table, for an issue or a committee's paper."""

from __future__ import annotations

from samesum.outputs.counts import title_of
from samesum.outputs.harmless import code, markdown
from samesum.outputs.page import CAUTION, clean
from samesum.outputs.register_cells import Cell, columns_for, share, stale_lines
from samesum.reviewing.rows import Register
from samesum.written import whole


def register_markdown(register: Register) -> str:
    """Title, table, and what is stale in the review record."""
    columns = columns_for(register)
    lines = [f"# Branch points: {markdown(title_of(register.evidence.model))}", ""]
    lines.append("| " + " | ".join(column.title for column in columns) + " |")
    lines.append("|" + "|".join("---" if column.kind == "text" else "---:" for column in columns) + "|")
    for row in register.rows:
        cells = [code(row.id) if number == 0 else _written(column.of(row)) for number, column in enumerate(columns)]
        lines.append("| " + " | ".join(cells) + " |")
    stale = stale_lines(register)
    if stale:
        lines += ["", "Decisions that no longer fit:", "", *(f"* {markdown(line)}" for line in stale)]
    lines += ["", markdown(CAUTION)]
    return "\n".join(lines) + "\n"


def _written(value: Cell) -> str:
    if value is None:
        return ""
    if isinstance(value, str):
        return markdown(value)
    return clean(whole(value)) if isinstance(value, int) else share(value)
