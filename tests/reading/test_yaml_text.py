"""Settings and case files: a tree of texts with positions, and every refusal."""

from __future__ import annotations

from pathlib import Path

import pytest

from samesum.reading.yaml_text import Fields, Listing, Scalar, parse_yaml, read_yaml


def test_scalars_stay_text_with_their_place() -> None:
    node, problems = parse_yaml("clause: 4.10\naccess: no\ntime: 12:30\nlist:\n  - 'no'\n  -\n", "a.yaml")
    assert not problems
    assert isinstance(node, Fields)
    assert [entry.key.text for entry in node] == ["clause", "access", "time", "list"]
    clause = node.get("clause")
    assert isinstance(clause, Scalar)
    assert (clause.text, clause.span.line, clause.span.column, clause.span.end_column) == ("4.10", 1, 9, 13)
    items = node.get("list")
    assert isinstance(items, Listing)
    assert [(item.text, item.quoted) for item in items.items if isinstance(item, Scalar)] == [("no", True), ("", False)]
    assert node.get("nothing") is None


def test_columns_count_characters_not_bytes() -> None:
    node, _ = parse_yaml("größe: 5 % # ä\nb: {ü: x}\n", "a.yaml")
    assert isinstance(node, Fields)
    size = node.get("größe")
    assert size is not None and size.span.column == 8


@pytest.mark.parametrize(
    ("text", "line", "column", "words"),
    [
        ("a: 1\nb: 2\na: 3\n", 3, 1, "a second time (first on line 1)"),
        ("a: &x 1\n", 1, 4, "an anchor"),
        ("a: *x\n", 1, 4, "an alias"),
        ("a: !!python/object:os.system 1\n", 1, 4, "a tag"),
        ("a: 1\n---\nb: 2\n", 2, 1, "a second document"),
        ("[a, b]: 1\n", 1, 1, "a name is expected"),
        ("a:\n\t- 1\n", 2, 1, "cannot begin a value"),
        ("a: b: c\n", 1, 5, "a second `:`"),
        ("a: 'b\n", 2, 1, "never closed"),
        ("a: 1\n b: 2\n", 2, 3, "`:`"),
        ("a: [1, 2\n", 2, 1, "not closed"),
        ("a: \x07\n", 1, 4, "control character"),
    ],
)
def test_every_refusal_says_where(text: str, line: int, column: int, words: str) -> None:
    _, problems = parse_yaml(text, "a.yaml")
    assert [(problem.span.line, problem.span.column) for problem in problems][:1] == [(line, column)]
    assert words in problems[0].says
    assert problems[0].remedy


def test_all_repeated_keys_are_reported_in_one_run() -> None:
    _, problems = parse_yaml("a: 1\na: 2\nb:\n  c: 1\n  c: 2\n", "a.yaml")
    assert [problem.span.line for problem in problems] == [2, 5]


def test_nesting_is_bounded() -> None:
    fine, problems = parse_yaml("[" * 50 + "]" * 50, "a.yaml")
    assert fine is not None and not problems
    _, problems = parse_yaml("[" * 60 + "]" * 60, "a.yaml")
    assert [problem.span.column for problem in problems] == [51]
    _, problems = parse_yaml("[" * 100_000, "a.yaml")
    assert len(problems) == 1 and "nested deeper" in problems[0].says


def test_files_that_cannot_be_read(tmp_path: Path) -> None:
    assert "no such file" in read_yaml(tmp_path / "missing.yaml")[1][0].says
    assert "cannot be read" in read_yaml(tmp_path)[1][0].says
    latin = tmp_path / "latin.yaml"
    latin.write_bytes(b"a: 1\nb: gr\xf6\xdfe\n")
    problem = read_yaml(latin, "latin.yaml")[1][0]
    assert "UTF-8" in problem.says and problem.span.line == 2
    marked = tmp_path / "marked.yaml"
    marked.write_bytes(b"\xef\xbb\xbfa: 1\n")
    node, problems = read_yaml(marked)
    assert not problems and isinstance(node, Fields) and node.get("a") is not None


def test_an_empty_text_has_no_tree() -> None:
    assert parse_yaml("", "a.yaml") == (None, ())
    assert parse_yaml("# nothing\n", "a.yaml") == (None, ())
