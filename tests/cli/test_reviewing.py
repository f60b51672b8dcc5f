"""register, compare, check with decisions, and several files at once: as a user calls them."""

from __future__ import annotations

import csv
import json
import os
import re
import shutil
import subprocess
from pathlib import Path

import pytest

from samesum.cli.main import main

SAMPLES = Path(__file__).parents[2] / "sample_rulebooks"
MARSH = (SAMPLES / "marsh_example.rulebook").read_text(encoding="utf-8")


@pytest.fixture(autouse=True)
def folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path / "cache"))
    monkeypatch.chdir(tmp_path)
    (tmp_path / "tide.rulebook").write_text(MARSH, encoding="utf-8")
    return tmp_path


def said(capsys: pytest.CaptureFixture[str], *words: str) -> tuple[int, str, str]:
    capsys.readouterr()
    status = main(words)
    out, err = capsys.readouterr()
    return status, out, err


def decide(capsys: pytest.CaptureFixture[str], place: str, decision: str = "accepted") -> tuple[int, str, str]:
    words = ("register", "tide.rulebook", "--decide", place, decision, "--reason", "small", "--by", "A. Okafor")
    return said(capsys, *words, "--on", "2026-05-02")


def git(*words: str) -> None:
    names = {"GIT_AUTHOR_NAME": "A", "GIT_AUTHOR_EMAIL": "a@a.example", "GIT_COMMITTER_NAME": "A"}
    environment = {**os.environ, **names, "GIT_COMMITTER_EMAIL": "a@a.example", "GIT_CONFIG_GLOBAL": os.devnull}
    subprocess.run(["git", *words], check=True, capture_output=True, env=environment)


# --- register ------------------------------------------------------------------------------


