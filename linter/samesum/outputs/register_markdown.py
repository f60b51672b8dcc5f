"""The register as a Markdown table, for an issue or a committee's paper."""

from __future__ import annotations

from samesum.outputs.counts import title_of
from samesum.outputs.harmless import code, markdown
from samesum.outputs.page import CAUTION, clean
from samesum.outputs.register_cells import Cell, Column, columns_for, share, simulated_text, stale_lines
from samesum.reviewing.rows import Register, Row
from samesum.written import whole


def register_markdown(register: Register) -> str:
    """Title, table, and what is stale in the review record."""
    columns = columns_for(register)
    lines = [f"# Branch points: {markdown(title_of(register.evidence.model))}", ""]
    lines.append("| " + " | ".join(column.title for column in columns) + " |")
    lines.append("|" + "|".join("---" if column.kind == "text" else "---:" for column in columns) + "|")
    for row in register.rows:
        lines.append("| " + " | ".join(_cell(column, row) for column in columns) + " |")
    simulated = simulated_text(register)
    if simulated:
        lines += ["", markdown(simulated)]
    stale = stale_lines(register)
    if stale:
        lines += ["", "Decisions that no longer fit:", "", *(f"* {markdown(line)}" for line in stale)]
    lines += ["", markdown(CAUTION)]
    return "\n".join(lines) + "\n"


def _cell(column: Column, row: Row) -> str:
    if column.title == "Branch point":
        return code(row.id)
    if column.title == "Fixed" and row.leaves_something and not row.fixed:
        return "–"  # the language lets only a choice say when it is fixed
    value = column.of(row)
    return _with_code(value) if column.title == "Suggested closure" and isinstance(value, str) else _written(value)


def _with_code(text: str) -> str:
    """A sentence of ours, its names between backticks as code."""
    parts = text.split("`")
    if len(parts) % 2 == 0 or not all(part.strip() for part in parts[1::2]):
        return markdown(text)
    return "".join(code(part) if number % 2 else markdown(part) for number, part in enumerate(parts))


def _written(value: Cell) -> str:
    if value is None:
        return ""
    if isinstance(value, str):
        return markdown(value)
    return clean(whole(value)) if isinstance(value, int) else share(value)
