"""Whatever is written, a reading comes back: no traceback, no hang."""

from __future__ import annotations

import re
import time
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from samesum.reading.blocks import blocks_of
from samesum.reading.read import Reader, make_reader, read, read_file
from samesum.reading.syntax import parse_block
from samesum.reading.tree import Declaration

HEAD = 'rulebook "X", draft "1"\nresult q [t]\nfact a [t], 0 to 3\n'
PLAIN = make_reader()
PIECES = [
    "fact", "a", "[t]", "[t C/", ",", "0", "to", "3", "\n", "\n    ", "\n        ", "quantity", "q", "=", "(", ")", "*",
    "choice by developer", "option x", "cases", "when", "otherwise", "is one of", "or", "and", "not", "sum(", "over",
    "index", "at most", '"', '"text"', "clause", "7.1", "table", "by", "up to", "above", "%", "-", "^", "1e9", "#",
    "\t", "follows", "takes", "yes or no", "é", "²", "\u00a0", "\r", "error", "cost", "[USD]", "]",
    "position(", "min(a, 3)",
]  # fmt: skip


SAMPLES = sorted((Path(__file__).parents[2] / "sample_rulebooks").glob("*.rulebook"))


@pytest.mark.parametrize("path", SAMPLES, ids=lambda path: path.stem)
def test_deleting_any_single_character_of_a_sample_gives_a_reading(path: Path, reader: Reader) -> None:
    text = path.read_text(encoding="utf-8")
    draft = path.with_name(path.name.replace("_repaired", ""))
    # A repaired draft repeats most blocks of its draft, where they are tried.
    tried = {block.text for block in blocks_of(draft.read_text(encoding="utf-8"))} if draft != path else set()
    inside = {
        at
        for piece in re.finditer(r'"[^"\n]*"|#[^\n]*', text)
        for at in range(piece.start() + 1, piece.end() - (piece[0][0] == '"'))
    }
    starts = [0]
    while (end := text.find("\n", starts[-1])) >= 0:
        starts.append(end + 1)
    for block in blocks_of(text):
        first = starts[block.line - 1]
        if block.text in tried:
            continue
        for at in range(first, first + len(block.text) + 1):
            # Deleting any one of several equal characters in a row gives the same text.
            if at and text[at] == text[at - 1]:
                continue
            if at in inside:
                # Inside a comment or a text the block stays a block: its tree says all there is to say.
                cut = at - first
                tree = parse_block(block.text[:cut] + block.text[cut + 1 :], reader.parser, reader.memory)
                assert isinstance(tree, Declaration)
                continue
            edited = text[:at] + text[at + 1 :]
            reading = read(edited, path.name, reader=reader)
            lines = edited.count("\n") + 1
            assert all(1 <= problem.span.line <= lines for problem in reading.problems)


@settings(max_examples=300, deadline=None)
@given(st.lists(st.sampled_from(PIECES), max_size=40))
def test_any_heap_of_words_gives_a_reading(pieces: list[str]) -> None:
    text = HEAD + " ".join(pieces)
    first = read(text, "x", reader=PLAIN)
    assert read(text, "x", reader=PLAIN) == first
    for problem in first.problems:
        assert problem.says and problem.span.column >= 1


@settings(max_examples=200, deadline=None)
@given(st.text(max_size=60))
def test_any_text_gives_a_reading(text: str) -> None:
    read(text, "x", reader=PLAIN)
    read(HEAD + "quantity q [t]\n    = " + text, "x", reader=PLAIN)


@pytest.mark.parametrize(
    ("text", "words"),
    [
        (HEAD + "quantity q [t]\n    = " + "(" * 3000 + "a" + ")" * 3000, "nested more than"),
        (HEAD + "quantity q [t]\n    = " + "-" * 3000 + "a", "nested more than"),
        (HEAD + "quantity q [t]\n    = 1 [t] * 2" + " ^ 2" * 3000, "nested more than"),
        (HEAD + "quantity q [t]\n    = 1e999999999 * a", "too long or too large"),
        (HEAD + "quantity q [t]\n    = " + "9" * 5000 + " * a", "too long or too large"),
        (HEAD + "quantity q [t]\n    = a * 10 ^ 10 ^ 10 ^ 10", ""),
        (HEAD + "quantity q [t]\n    = a ^ 999999999", "too large"),
        (HEAD + "applies when " + "not " * 3000 + "a > 3 [t]\nquantity q [t]\n    = a", "nested more than"),
        (HEAD + "fact b [" + "(" * 3000 + "t], 0 to 3\nquantity q [t]\n    = a", "where a unit belongs"),
        (HEAD + "table u [t] by a\n    up to 3 = " + "-" * 3000 + "5\nquantity q [t]\n    = a", "a row gives a number"),
        (HEAD + "constant c [t] = " + "-" * 3000 + "5 %\nquantity q [t]\n    = a", "nested more than"),
        (HEAD + "index i, at most 1e9\nquantity q [t]\n    = a", "whole number"),
        (HEAD + f"quantity {'x' * 100_000} [t]\n    = a", "`q`"),
    ],
)
def test_what_is_beyond_all_use_is_told_in_time(text: str, words: str, reader: Reader) -> None:
    start = time.monotonic()
    problems = read(text, "x", reader=reader).problems
    assert time.monotonic() - start < 5
    assert any(words in problem.says for problem in problems) or not words, problems
    assert len(problems) <= 2


