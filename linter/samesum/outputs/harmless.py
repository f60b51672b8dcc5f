"""Texts from rulebooks made harmless for whatever will read them.

``page.clean`` takes out control characters, for every output; here is what each format needs besides.
"""

from __future__ import annotations

import re

from samesum.outputs.page import clean

_STARTS_A_FORMULA = "=+-@\t\r\uff1d\uff0b\uff0d\uff20"  # the last four: the same signs at full width
_MARKDOWN = re.compile(r"([\\`*_\[\]{}|#~!])")


def cell(text: str) -> str:
    """A text for a cell of CSV or XLSX: a spreadsheet takes what begins like a formula as a text."""
    plain = clean(text.replace("\n", " "))
    return f"'{plain}" if is_formula(plain) else plain


def is_formula(text: str) -> bool:
    """Whether a spreadsheet might take a text as a formula."""
    return text.lstrip()[:1] in _STARTS_A_FORMULA if text.strip() else False


def markdown(text: str) -> str:
    """A text for a cell of a Markdown table: no sign in it has a meaning."""
    plain = clean(text.replace("\n", " "))
    plain = plain.replace("&", "&amp;").replace("<", "&lt;").replace(">", "&gt;")
    return _MARKDOWN.sub(r"\\\1", plain)


def code(text: str) -> str:
    """An id in Markdown: as code, whatever signs it holds."""
    plain = clean(text).replace("|", "\\|")
    fence = "`" * (max((len(run) for run in re.findall(r"`+", plain)), default=0) + 1)
    pad = " " if plain.startswith("`") or plain.endswith("`") else ""
    return f"{fence}{pad}{plain}{pad}{fence}"
