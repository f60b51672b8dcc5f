"""The register and the gaps of count as people read them: whole words, and nothing said once for each element."""

from __future__ import annotations

import json
import re
from pathlib import Path

import pytest

from samesum.cli.main import main
from samesum.outputs.counts import _elements

RULEBOOK = """\
rulebook "Stoves", draft "1"
result total [t]
index village, at most 5
fact fuel per village, one of wood or coal
fact people per village, 0 to 90
setting hard_to_reach_allowance, 1 to 2, by developer
quantity burnt [t] per village, clause 3.1
    cases
        when fuel is wood and people < 50
            = 1 [t]
        when fuel is wood and people < 20
            = 2 [t]
quantity kitchen_performance [t], clause 3.2
    choice by developer, fixed at validation
        option kitchen_test, error 8 %, reference
            = 3 [t]
        option default_value, error 30 %
            = 4 [t]
quantity total [t]
    = sum(burnt over village) * hard_to_reach_allowance + kitchen_performance
"""


@pytest.fixture
def rulebook(tmp_path: Path) -> str:
    file = tmp_path / "stoves.rulebook"
    file.write_text(RULEBOOK, encoding="utf-8")
    return str(file)


@pytest.mark.parametrize("columns", [44, 60, 80])
def test_no_cell_of_the_register_is_cut_inside_a_word(
    columns: int, rulebook: str, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setenv("COLUMNS", str(columns))
    assert main(["register", rulebook, "--projects", "0"]) == 0
    out = capsys.readouterr().out
    assert max(len(line) for line in out.splitlines()) <= columns
    table = out[out.index("Branch") : out.index(" leave something")]
    known = set(re.findall(r"[a-z]+", RULEBOOK)) | {"at", "validation", "choice", "overlap", "setting", "open", "of"}
    known |= {"point", "ranch", "ind", "ho", "decides", "ithout", "it", "ecision", "places", "lause", "cases", "nobody"}
    assert [word for word in re.findall(r"[a-z]+", table) if word not in known] == []


def test_markdown_shows_names_as_code_and_no_timing_of_settings(
    rulebook: str, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["register", rulebook, "--projects", "0", "--as", "markdown"]) == 0
    rows = [line.split(" | ") for line in capsys.readouterr().out.splitlines() if line.startswith("| ")]
    titles = rows[0]
    by_id = {row[0].strip("| `"): row for row in rows[1:]}
    closure, fixed = titles.index("Suggested closure"), titles.index("Fixed")
    assert "Mandate `kitchen_test`" in by_id["kitchen_performance"][closure]
    assert by_id["kitchen_performance"][fixed] == "at validation"
    assert by_id["hard_to_reach_allowance"][fixed] == "–"


def test_what_is_so_in_every_element_is_said_once(rulebook: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["count", rulebook]) in (0, 1)
    out = " ".join(capsys.readouterr().out.split())
    assert out.count("burnt@1: no branch is open") == out.count("burnt@1: branches 1 and 2") == 1
    assert out.count("(and the same at @2 to @5)") == 2
    assert "burnt@2:" not in out
    assert main(["count", rulebook, "--json"]) in (0, 1)
    answer = json.loads(capsys.readouterr().out)
    every = [f"burnt@{element}" for element in range(1, 6)]
    assert [each["branch_point"] for each in answer["gaps"]] == every
    assert [each["branch_point"] for each in answer["overlaps"]] == every


@pytest.mark.parametrize(
    ("elements", "said"),
    [([2], "@2"), ([2, 3], "@2 and @3"), ([2, 3, 4], "@2 to @4"), ([2, 4, 5, 6, 9], "@2, @4 to @6 and @9")],
)
def test_runs_of_elements(elements: list[int], said: str) -> None:
    assert _elements(elements) == said
