"""Every example of the language reference reads without a problem."""

from __future__ import annotations

import re

import pytest

from samesum.reading.phrases import ALLOWED
from samesum.reading.read import Reader, read
from samesum.reading.words import RESERVED
from samesum.shipped import shipped_folder

PAGE = (shipped_folder("grammar") / "reference.md").read_text(encoding="utf-8")
EXAMPLES = re.findall(r"^```rulebook\n(.*?)^```$", PAGE, re.MULTILINE | re.DOTALL)
WHOLE = [example for example in EXAMPLES if example.startswith("# a whole rulebook\n")]
PIECES = [example for example in EXAMPLES[:-1] if example not in WHOLE]


@pytest.mark.parametrize("example", WHOLE)
def test_a_whole_rulebook_of_the_reference_reads(example: str, reader: Reader) -> None:
    reading = read(example, "reference.md", reader=reader)
    assert reading.problems == () and reading.model is not None


@pytest.mark.parametrize("piece", PIECES)
def test_a_piece_of_the_reference_reads_with_what_the_examples_use(piece: str, reader: Reader) -> None:
    assert read(EXAMPLES[-1] + piece, "reference.md", reader=reader).problems == ()


def test_the_reference_shows_every_kind_of_declaration_and_every_word() -> None:
    shown = "\n".join(EXAMPLES)
    words = set(re.findall(r"[a-z]+", shown))
    assert words >= RESERVED
    assert set(ALLOWED) - {"choice that follows another"} <= words


def test_the_reference_tells_apart_whole_rulebooks_and_pieces() -> None:
    assert len(WHOLE) >= 2 and len(PIECES) >= 20
