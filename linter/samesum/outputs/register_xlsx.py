"""The register as an Excel workbook, byte for byte the same for the same register."""

from __future__ import annotations

import io
from datetime import UTC, datetime

from samesum.outputs.counts import FIGURES, figure, title_of
from samesum.outputs.harmless import is_formula
from samesum.outputs.page import clean
from samesum.outputs.register_cells import COLUMNS, simulated_text, stale_lines
from samesum.reviewing.rows import Register
from samesum.written import whole

_MADE = datetime(2000, 1, 1, tzinfo=UTC).replace(tzinfo=None)  # Excel wants a date; the same for every file
_LONGEST_EXACT = 10**15  # Excel keeps fifteen digits
_LONGEST_TEXT = 32_000  # of 32,767 that a cell takes


def register_xlsx(register: Register) -> bytes:
    """A sheet with the rows (header frozen, filters, widths) and one with the counts."""
    import xlsxwriter

    out = io.BytesIO()
    book = xlsxwriter.Workbook(out, {"in_memory": True, "strings_to_formulas": False, "strings_to_urls": False})
    book.set_properties({"title": _text(title_of(register.evidence.model)), "created": _MADE})
    base = {"valign": "top", "text_wrap": True, "font_size": 10}
    head = book.add_format({**base, "bold": True, "bottom": 1, "bg_color": "#E9EEEB"})
    loud = book.add_format(base)
    quiet = book.add_format({**base, "font_color": "#6B7280"})
    formats = {
        (kind, bold): book.add_format(
            {
                **base,
                **({} if bold else {"font_color": "#6B7280"}),
                **({"num_format": "#,##0"} if kind == "count" else {"num_format": "0.0%"} if kind == "share" else {}),
            }
        )
        for kind in ("text", "count", "share")
        for bold in (True, False)
    }
    sign = {bold: book.add_format({**base, "quote_prefix": True}) for bold in (True, False)}
    sheet = book.add_worksheet("Branch points")
    for number, column in enumerate(COLUMNS):
        sheet.set_column(number, number, column.width)
        sheet.write_string(0, number, column.title, head)
    for line, row in enumerate(register.rows, start=1):
        bold = row.leaves_something
        for number, column in enumerate(COLUMNS):
            value = column.of(row)
            if isinstance(value, str):
                style = sign[bold] if is_formula(value) else formats["text", bold]
                sheet.write_string(line, number, _text(value), style)
            elif value is None:
                sheet.write_blank(line, number, None, formats["text", bold])
            elif isinstance(value, int) and abs(value) >= _LONGEST_EXACT:
                sheet.write_string(line, number, whole(value), formats["text", bold])
            else:
                sheet.write_number(line, number, value, formats[column.kind, bold])
    sheet.freeze_panes(1, 1)
    sheet.autofilter(0, 0, len(register.rows), len(COLUMNS) - 1)
    sheet.set_landscape()
    sheet.repeat_rows(0)
    sheet.fit_to_pages(1, 0)
    counts = book.add_worksheet("Counts")
    counts.set_column(0, 0, 26)
    counts.set_column(1, 1, 34)
    counts.set_column(2, 2, 80)
    for line, (name, label, says) in enumerate(FIGURES):
        counts.write_string(line, 0, label, loud)
        counts.write_string(line, 1, _text(figure(register.evidence.counts, name)), loud)
        counts.write_string(line, 2, _text(says), quiet)
    told = len(FIGURES) + 1
    if simulated_text(register):
        counts.write_string(told, 0, _text(simulated_text(register)), loud)
        told += 1
    for line, stale in enumerate(stale_lines(register), start=told):
        counts.write_string(line, 0, _text(f"Stale decision: {stale}"), loud)
    book.close()
    return out.getvalue()


def _text(text: str) -> str:
    plain = clean(text.replace("\n", " "))
    return plain if len(plain) <= _LONGEST_TEXT else plain[: _LONGEST_TEXT - 1] + "…"