def test_thousands_of_rows_names_and_slips_are_read_in_time(reader: Reader) -> None:
    start = time.monotonic()
    bands = "".join(f"    above {n} up to {n + 1} = {n}\n" for n in range(1, 4000))
    values = [f"v{n}" for n in range(3000)]
    domain = f"fact s, one of {', '.join(values[:-1])} or {values[-1]}\n"
    rows = "".join(f"    {value} = 1\n" for value in values)
    tables = f"table u [t] by x\n    up to 1 = 0\n{bands}{domain}table w [t] by s\n{rows}"
    assert read(f"{HEAD}fact x\n{tables}quantity q [t]\n    = u(x) + w(s)\n", "x", reader=reader).problems == ()
    slips = "".join(f"quantity r{n} [t]\n    = missing_{n} + a\n" for n in range(2000))
    problems = read(f"{HEAD}quantity q [t]\n    = a\n{slips}", "x", reader=reader).problems
    assert len(problems) == 2000
    assert time.monotonic() - start < 30


def test_deeply_nested_bodies_are_told(reader: Reader) -> None:
    lines = ["quantity q [t]"]
    for level in range(150):
        lines += [f"{' ' * (2 * level + 1)}cases", f"{' ' * (2 * level + 2)}when a > {level} [t]"]
    lines.append(" " * 400 + "= a")
    problems = read(HEAD + "\n".join(lines), "x", reader=reader).problems
    assert ["nested more than" in problem.says for problem in problems] == [True]


def test_a_very_long_file_and_one_of_empty_lines(reader: Reader) -> None:
    start = time.monotonic()
    assert "longer than" in read("#" * 5_000_000, "x", reader=reader).problems[0].says
    read(HEAD + "\n" * 1_000_000 + "quantity q [t]\n    = a\n", "x", reader=reader)
    read(HEAD + "quantity q [t]\n" + " \n" * 500_000 + "    = a\n", "x", reader=reader)
    assert time.monotonic() - start < 10


def test_a_rulebook_of_2000_lines_with_30_mistakes_gives_30_messages(reader: Reader) -> None:
    slips = [
        ("fact f{n} [ha], 0 to 9", "fact f{n} [ha, 0 to 9"),
        ("fact f{n} [ha], 0 to 9", "fact f{n} [ha] 0 to 9"),
        ("fact f{n} [ha], 0 to 9", "fact f{n} ha, 0 to 9"),
        ("fact f{n} [ha], 0 to 9", "fact f{n} [ha], 0 too 9"),
        ("fact f{n} [ha], 0 to 9", "fact f{n} [ha], 0 to 9, claus 3"),
        ('judgement f{n}, "where", by verifier', 'judgement f{n}, "where, by verifier'),
    ]
    bodies = [
        ("        when f > 2", "        if f > 2"),
        ("        when f > 2", "        when f => 2"),
        ("        when f > 2", "        when (f > 2"),
        ("        otherwise", "        else"),
        ("            = f * 2", "            = f ** 2"),
        ("            = f * 2", "            = f 2"),
        ("            = f * 2", "            = max(f, 2"),
        ("            = f * 2", "\t            = f * 2"),
        ("        otherwise", "       otherwise"),
    ]
    blocks = []
    expected = []
    line = 5
    number = 0
    while line < 2000:
        number += 1
        body = "    cases\n        when f > 2\n            = f * 2\n        otherwise\n            = f * 3"
        good, slip = slips[number % len(slips)]
        blocks.append(good.format(n=number))
        if number % 11 == 3 and len(expected) < 30:
            blocks[-1] = slip.format(n=number)
            expected.append(line)
        line += 1
        if number % 11 == 7 and len(expected) < 30:
            before, after = bodies[number % len(bodies)]
            assert before in body
            at = body.index(before)
            expected.append(line + 1 + body[:at].count("\n"))
            body = body.replace(before, after, 1)
        blocks.append(f"quantity g{number}, clause {number}\n{body}\n")
        line += 7
    text = 'rulebook "X", draft "1"\nresult g1\nfact f, 0 to 9\n\n' + "\n".join(blocks)
    problems = read(text, "x", reader=reader).problems
    assert len(expected) == 30 and text.count("\n") >= 2000
    assert [problem.span.line for problem in problems] == expected, [(p.span.line, p.says) for p in problems]


def test_files_that_cannot_be_read(tmp_path: Path, reader: Reader) -> None:
    def told(path: Path) -> str:
        reading = read_file(path, reader=reader)
        assert reading.model is None and len(reading.problems) == 1
        assert reading.problems[0].kind == "file"
        return reading.problems[0].says

    assert "no such file" in told(tmp_path / "none.rulebook")
    assert "a folder" in told(tmp_path)
    (tmp_path / "latin").write_bytes('rulebook "X"\nfact é'.encode("latin-1"))
    assert "UTF-8" in told(tmp_path / "latin")
    assert read_file(tmp_path / "latin", reader=reader).problems[0].span.line == 2
    assert read_file(tmp_path / "latin", reader=reader).problems[0].span.column == 6
    (tmp_path / "empty").write_bytes(b"")
    assert "holds no rulebook" in told(tmp_path / "empty")
    (tmp_path / "comments").write_text("# nothing\n\n# here\n")
    assert "holds no rulebook" in told(tmp_path / "comments")
    (tmp_path / "nul").write_bytes(b"\0" * 100)
    assert read_file(tmp_path / "nul", reader=reader).problems
    assert "no file name" in told(Path("a\0b")) or "cannot be read" in told(Path("a\0b"))


def test_line_ends_and_a_byte_order_mark_do_not_matter(tmp_path: Path, reader: Reader) -> None:
    text = HEAD + "quantity q [t]\n    = a\n"
    plain = read(text, "x", reader=reader)
    (tmp_path / "x").write_bytes(b"\xef\xbb\xbf" + text.replace("\n", "\r\n").encode())
    other = read_file(tmp_path / "x", reader=reader)
    assert other.problems == () and other.text == plain.text
