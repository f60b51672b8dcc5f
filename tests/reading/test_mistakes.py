"""Expectations stand on the offending line of a fixture; missing and unexpected problems both fail."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from samesum.reading.read import Reader, read

MISTAKES = Path(__file__).parent / "mistakes"
EXPECT = re.compile(r"# expect: (.*?)(?= # expect: |$)")


@pytest.mark.parametrize("path", sorted(MISTAKES.glob("*.rulebook")), ids=lambda path: path.stem)
def test_every_mistake_is_told_on_its_line_and_none_besides(path: Path, reader: Reader) -> None:
    text = path.read_text(encoding="utf-8")
    expected = {
        (number, words.strip()) for number, line in enumerate(text.split("\n"), 1) for words in EXPECT.findall(line)
    }
    problems = read(text, path.name, reader=reader).problems
    told = [(problem.span.line, f"{problem.says} | {problem.remedy}") for problem in problems]
    missing = {(line, words) for line, words in expected if not any(at == line and words in says for at, says in told)}
    unexpected = [
        (line, says) for line, says in told if not any(at == line and words in says for at, words in expected)
    ]
    assert not missing and not unexpected
    assert len(told) == len(expected), told


def test_a_problem_marks_the_words_it_is_about(reader: Reader) -> None:
    text = 'rulebook "X", draft "1"\nresult q [t]\n\nquantity q [t]\n    = 3 [t] + 4 [kg] + lenght\n'
    (problem,) = read(text, "x", reader=reader).problems
    assert text.split("\n")[problem.span.line - 1][problem.span.column - 1 : problem.span.end_column - 1] == "lenght"


def test_a_slip_in_a_first_word_leaves_its_name_declared(reader: Reader) -> None:
    text = 'ruleboook "X", draft "1"\nresultq [t]\nfcat a [t], 0 to 3\nconstantb = 2\n\nquantity q [t]\n    = a * b\n'
    problems = read(text, "x", reader=reader).problems
    assert [(problem.span.line, problem.remedy) for problem in problems] == [
        (1, "did you mean `rulebook`?"),
        (2, "write a space after `result`"),
        (3, "did you mean `fact`?"),
        (4, "write a space after `constant`"),
    ]


def test_a_name_that_is_wrong_at_several_places_is_told_once(reader: Reader) -> None:
    text = (
        'rulebook "X", draft "1"\nresult q [t]\nfact s, one of mineral or peaty\n\nquantity q [t]\n    cases\n'
        "        when s is peatty\n            = 1 [t]\n        when s is one of peatty or mineral\n            = x\n"
        "        otherwise\n            = x + x\n"
    )
    problems = read(text, "x", reader=reader).problems
    assert [problem.says for problem in problems] == [
        "`peatty` is no value of `s` (also on line 9)",
        "`x` is not declared (also on line 12)",
    ]
