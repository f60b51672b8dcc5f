"""``samesum trial`` on the command line."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest

from samesum.cli.main import main

SAMPLES = Path(__file__).parents[2] / "sample_rulebooks"
MARSH = str(SAMPLES / "marsh_example.rulebook")
CASES = """cases:
  - name: Heron Flats
    area: [120, 80]
    soil: peaty
    salinity: 12 ppt
    plot_mean: [105.5, 98]
    expected:
      value: {value}
      route: {{soil_carbon: plots}}
"""


@pytest.fixture
def inputs(tmp_path: Path) -> str:
    path = tmp_path / "cases.yaml"
    path.write_text(CASES.format(value=65228))
    return str(path)


def test_json_has_the_keys_that_were_agreed(inputs: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["trial", MARSH, "--inputs", inputs, "--json"]) == 0
    answer: dict[str, Any] = json.loads(capsys.readouterr().out)
    [case] = answer["cases"]
    assert case["name"] == "Heron Flats" and case["routes"] == 2 and case["distinct_results"] is None
    # 0.8 × (90·200·44/12 − 5.4·200) and 0.95 × (20 500·44/12 − 3.1·200), by hand
    assert case["lowest"]["value"] == pytest.approx(0.8 * (90 * 200 * 44 / 12 - 5.4 * 200))
    assert case["highest"]["value"] == pytest.approx(0.95 * (20_500 * 44 / 12 - 3.1 * 200))
    assert case["lowest"]["issued"] == 51936 and case["lowest"]["settings"] == {"discount": 0.2}
    assert case["reference"]["route"]["soil_carbon"] == "plots"
    assert case["complete"] is True
    assert {each["id"] for each in answer["branch_points"]} == {"soil_carbon", "discount"}
    assert all({"swing", "left_if_closed"} <= set(each) for each in answer["branch_points"])
    assert answer["worst_case"]["low"] >= case["spread"] and answer["worst_case"]["witness"]["facts"]["area"]
    assert answer["verdict"] == "differs"


def test_the_page_says_what_each_project_gets(inputs: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["trial", MARSH, "--inputs", inputs]) == 0
    page = capsys.readouterr().out
    assert max(len(line) for line in page.splitlines()) <= 80
    assert "\x1b" not in page
    for words in ("Heron Flats", "51,936 t CO2e", "28.9 % of the reference", "the worked example comes out", "├"):
        assert words in page
    assert "Verdict: differs" in page


def test_a_worked_example_that_fails_is_worked_out(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = tmp_path / "cases.yaml"
    path.write_text(CASES.format(value=59000))
    assert main(["trial", MARSH, "--inputs", str(path)]) == 1
    page = capsys.readouterr().out
    assert "The worked example does not come out: Heron Flats." in page[page.index("Verdict:") :]
    assert "the worked example says 59,000, the rulebook gives 65,228" in page
    assert "= 105.5 [t C/ha] * 120 [ha] + 98 [t C/ha] * 80 [ha]" in page


@pytest.mark.parametrize(
    ("old", "new", "says"),
    [
        (" by soil,", " by salinity,", "the table `regional_stock` has no row for salinity 12 ppt"),
        ("soil is one of peaty or organic", "soil is organic", "no branch of `methane` is open"),
        ("periods 8", "periods 8\napplies when salinity >= 20 [ppt], clause 2.1",
         "`applies when salinity >= 20 [ppt]` (clause 2.1) does not hold"),
    ],
)  # fmt: skip
def test_a_worked_example_without_a_result_says_why(
    old: str, new: str, says: str, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    text = Path(MARSH).read_text(encoding="utf-8")
    assert old in text
    text = text.replace(old, new)
    if "salinity," in new:
        text = text.replace("regional_stock(soil)", "regional_stock(salinity)")
        text = text.replace("    mineral = 62\n    peaty = 90\n    organic = 118\n", "    above 20 [ppt] = 62\n")
    (tmp_path / "draft.rulebook").write_text(text, encoding="utf-8")
    cases = CASES.format(value=1).replace("soil_carbon: plots", "soil_carbon: regional")
    (tmp_path / "cases.yaml").write_text(cases, encoding="utf-8")
    assert main(["trial", str(tmp_path / "draft.rulebook"), "--inputs", str(tmp_path / "cases.yaml")]) == 1
    page = " ".join(capsys.readouterr().out.split())
    assert f"there is no result on the route of the worked example, because {says}." in page


def test_explain(inputs: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["trial", MARSH, "--inputs", inputs, "--explain", "soil_carbon=regional"]) == 0
    page = capsys.readouterr().out
    assert "= 90 [t C/ha] * 120 [ha] + 90 [t C/ha] * 80 [ha]" in page
    assert "Issued: 56,805 t CO2e, rounded down to 1" in page
    assert main(["trial", MARSH, "--inputs", inputs, "--explain", "soil=regional"]) == 2


def test_mistakes_in_the_cases_are_told_with_their_places(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = tmp_path / "cases.yaml"
    path.write_text(CASES.format(value=1).replace("peaty", "peety").replace("12 ppt", "99"))
    assert main(["trial", MARSH, "--inputs", str(path)]) == 2
    told = capsys.readouterr()
    assert told.out == ""
    assert f"{path}:4:11: soil is mineral, peaty or organic" in told.err
    assert f"{path}:5:15: salinity is 99 ppt, outside its domain" in told.err


@pytest.mark.parametrize("words", [["--tolerance", "much"], ["--tolerance", "-1"], ["--seconds", "0"]])
def test_a_call_that_cannot_be_used(words: list[str], inputs: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["trial", MARSH, "--inputs", inputs, *words]) == 2


@pytest.mark.parametrize("share", ["0.5 %", "0.005", "1e-3", "0"])
def test_a_tolerance_as_people_write_it(share: str, inputs: str) -> None:
    assert main(["trial", MARSH, "--inputs", inputs, "--tolerance", share, "--json"]) == 0


def test_a_table_of_projects(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    rows = "".join(f"P{number},{100 + number},80,peaty,{number % 40},105,98\n" for number in range(30))
    path = tmp_path / "projects.csv"
    path.write_text("name,area@1,area@2,soil,salinity,plot_mean@1,plot_mean@2\n" + rows)
    assert main(["trial", MARSH, "--inputs", str(path)]) == 0
    page = capsys.readouterr().out
    assert "30 projects" in page and "The widest" in page
    assert main(["trial", MARSH, "--inputs", str(path), "--json"]) == 0
    answer = json.loads(capsys.readouterr().out)
    assert len(answer["cases"]) == 30 and answer["cases"][3]["name"] == "P3"
    assert {case["routes"] for case in answer["cases"]} == {2}


def test_the_same_bytes_again(inputs: str, capsys: pytest.CaptureFixture[str]) -> None:
    pages = []
    for _ in range(2):
        assert main(["trial", MARSH, "--inputs", inputs, "--json", "--seconds", "60"]) == 0
        pages.append(capsys.readouterr().out)
    assert pages[0] == pages[1]


def test_check_takes_projects_in(capsys: pytest.CaptureFixture[str]) -> None:
    sample = str(SAMPLES / "waste_heat.rulebook")
    assert main(["check", sample, "--inputs", str(SAMPLES / "waste_heat.cases.yaml"), "--json"]) == 1
    answer = json.loads(capsys.readouterr().out)
    [finding] = [each for each in answer["findings"] if each["rule"] == "spread-over-limit"]
    assert "Harrow Steel" in finding["says"] and "32.5 %" in finding["says"]
    harmless = [each for each in answer["findings"] if each["rule"] == "overlap-without-effect"]
    assert harmless and all(each["severity"] == "note" for each in harmless)
