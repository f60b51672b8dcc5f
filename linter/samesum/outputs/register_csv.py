"""The register as CSV (RFC 4180, UTF-8): one row a branch point, shares as numbers (0.05 for 5 %)."""

from __future__ import annotations

import csv
import io

from samesum.outputs.harmless import cell
from samesum.outputs.register_cells import COLUMNS, Cell
from samesum.reviewing.rows import Register
from samesum.written import long_integers


def register_csv(register: Register) -> str:
    """All columns, always the same ones, so that files of different drafts can be put together."""
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\r\n")
    writer.writerow([column.title for column in COLUMNS])
    with long_integers():
        for row in register.rows:
            writer.writerow([_written(column.of(row)) for column in COLUMNS])
    return out.getvalue()


def _written(value: Cell) -> str:
    if value is None:
        return ""
    if isinstance(value, str):
        return cell(value)
    return str(value) if isinstance(value, int) else f"{value:.6g}"
