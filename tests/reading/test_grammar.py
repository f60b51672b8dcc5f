"""The grammar, its kept copy, and the memory of blocks."""

from __future__ import annotations

import hashlib
import os
import stat
import subprocess
import sys
from pathlib import Path

import pytest
from lark import Lark

from samesum.reading import explain, syntax
from samesum.reading.read import Reader, make_reader, read
from samesum.reading.words import RESERVED
from samesum.shipped import shipped_folder

TEXT = 'rulebook "X", draft "1"\nresult q [t]\nfact a [t], 0 to 3\n\nquantity q [t]\n    = a * 2\n'


@pytest.fixture(scope="module")
def strict() -> Lark:
    grammar = (shipped_folder("grammar") / "rulebook.lark").read_text(encoding="utf-8")
    return Lark(grammar, strict=True, **syntax.parser_options())


def test_the_grammar_has_no_ambiguity(strict: Lark) -> None:
    assert strict.parse("fact a [t], 0 to 3\n", start="block")


def test_every_terminal_is_named_and_has_words(strict: Lark) -> None:
    for terminal in strict.terminals:
        assert not terminal.name.startswith("__"), terminal
        word = explain.word_of(terminal.name)
        assert word.startswith("`") or " " in word or terminal.name == "SPACE", terminal.name
    words = {str(terminal.pattern.value) for terminal in strict.terminals if str(terminal.pattern.value).isalpha()}
    assert words - {"spread"} <= RESERVED


def test_the_prepared_grammar_is_kept_for_its_owner_alone(tmp_path: Path) -> None:
    folder = tmp_path / "deep" / "cache"
    make_reader(folder)
    assert stat.S_IMODE(folder.stat().st_mode) == 0o700
    kept = sorted(path.name for path in folder.iterdir())
    assert len(kept) == 2 and kept[1].endswith(".sha256")
    assert read(TEXT, "x", reader=make_reader(folder)).problems == ()


@pytest.mark.parametrize("damage", ["empty", "cut", "flipped", "no seal", "other text"])
def test_a_damaged_copy_is_made_anew(tmp_path: Path, damage: str) -> None:
    make_reader(tmp_path)
    kept, seal = sorted(tmp_path.iterdir())
    whole = kept.read_bytes()
    if damage == "no seal":
        seal.unlink()
    else:
        kept.write_bytes(
            {
                "empty": b"",
                "cut": whole[: len(whole) // 2],
                "flipped": whole[:4000] + bytes([whole[4000] ^ 255]) + whole[4001:],
                "other text": b"not a grammar at all",
            }[damage]
        )
    assert read(TEXT, "x", reader=make_reader(tmp_path)).problems == ()
    assert hashlib.sha256(kept.read_bytes()).hexdigest() == seal.read_text()


def test_a_folder_that_others_can_write_is_not_used(tmp_path: Path) -> None:
    tmp_path.chmod(0o777)
    assert read(TEXT, "x", reader=make_reader(tmp_path)).problems == ()
    assert list(tmp_path.iterdir()) == []


def test_a_folder_that_cannot_be_made_does_not_matter(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("in the way")
    assert read(TEXT, "x", reader=make_reader(tmp_path / "file" / "cache")).problems == ()


def test_the_same_text_gives_the_same_reading_in_every_process(samples: list[Path]) -> None:
    code = (
        "import sys; from pathlib import Path; from samesum.reading.read import *\n"
        "print(repr([read_file(Path(p), reader=make_reader()) for p in sys.argv[1:]]))"
    )
    chosen = [str(path) for path in samples[:3]]
    seen = {
        subprocess.run(
            [sys.executable, "-c", code, *chosen],
            env={**os.environ, "PYTHONHASHSEED": seed, "PYTHONPATH": os.pathsep.join(sys.path)},
            capture_output=True,
            check=True,
            text=True,
        ).stdout
        for seed in ("0", "1", "77")
    }
    assert len(seen) == 1


def test_an_edit_parses_and_resolves_one_block(tmp_path: Path, samples: list[Path]) -> None:
    reader = make_reader(tmp_path)
    text = max((path.read_text(encoding="utf-8") for path in samples), key=len)
    first = read(text, "x", reader=reader)
    parsed, resolved = reader.memory.parsed, reader.recall.resolved
    assert read(text, "x", reader=reader) == first
    assert (reader.memory.parsed, reader.recall.resolved) == (parsed, resolved)
    at = text.index(" = ", text.index("\nquantity ")) + 3
    read(text[:at] + "1 * " + text[at:], "x", reader=reader)
    assert (reader.memory.parsed, reader.recall.resolved) == (parsed + 1, resolved + 1)
    read("# one line more\n" + text, "x", reader=reader)
    assert reader.memory.parsed == parsed + 1


def test_remembering_changes_no_answer(reader: Reader, samples: list[Path]) -> None:
    for path in samples[:3]:
        text = path.read_text(encoding="utf-8")
        for step in range(0, len(text), max(1, len(text) // 12)):
            edited = text[:step] + text[step + 1 :]
            fresh = syntax.Memory()
            remembered = read(edited, "x", reader=reader)
            clean = Reader(reader.parser, reader.units, fresh, type(reader.recall)())
            assert read(edited, "x", reader=clean) == remembered


def test_the_memory_is_bounded(reader: Reader, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(syntax, "REMEMBERED_BLOCKS", 5)
    memory = syntax.Memory()
    for number in range(20):
        syntax.parse_block(f"fact a{number} [t], 0 to 3", reader.parser, memory)
    assert len(memory.known) == 5 and memory.parsed == 20