def test_when_it_is_fixed_is_said_only_of_choices(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """A setting cannot say it, so that "not stated" would blame its author for nothing."""
    silent = MARSH.replace("choice by developer, open each period", "choice by developer")
    (folder / "tide.rulebook").write_text(silent, encoding="utf-8")
    out = said(capsys, "register", "tide.rulebook", "--projects", "0", "--as", "csv")[1]
    fixed = {row["Branch point"]: row["Fixed"] for row in csv.DictReader(out.splitlines())}
    assert fixed == {"discount": "", "soil_carbon": "not stated", "methane": "", "methane/2": ""}


def test_every_form_tells_of_the_same_rows(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    quick = ("register", "tide.rulebook", "--projects", "0")
    status, out, _ = said(capsys, *quick, "--as", "json")
    assert status == 0
    answer = json.loads(out)
    ids = [row["id"] for row in answer["rows"]]
    assert ids == ["discount", "soil_carbon", "methane", "methane/2"]
    rows = list(csv.reader(said(capsys, *quick, "--as", "csv")[1].splitlines()))
    assert [row[0] for row in rows[1:]] == ids
    markdown = said(capsys, *quick, "--as", "markdown")[1]
    assert [line.split("`")[1] for line in markdown.splitlines() if line.startswith("| `")] == ids
    table = said(capsys, *quick, "--all")[1]
    assert all(id in table for id in ids)
    page = said(capsys, *quick, "--as", "html")[1]
    assert all(f"<span>{id}</span>" in page.replace("<wbr>", "") for id in ids)
    assert said(capsys, *quick, "-o", "out.xlsx")[0] == 0
    assert (folder / "out.xlsx").read_bytes()[:2] == b"PK"


def test_two_forms_at_once_are_refused(capsys: pytest.CaptureFixture[str]) -> None:
    for words in (("check", "tide.rulebook", "--as", "sarif"), ("register", "tide.rulebook", "--as", "csv")):
        status, out, err = said(capsys, *words, "--json")
        assert (status, out) == (2, "")
        assert err == f"samesum: --as {words[-1]} and --json ask for two forms at once; leave one of them out\n"
    assert json.loads(said(capsys, "check", "tide.rulebook", "--as", "json", "--json")[1])["findings"]


def test_an_ending_without_a_form_is_refused(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    status, out, err = said(capsys, "register", "tide.rulebook", "-o", "foo.pdf")
    assert (status, out) == (2, "") and err == (
        "samesum: foo.pdf: no form of the register ends in .pdf; known are .csv, .xlsx, .md, .json, .html, .htm and "
        ".txt, or say --as FORM\n"
    )
    assert said(capsys, "report", "tide.rulebook", "-o", "foo.pdf") == (
        2, "", "samesum: foo.pdf: the report is a page; write -o foo.html\n"
    )  # fmt: skip
    assert not (folder / "foo.pdf").exists()
    assert said(capsys, "register", "tide.rulebook", "-o", "foo.TXT", "--projects", "0")[0] == 0
    assert "soil_carbon" in (folder / "foo.TXT").read_text(encoding="utf-8")


def test_a_row_says_all_that_is_known(capsys: pytest.CaptureFixture[str]) -> None:
    answer = json.loads(said(capsys, "register", "tide.rulebook", "--json", "--projects", "2000")[1])
    row = next(each for each in answer["rows"] if each["id"] == "soil_carbon")
    assert row["clause"] == "7.1" and row["kind"] == "choice" and row["who_decides"] == "developer"
    assert row["wording"] == "The stock may be taken from the regional table or measured in plots."
    assert (row["fixed"], row["elements"]) == ("each period", 1)
    assert [(each["name"], each["error"], each["reference"]) for each in row["options"]] == [
        ("regional", 0.35, False),
        ("plots", 0.08, True),
    ]
    assert row["options"][1]["cost"] == "40 [USD/ha] * sum(area over stratum)"
    assert (row["routes_with"], row["routes_without"]) == (2, 1)
    assert row["over_issuance"] > 0.05 and row["swing"] is None
    assert "Mandate `plots`" in row["suggested_closure"]
    assert row["decision"] == {"decision": "open"}
    methane = next(each for each in answer["rows"] if each["id"] == "methane")
    assert methane["kind"] == "cases" and methane["decision"] is None
    assert methane["gaps"][0]["witness"] == {"soil": "mineral", "salinity": 10}


def test_trial_evidence_comes_with_inputs(capsys: pytest.CaptureFixture[str]) -> None:
    shutil.copy(SAMPLES / "woodland.rulebook", "w.rulebook")
    words = ("register", "w.rulebook", "--inputs", str(SAMPLES / "woodland.cases.yaml"), "--json", "--projects", "0")
    status, out, _ = said(capsys, *words)
    assert status == 0
    rows = {row["id"]: row for row in json.loads(out)["rows"]}
    assert rows["density"]["swing"] > 0 and rows["density"]["left_if_closed"] > 0
    assert rows["density"]["over_issuance"] is None


@pytest.mark.parametrize("given", [True, False])
def test_the_figures_say_what_they_were_simulated_on(
    given: bool, folder: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    shutil.copy(SAMPLES / "waste_heat.rulebook", "w.rulebook")
    inputs = ("--inputs", str(SAMPLES / "waste_heat.cases.yaml")) if given else ()
    words = ("register", "w.rulebook", *inputs, "--projects", "500", "--as")
    says = "the 3 given cases and no others" if given else "500 projects drawn from the declared domains"
    for form in ("table", "markdown", "html"):
        out = said(capsys, *words, form)[1]
        assert f"Over-issuance is simulated on {says}" in " ".join(out.split()), form
    assert says in " ".join(said(capsys, "report", *words[1:-1])[1].split())
    rows = list(csv.DictReader(said(capsys, *words, "csv")[1].splitlines()))
    told = {row["Simulated on"] for row in rows if row["Over-issuance"]}
    assert told == {"the 3 given cases" if given else "declared domains"}
    simulated = json.loads(said(capsys, *words, "json")[1])["simulated"]
    origin = {"from": "cases", "cases": 3} if given else {"from": "domains"}
    assert simulated == {"projects": 500, **origin, "seed": 0}


def test_nothing_is_said_of_a_simulation_that_was_not(capsys: pytest.CaptureFixture[str]) -> None:
    assert "imulated" not in said(capsys, "register", "tide.rulebook", "--projects", "0")[1]
    assert json.loads(said(capsys, "register", "tide.rulebook", "--projects", "0", "--json")[1])["simulated"] is None


def test_the_same_register_gives_the_same_bytes(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    for form in ("csv", "xlsx", "markdown", "json", "html"):
        for name in ("one", "two"):
            assert said(capsys, "register", "tide.rulebook", "--projects", "500", "--as", form, "-o", name)[0] == 0
        assert (folder / "one").read_bytes() == (folder / "two").read_bytes(), form


# --- decisions -----------------------------------------------------------------------------


def test_a_decision_is_written_and_shown(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    status, out, _ = decide(capsys, "soil_carbon")
    assert (status, out) == (0, "tide.review.yaml: soil_carbon is now `accepted`\n")
    written = (folder / "tide.review.yaml").read_text(encoding="utf-8")
    assert (
        "  soil_carbon:\n    decision: accepted\n    reason: small\n    by: A. Okafor\n    when: 2026-05-02\n"
        in written
    )
    rows = json.loads(said(capsys, "register", "tide.rulebook", "--json", "--projects", "0")[1])["rows"]
    found = next(row for row in rows if row["id"] == "soil_carbon")["decision"]
    expected = {"decision": "accepted", "reason": "small", "by": "A. Okafor", "when": "2026-05-02", "stale": False}
    assert found == expected
    assert decide(capsys, "soil_carbon", "to-be-closed")[0] == 0
    assert "decision: to be closed" in (folder / "tide.review.yaml").read_text(encoding="utf-8")


@pytest.mark.parametrize(
    ("words", "says"),
    [
        (("--decide", "soil_carbn", "accepted", "--reason", "x", "--by", "y"), "did you mean `soil_carbon`?"),
        (("--decide", "soil_carbon", "acepted", "--reason", "x", "--by", "y"), "did you mean `accepted`?"),
        (("--decide", "soil_carbon", "accepted", "--by", "y"), "--reason WHY and --by NAME"),
        (("--decide", "soil_carbon", "accepted", "--reason", "x", "--by", "y", "--on", "May"), "`May` is no date"),
        (("--reason", "x"), "go with --decide"),
    ],
)
def test_a_decision_that_cannot_be_written_says_why(
    words: tuple[str, ...], says: str, folder: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    status, _, err = said(capsys, "register", "tide.rulebook", *words)
    assert status == 2 and says in err
    assert not (folder / "tide.review.yaml").exists()


def test_what_leaves_nothing_to_anybody_is_decided_only_where_it_has_a_finding(
    folder: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    text = MARSH + "\nquantity spare [ha], clause 5.1\n    = sum(area over stratum)\n"
    (folder / "tide.rulebook").write_text(text, encoding="utf-8")
    status, _, err = decide(capsys, "regional_stock")
    assert status == 2 and "`regional_stock` leaves nothing to anybody and has no finding" in err
    assert not (folder / "tide.review.yaml").exists()
    status, out, _ = decide(capsys, "spare")  # which leads nowhere: that is a finding
    assert status == 0 and "its findings in `samesum check` say so, the register has no row for it" in out
    found = json.loads(said(capsys, "check", "tide.rulebook", "--json")[1])["findings"]
    assert [each["accepted"]["by"] for each in found if each["branch_point"] == "spare"] == ["A. Okafor"]
    (folder / "tide.rulebook").write_text(text.replace("methane) *", "methane + 0 [t CO2e/ha] * spare) *"))
    assert decide(capsys, "spare", "open")[0] == 0  # what was decided before may be decided otherwise


def test_accepted_findings_stop_failing_and_stay_visible(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    before = json.loads(said(capsys, "check", "tide.rulebook", "--json")[1])["findings"]
    for place in {finding["branch_point"] for finding in before} - {"methane"}:
        assert decide(capsys, place)[0] == 0
    status, out, _ = said(capsys, "check", "tide.rulebook", "--json")
    after = json.loads(out)["findings"]
    assert status == 1
    assert [finding["id"] for finding in after] == [finding["id"] for finding in before]
    assert {finding["branch_point"] for finding in after if "accepted" not in finding} == {"methane"}
    assert said(capsys, "check", "tide.rulebook", "--fail-on", "error")[0] == 1
    assert decide(capsys, "methane")[0] == 0
    status, out, _ = said(capsys, "check", "tide.rulebook", "--fail-on", "note")
    assert status == 0
    assert "accepted by the review" in out and "by A. Okafor on 2026-05-02: small" in " ".join(out.split())
    assert decide(capsys, "methane", "open")[0] == 0
    assert said(capsys, "check", "tide.rulebook")[0] == 1


def test_a_stale_decision_is_told_and_no_longer_in_force(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    for place in ("soil_carbon", "access", "methane"):
        decide(capsys, place)
    text = MARSH.replace("error 35 %", "error 45 %").replace(
        'judgement access, "where field plots are practicable", by developer, clause 7.1\n', ""
    )
    (folder / "tide.rulebook").write_text(text, encoding="utf-8")
    answer = json.loads(said(capsys, "check", "tide.rulebook", "--json")[1])
    assert {(each["branch_point"], each["why"]) for each in answer["stale_decisions"]} == {
        ("soil_carbon", "changed"),
        ("access", "gone"),
    }
    accepted = {each["branch_point"] for each in answer["findings"] if "accepted" in each}
    assert accepted == {"methane"}
    table = said(capsys, "register", "tide.rulebook", "--projects", "0")[1]
    assert "Stale: soil_carbon" in table and "Stale: access" in table
    assert "access" in (folder / "tide.review.yaml").read_text(encoding="utf-8")


def test_a_broken_record_stops_the_check(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (folder / "tide.review.yaml").write_text("decisions:\n  soil_carbon:\n    decision: acepted\n", encoding="utf-8")
    status, _, err = said(capsys, "check", "tide.rulebook")
    assert status == 2 and err.startswith("tide.review.yaml:3:15: `acepted` is no decision; did you mean `accepted`?")


# --- compare -------------------------------------------------------------------------------


def test_comparing_with_a_revision(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    git("init", "-q")
    assert said(capsys, "compare", "--since", "HEAD", "tide.rulebook")[0] == 0  # nothing committed yet: all is new
    git("add", "tide.rulebook")
    git("commit", "-qm", "first")
    option = r"\1\n\2    option expert\n\2        = 1 [t CO2e]\n"
    more, tied = re.subn(r"(( +)choice follows soil_carbon)\n", option, MARSH)
    option = r"\1\n\2    option expert\n\2        = 9 [t C]\n"
    more, chosen = re.subn(r"(( +)choice by developer, open each period)\n", option, more)
    assert tied == chosen == 1
    (folder / "tide.rulebook").write_text(more, encoding="utf-8")
    status, out, _ = said(capsys, "compare", "HEAD:tide.rulebook", "tide.rulebook", "--json")
    answer = json.loads(out)
    assert status == 1 and answer["grew"]
    assert [each["branch_point"] for each in answer["changed"]] == ["soil_carbon", "methane/2"]
    assert answer["paths"]["per_project_most"] == {"before": 2, "after": 3}
    assert said(capsys, "compare", "--since", "HEAD", "tide.rulebook")[0] == 1
    assert said(capsys, "compare", "--since", "HEAD", "tide.rulebook", "--allow", "soil_carbon")[0] == 0
    status, _, err = said(capsys, "compare", "HEAD:tide.rulebook", "tide.rulebook", "--allow", "soil_carbn")
    assert status == 2 and "did you mean `soil_carbon`?" in err
    (folder / "new.rulebook").write_text(MARSH, encoding="utf-8")
    status, _, err = said(capsys, "compare", "--since", "HEAD", "new.rulebook")
    assert status == 0 and "new since HEAD" in err


@pytest.mark.parametrize(
    ("words", "says"),
    [
        (("tide.rulebook",), "two files, OLD and NEW"),
        (("absent.rulebook", "tide.rulebook"), "there is no such file"),
        (("HEAD:tide.rulebook", "tide.rulebook"), "is in no git repository"),
        (("--upload-pack=x:tide.rulebook", "tide.rulebook"), ""),
    ],
)
def test_what_cannot_be_compared_says_why(
    words: tuple[str, ...], says: str, capsys: pytest.CaptureFixture[str]
) -> None:
    status, _, err = said(capsys, "compare", *words)
    assert status == 2 and says in err


def test_cases_that_one_draft_cannot_read_say_which(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (folder / "new.rulebook").write_text(MARSH.replace("plot_mean", "plot_stock"), encoding="utf-8")
    case = "area: [120]\n    soil: peaty\n    salinity: 12\n    plot_mean: [105]\n"
    (folder / "cases.yaml").write_text(f"cases:\n  - name: Heron Flats\n    {case}", encoding="utf-8")
    words = ("compare", "tide.rulebook", "new.rulebook", "--projects", "0", "--inputs", "cases.yaml")
    status, out, err = said(capsys, *words)
    first, *problems = err.splitlines()
    assert (status, out) == (2, "") and any("plot_stock is missing" in each for each in problems)
    assert first == "cases.yaml, as read for new.rulebook; --inputs may be given twice, once for OLD and once for NEW:"
    first = said(capsys, *words, "--inputs", "cases.yaml")[2].splitlines()[0]
    assert first == "cases.yaml, as read for new.rulebook:"


def test_an_unknown_revision_says_so(capsys: pytest.CaptureFixture[str]) -> None:
    git("init", "-q")
    git("add", "tide.rulebook")
    git("commit", "-qm", "first")
    assert "git knows no revision `v9`" in said(capsys, "compare", "v9:tide.rulebook", "tide.rulebook")[2]
    assert "absent.rulebook is not in HEAD" in said(capsys, "compare", "HEAD:absent.rulebook", "tide.rulebook")[2]


def test_spread_and_over_issuance_are_compared_on_projects(capsys: pytest.CaptureFixture[str]) -> None:
    names = [str(SAMPLES / f"woodland{tail}") for tail in (".rulebook", "_repaired.rulebook")]
    inputs = [str(SAMPLES / f"woodland{tail}") for tail in (".cases.yaml", "_repaired.cases.yaml")]
    words = ("--inputs", inputs[0], "--inputs", inputs[1], "--projects", "2000", "--json")
    status, out, _ = said(capsys, "compare", *names, *words)
    measured = json.loads(out)["measured"]
    assert status == 0
    assert measured["spread"]["before"] > 0.5 and measured["spread"]["after"] == 0
    assert measured["over_issuance"]["before"] > 0.1 and abs(measured["over_issuance"]["after"]) < 1e-9
    words = ("--inputs", inputs[1], "--inputs", inputs[0], "--projects", "2000", "--json", "--allow", "spread")
    status, out, _ = said(capsys, "compare", *reversed(names), *words)
    grown = {each["name"]: each["allowed"] for each in json.loads(out)["growth"]}
    assert status == 1 and grown["spread"] is True and grown["over_issuance"] is False


# --- several files at once -----------------------------------------------------------------


def test_jobs_change_no_answer(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    for name in ("a", "b", "c"):
        (folder / f"{name}.rulebook").write_text(MARSH, encoding="utf-8")
    (folder / "broken.rulebook").write_text("rulebok\n", encoding="utf-8")
    words = ("check", "a.rulebook", "broken.rulebook", "b.rulebook", "c.rulebook", "--json")
    one = said(capsys, *words)
    two = said(capsys, *words, "--jobs", "2")
    assert one == two
    assert one[0] == 2 and one[2].startswith("broken.rulebook:1:1: ")
    assert [each["file"] for each in json.loads(one[1])["files"]] == ["a.rulebook", "b.rulebook", "c.rulebook"]


def test_no_number_of_jobs(capsys: pytest.CaptureFixture[str]) -> None:
    assert said(capsys, "check", "tide.rulebook", "--jobs", "none")[0] == 2


def test_a_very_large_rulebook_is_simulated_only_when_asked(folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    text = (
        'rulebook "Large", draft "1"\nresult total [t], rounded down to 1, clause 1\nindex plot, at most 400\n'
        "quantity q [t] per plot, clause 3\n    choice by developer\n        option low\n            = 1 [t]\n"
        "        option high\n            = 2 [t]\nquantity total [t], clause 4\n    = sum(q over plot)\n"
    )
    (folder / "large.rulebook").write_text(text, encoding="utf-8")
    capsys.readouterr()
    assert main(["register", "large.rulebook", "--json"]) == 0
    out, err = capsys.readouterr()
    assert "over-issuance is left out, because there are 400 branch points" in err
    (row,) = json.loads(out)["rows"]
    assert (row["elements"], row["routes_with"], row["routes_without"]) == (400, 2**400, 1)
    assert row["over_issuance"] is None
