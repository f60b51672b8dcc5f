"""Every example of the language reference reads without a problem."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from samesum.reading.cases import read_cases
from samesum.reading.columns import read_columns
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
    assert set(ALLOWED) - {"choice that follows another", "choice that takes one option"} <= words


def test_the_projects_of_the_reference_are_read(reader: Reader, tmp_path: Path) -> None:
    model = read(EXAMPLES[-1], "reference.md", reader=reader).model
    assert model is not None
    (written,) = re.findall(r"^```yaml\n(.*?)^```$", PAGE, re.MULTILINE | re.DOTALL)
    (table,) = re.findall(r"^```csv\n(.*?)^```$", PAGE, re.MULTILINE | re.DOTALL)
    (tmp_path / "cases.yaml").write_text(written, encoding="utf-8")
    (tmp_path / "cases.csv").write_text(table, encoding="utf-8")
    cases, problems = read_cases(tmp_path / "cases.yaml", model)
    assert problems == () and [case.name for case in cases.cases] == ["Heron Flats", "case 2"]
    assert cases.cases[0].values["area"] == (120, 80) and cases.cases[0].expected is not None
    columns, problems = read_columns(tmp_path / "cases.csv", model)
    assert problems == () and columns is not None
    assert list(columns.sizes["stratum"]) == [2, 1] and list(columns.given["access"]) == [True, False]


def test_the_reference_tells_apart_whole_rulebooks_and_pieces() -> None:
    assert len(WHOLE) >= 2 and len(PIECES) >= 20
