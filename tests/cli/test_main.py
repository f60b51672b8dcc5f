"""The command line: exit statuses, what goes where, and an end without a traceback whatever happens."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

from samesum.cli.main import COMMANDS, main

SAMPLES = Path(__file__).parents[2] / "sample_rulebooks"
MARSH = str(SAMPLES / "marsh_example.rulebook")
REPAIRED = str(SAMPLES / "waste_heat_repaired.rulebook")


@pytest.fixture(autouse=True)
def own_cache(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path / "cache"))


def said(capsys: pytest.CaptureFixture[str], *words: str) -> tuple[int, str, str]:
    status = main(words)
    out, err = capsys.readouterr()
    return status, out, err


def test_help_and_version(capsys: pytest.CaptureFixture[str]) -> None:
    status, out, _ = said(capsys, "--help")
    assert status == 0
    assert all(name in out for name in COMMANDS)
    assert "does not replace" in out
    assert said(capsys)[0] == 0
    assert said(capsys, "--version")[1].startswith("samesum ")


@pytest.mark.parametrize("name", sorted(COMMANDS))
def test_every_command_explains_itself(name: str, capsys: pytest.CaptureFixture[str]) -> None:
    status, out, _ = said(capsys, name, "--help")
    assert status == 0 and f"samesum {name}" in out


def test_a_slip_in_the_command_gets_the_nearest(capsys: pytest.CaptureFixture[str]) -> None:
    status, _, err = said(capsys, "chek", MARSH)
    assert (status, err) == (2, "samesum: there is no command `chek`; did you mean `check`?\n")


@pytest.mark.parametrize(
    "words",
    [
        ("check",),
        ("check", MARSH, "--no-such-option"),
        ("check", MARSH, "--fail-on", "never"),
        ("count", MARSH, "--seconds", "0"),
        ("count", MARSH, "--seconds", "soon"),
        ("count", MARSH, "--list", "-1"),
        ("count", MARSH, "--list", "9" * 30),
        ("count", MARSH, "--case", "Heron Flats"),
        ("count", MARSH, "--list", "1", "--case", "Heron Flats"),
        ("count", "nowhere.rulebook"),
        ("count", str(SAMPLES)),
        ("check", MARSH, "--rules", "nowhere"),
        ("--nonsense",),
    ],
)
def test_a_call_that_cannot_be_used_is_2(words: tuple[str, ...], capsys: pytest.CaptureFixture[str]) -> None:
    status, out, err = said(capsys, *words)
    assert status == 2
    assert err and "Traceback" not in err + out


def test_problems_go_to_standard_error_with_their_place(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = tmp_path / "bad.rulebook"
    path.write_text('rulebook "Bad", draft "1"\nresult credits [t CO2e]\nquantity credits [t CO2e]\n    = aera\n')
    status, out, err = said(capsys, "check", str(path))
    assert (status, out) == (2, "")
    assert err.startswith(f"{path}:4:7: `aera` is not declared")


def test_one_bad_file_hides_nothing_in_the_others(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    status, out, err = said(capsys, "check", str(tmp_path / "nowhere.rulebook"), MARSH, "--json")
    assert status == 2 and "no such file" in err
    assert len(json.loads(out)["findings"]) > 3


# --- check --------------------------------------------------------------------------------------


@pytest.mark.parametrize(("limit", "status"), [("error", 1), ("warning", 1), ("note", 1)])
def test_check_fails_at_or_above(limit: str, status: int, capsys: pytest.CaptureFixture[str]) -> None:
    assert said(capsys, "check", MARSH, "--fail-on", limit)[0] == status
    assert said(capsys, "check", REPAIRED, "--fail-on", limit)[0] == 0


def test_check_json_has_the_keys_of_the_answer(capsys: pytest.CaptureFixture[str]) -> None:
    _, out, err = said(capsys, "check", MARSH, "--json")
    answer = json.loads(out)
    assert err == ""
    keys = {"rule", "severity", "file", "line", "column", "end_line", "end_column", "clause", "branch_point", "says"}
    assert all(keys | {"remedy", "id"} <= set(finding) for finding in answer["findings"])
    assert answer["paths"]["per_project_most"] == 2
    assert answer["rule_sets"][0]["version"] == "samesum 1" and len(answer["rule_sets"][0]["hash"]) == 12
    places = [(finding["line"], finding["column"]) for finding in answer["findings"]]
    assert places == sorted(places)


def test_check_of_several_files_has_the_paths_of_each(capsys: pytest.CaptureFixture[str]) -> None:
    _, out, _ = said(capsys, "check", MARSH, REPAIRED, MARSH, "--json")
    answer = json.loads(out)
    assert list(answer["paths"]) == [MARSH, REPAIRED]
    assert [each["verdict"] for each in answer["files"]] == ["gap", "single route"]


def test_a_rules_folder_and_severities_of_ones_own(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    rulebook = tmp_path / "marsh.rulebook"
    rulebook.write_text(Path(MARSH).read_text())
    rule = tmp_path / "ours" / "too-many-choices"
    rule.mkdir(parents=True)
    (rule / "rule.yaml").write_text(
        "name: too-many-choices\nseverity: error\nlooks_at: rulebook\nwhere: choices >= 1 and per_project_most > 1\n"
        "says: '{name} leaves {choices} choice open.'\nwhy: We allow none.\nremedy: Close it.\n"
        "wrong_when: Never.\nsince: 1\n"
    )
    found = json.loads(said(capsys, "check", str(rulebook), "--rules", str(tmp_path / "ours"), "--json")[1])
    assert "Salt marsh re-flooding leaves 1 choice open." in [each["says"] for each in found["findings"]]
    (tmp_path / "samesum.yaml").write_text(
        "rules: ours\nfail_on: error\n"
        "severities:\n  too-many-choices: note\n  missing-condition: off\n  free-value: note\n"
    )
    status, out, _ = said(capsys, "check", str(rulebook), "--json")
    severities = {each["rule"]: each["severity"] for each in json.loads(out)["findings"]}
    assert severities["too-many-choices"] == severities["free-value"] == "note"
    assert "missing-condition" not in severities
    assert status == 0  # what is left is below error
    assert said(capsys, "check", str(rulebook), "--fail-on", "note")[0] == 1


def test_mistakes_in_settings_are_said_once(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    for name in ("a", "b"):
        (tmp_path / f"{name}.rulebook").write_text(Path(MARSH).read_text())
    (tmp_path / "samesum.yaml").write_text("severities:\n  free-valu: note\n")
    status, out, err = said(capsys, "check", str(tmp_path / "a.rulebook"), str(tmp_path / "b.rulebook"))
    assert (status, out) == (2, "")
    assert err.count("there is no rule `free-valu`; did you mean `free-value`?") == 1
    assert "samesum.yaml:2:3:" in err


def test_check_for_people(capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch) -> None:
    for width in (80, 60, 40):
        monkeypatch.setenv("COLUMNS", str(width))
        _, out, _ = said(capsys, "check", MARSH)
        assert "\x1b" not in out
        long = [line for line in out.splitlines() if len(line) > width and MARSH not in line]
        assert long == []
        assert f"  {MARSH}:31:5\n" in out  # stands alone, so that an editor can jump there
    assert "does not" in out and "accredited" in out


def test_control_characters_of_a_rulebook_reach_no_terminal(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = tmp_path / "odd.rulebook"
    text = Path(MARSH).read_text().replace("Salt marsh", "Salt\x1b[31m marsh\u202e").replace("IPCC 2006", "latest \x07")
    path.write_text(text)
    status, out, err = said(capsys, "check", str(path))
    assert status in (1, 2)
    assert not {"\x1b", "\x07", "\u202e"} & set(out + err)


# --- count --------------------------------------------------------------------------------------


def test_count_of_the_worked_example(capsys: pytest.CaptureFixture[str]) -> None:
    status, out, _ = said(capsys, "count", MARSH, "--json")
    answer = json.loads(out)
    assert status == 0
    assert answer["paths"] == {
        "on_paper": 4,
        "reachable": 4,
        "per_project_most": 2,
        "per_project_least": 0,
        "developer_most": 2,
        "over_periods_most": 256,
        "exact": True,
    }
    assert answer["free_values"] == ["discount"]
    assert answer["overlaps"] == answer["dead_branches"] == []
    (gap,) = answer["gaps"]
    assert gap["branch_point"] == "methane"
    assert gap["witness"]["soil"] == "mineral" and gap["witness"]["salinity"] < 18


def test_count_for_people_and_the_first_routes(capsys: pytest.CaptureFixture[str]) -> None:
    _, out, _ = said(capsys, "count", MARSH, "--list", "1")
    assert "One project, at most: 2" in out
    assert "2 routes are open to the project with the most:\n  1   soil_carbon: " in out
    assert "and 1 more." in out


def test_count_lists_the_routes_of_a_case(capsys: pytest.CaptureFixture[str]) -> None:
    sample, cases = SAMPLES / "coastal_wetland.rulebook", SAMPLES / "coastal_wetland.cases.yaml"
    words = ("count", str(sample), "--list", "2", "--inputs", str(cases), "--json", "--seconds", "30")
    status, out, _ = said(capsys, *words, "--case", "Glasswort Creek")
    listed = json.loads(out)["listed"]
    assert status == 0 and listed["exact"] and listed["open"] > 2 and len(listed["routes"]) == 2
    assert all(route["soil_gain"] != "horizons" for route in listed["routes"])  # slow accretion closes them
    status, _, err = said(capsys, *words, "--case", "Glaswort Creek")
    assert status == 2 and "did you mean 'Glasswort Creek'?" in err


def test_whole_numbers_are_written_in_full(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """2^200 a period over 100 periods has 6,021 digits, more than Python writes by itself."""
    blocks = ['rulebook "Many", draft "1"\n', "periods 100\n", "result credits [t CO2e], rounded down to 1\n"]
    for number in range(200):
        options = "".join(f"        option o{k}\n            = {number + k} [t CO2e]\n" for k in (1, 2))
        blocks.append(f"quantity part_{number} [t CO2e]\n    choice by developer\n{options}")
    blocks.append("quantity credits [t CO2e]\n    = " + " + ".join(f"part_{number}" for number in range(200)) + "\n")
    path = tmp_path / "many.rulebook"
    path.write_text("\n".join(blocks))
    _, out, _ = said(capsys, "count", str(path), "--json")
    assert '"reachable": 1606938044258990275541962092341162602522202993782792835301376,' in out
    digits = out.split('"over_periods_most": ')[1].split(",")[0]
    assert len(digits) == 6021 and digits.isdecimal()
    _, out, _ = said(capsys, "count", str(path))
    assert "1,606,938,… (61 digits, about 1.6 × 10^60)" in out


# --- ends without a traceback -----------------------------------------------------------------------


def run(command: str) -> subprocess.CompletedProcess[str]:
    environment = {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)}
    command = command.replace("SAMESUM", f"{sys.executable} -m samesum")
    return subprocess.run(["bash", "-c", command], capture_output=True, text=True, env=environment, timeout=120)


@pytest.mark.parametrize(
    "command",
    [
        f"SAMESUM count {MARSH} | head -c 1",
        f"SAMESUM count {MARSH} --json | true",
        f"SAMESUM check {MARSH} >&-",
        f"SAMESUM check {MARSH} 2>&-",
        "SAMESUM check nowhere >&- 2>&-",
        f"SAMESUM count {MARSH} > /dev/full",
        "SAMESUM --help > /dev/full",
    ],
)
def test_output_that_nobody_reads(command: str) -> None:
    found = run(command)
    assert "Traceback" not in found.stderr and "Exception ignored" not in found.stderr, found.stderr


def test_a_full_disk_is_no_success() -> None:
    found = run(f"SAMESUM count {MARSH} > /dev/full")
    assert found.returncode == 2
    assert "could not be written" in found.stderr


def test_an_interrupt_ends_quietly(tmp_path: Path) -> None:
    pipe = tmp_path / "slow.rulebook"
    os.mkfifo(pipe)
    environment = {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)}
    command = [sys.executable, "-m", "samesum", "count", str(pipe)]
    with subprocess.Popen(command, env=environment, stderr=subprocess.PIPE, text=True) as process:
        time.sleep(2)
        process.send_signal(signal.SIGINT)
        _, err = process.communicate(timeout=60)
    assert process.returncode == 130
    assert err == "samesum: stopped\n"


def test_a_table_of_projects_is_read_wherever_projects_are(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    table = tmp_path / "projects.csv"
    table.write_text(
        "name,area@1,area@2,plot_mean@1,plot_mean@2,soil,salinity,access\n"
        "Heron Flats,120,80,100,150,peaty,12,yes\nCurlew Reach,300,,90,,peaty,4,\n",
        encoding="utf-8",
    )
    inputs = ("--inputs", str(table))
    status, out, _ = said(capsys, "check", MARSH, *inputs, "--json")
    found = [each for each in json.loads(out)["findings"] if each["rule"] == "spread-over-limit"]
    assert status == 1 and len(found) == 1 and "Heron Flats" in found[0]["says"]
    for words in (("register", MARSH), ("report", MARSH), ("bias", MARSH), ("compare", MARSH, MARSH)):
        assert said(capsys, *words, *inputs, "--projects", "100")[0] == 0, words
    status, out, err = said(capsys, "count", MARSH, "--list", "2", *inputs)
    assert (status, out) == (2, "") and "which a .yaml file has to hold" in err and err.count("\n") == 1
    table.write_text("name,area@1,plot_mean@1,soil,salinity\nHeron Flats,120,100,peat,12\n", encoding="utf-8")
    status, out, err = said(capsys, "check", MARSH, *inputs)
    assert (status, out) == (2, "") and "projects.csv:2:4: soil is mineral, peaty or organic" in err
