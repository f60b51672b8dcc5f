"""``samesum bias`` on the command line: what it answers, and what it says when it cannot."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest

from samesum.cli.main import main
from support.choosing import either_or

SAMPLES = Path(__file__).parents[2] / "sample_rulebooks"


@pytest.fixture(autouse=True)
def own_cache(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path / "cache"))
    monkeypatch.setenv("COLUMNS", "80")


def said(capsys: pytest.CaptureFixture[str], *words: str) -> tuple[int, str, str]:
    status = main(["bias", *words])
    out, err = capsys.readouterr()
    return status, out, err


def answer(capsys: pytest.CaptureFixture[str], *words: str) -> dict[str, Any]:
    status, out, err = said(capsys, *words, "--json")
    assert (status, err) == (0, "")
    found: dict[str, Any] = json.loads(out)
    return found


def test_json(capsys: pytest.CaptureFixture[str]) -> None:
    file = str(SAMPLES / "marsh_example.rulebook")
    found = answer(capsys, file, "--projects", "2_000", "--join", "1.1", "--routes")
    assert found["projects"] == {
        "simulated": 2000, "from": "domains", "cases": 0, "outside": 0, "without_result": 0
    }  # fmt: skip
    assert [row["behaviour"] for row in found["whole"]["behaviours"]] == [
        "mandated", "mandated", "second look", "pick of all", "indifferent"
    ]  # fmt: skip
    for row in found["whole"]["behaviours"]:
        assert {"over_issuance", "standard_error", "over_credited", "closed_form", "enrolment"} <= set(row)
    assert [each["id"] for each in found["choices"]] == ["soil_carbon", "discount"]
    assert found["ranking"][0]["id"] == "soil_carbon"
    closures = found["choices"][0]["closures"]
    assert [each["kind"] for each in closures] == ["mandate", "mandate", "lowest", "fixed", "deduct", "deduct"]
    assert [each["paths"]["per_project_most"] for each in closures] == [1, 1, 1, 2, 2, 2]
    assert sum(found["whole"]["histogram"]["mandated"]) == 2000


def test_cases(capsys: pytest.CaptureFixture[str]) -> None:
    file, cases = str(SAMPLES / "coastal_wetland.rulebook"), str(SAMPLES / "coastal_wetland.cases.yaml")
    found = answer(capsys, file, "--inputs", cases, "--projects", "800")
    assert found["projects"] == {
        "simulated": 800, "from": "cases", "cases": 5, "outside": 0, "without_result": 1
    }  # fmt: skip
    status, out, _ = said(capsys, file, "--inputs", cases, "--projects", "800")
    assert status == 0 and "each of 4 given ones in turn" in " ".join(out.split())


def test_tables_of_projects(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """The same projects from CSV and Parquet as from YAML: the same figures."""
    import pyarrow.csv as csv
    import pyarrow.parquet as parquet

    file = str(SAMPLES / "marsh_example.rulebook")
    table = tmp_path / "projects.csv"
    table.write_text(
        "name,soil,salinity,area@1,area@2,plot_mean@1,plot_mean@2,discount\n"
        "a,peaty,12,120,80,105,98,\nb,organic,30,40,,210,,0.1\nc,mineral,2,10,,90,,\n",
        encoding="utf-8",
    )
    parquet.write_table(csv.read_csv(table), tmp_path / "projects.parquet")
    (tmp_path / "projects.yaml").write_text(
        "cases:\n"
        "  - {name: a, soil: peaty, salinity: 12, area: [120, 80], plot_mean: [105, 98]}\n"
        "  - {name: b, soil: organic, salinity: 30, area: [40], plot_mean: [210], discount: 0.1}\n"
        "  - {name: c, soil: mineral, salinity: 2, area: [10], plot_mean: [90]}\n",
        encoding="utf-8",
    )
    found = [
        answer(capsys, file, "--inputs", str(tmp_path / f"projects.{kind}"), "--projects", "2000")
        for kind in ("csv", "parquet", "yaml")
    ]
    assert found[0] == found[1] == found[2]
    assert found[0]["projects"] == {
        "simulated": 2000, "from": "cases", "cases": 3, "outside": 0, "without_result": 1
    }  # fmt: skip
    (tmp_path / "bad.csv").write_text("name,soyl\na,peaty\n", encoding="utf-8")
    status, out, err = said(capsys, file, "--inputs", str(tmp_path / "bad.csv"))
    assert status == 2 and not out and "soil" in err


def test_for_people(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    file = tmp_path / "one.rulebook"
    file.write_text(either_or([(0, 0.3, 0), (0, 0.1, 1)]), encoding="utf-8")
    status, out, err = said(capsys, str(file), "--projects", "20000", "--join", "1")
    assert (status, err) == (0, "")
    flat = " ".join(out.split())
    assert "the programme issues 1,120 t when developers try the cheapest option first" in flat
    assert "most comes from stock, 120 t by itself" in flat
    assert "+11.97 %" in out and "by formula" in out and "the truth scatters around a fixed average" in flat
    assert all(len(line) <= 80 for line in out.split("\n")) and "\x1b" not in out


def test_a_formula_with_sampled_weights_has_its_error(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """What the choice is worth in a project hangs on a fact that is drawn: another seed gives another figure."""
    file = tmp_path / "one.rulebook"
    text = either_or([(0, 0.3, 0), (0, 0.1, 1)], formula="stock + rest")
    file.write_text(text + "fact rest [t CO2e], 0 to 3000\n", encoding="utf-8")
    status, out, _ = said(capsys, str(file), "--projects", "2000")
    assert status == 0
    row = next(line for line in out.splitlines() if line.startswith(" second look"))
    assert "± 0." in row and "by formula" not in row
    assert "weighted by what the choice is worth in the projects simulated" in " ".join(out.split())
    other = said(capsys, str(file), "--projects", "2000", "--seed", "5")[1]
    assert row.split()[2] != next(line for line in other.splitlines() if line.startswith(" second look")).split()[2]
    # all that is mandated without bias is exact whatever the weights
    assert "by formula" in next(line for line in out.splitlines() if line.startswith(" mandated:"))


@pytest.mark.parametrize("width", [24, 30, 40, 60])
def test_a_narrow_page_is_kept(width: int, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> None:
    monkeypatch.setenv("COLUMNS", str(width))
    out = said(capsys, str(SAMPLES / "marsh_example.rulebook"), "--projects", "500", "--join", "1")[1]
    assert [line for line in out.splitlines() if len(line) > width] == []
    assert "█" in out and "issued/true" in out.lower()


def test_the_help_names_every_way_of_closing(capsys: pytest.CaptureFixture[str]) -> None:
    out = " ".join(said(capsys, "--help")[1].split())
    for form in ("mandate:ID", "mandate=OPTION:ID", "mandate=VALUE:SETTING", "deduct=P%:ID", "in-order:ID"):
        assert form in out


def test_nothing_to_choose(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    file = str(SAMPLES / "waste_heat_repaired.rulebook")
    status, out, _ = said(capsys, file, "--projects", "500")
    assert status == 0 and "Nothing here is left to the developer" in out


@pytest.mark.parametrize(
    ("words", "says"),
    [
        (("--projects", "0"), "no whole number"),
        (("--projects", "many"), "no whole number"),
        (("--seed", "-1"), "no seed"),
        (("--price", "0"), "no number above 0"),
        (("--join", "nan"), "no number above 0"),
    ],
)
def test_slips_in_the_call(words: tuple[str, ...], says: str, capsys: pytest.CaptureFixture[str]) -> None:
    status, out, err = said(capsys, str(SAMPLES / "marsh_example.rulebook"), *words)
    assert status == 2 and not out and says in err


def test_what_cannot_be_simulated(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    file = tmp_path / "one.rulebook"
    text = either_or([(0, 0.3, 0), (0, 0.1, 0)])
    for changed, says in (
        (text.replace(", 1000 to 1000", ""), "amount may be any number"),
        (text.replace("1000 to 1000", "0 to 0"), "no true credits above zero"),
        (text.replace("result credits [t CO2e]\n", ""), "result"),
        (text.replace("= stock", "= stok"), "stok"),
    ):
        file.write_text(changed, encoding="utf-8")
        status, out, err = said(capsys, str(file), "--projects", "100")
        assert status == 2 and not out and says in err and err.count("\n") == 1
    assert said(capsys, str(tmp_path / "none.rulebook"))[0] == 2


def test_a_long_chain_of_quantities(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = tmp_path / "chain.rulebook"
    lines = ['rulebook "Chain", draft "1"', "result q400 [t CO2e]", "quantity q0 [t CO2e]", "    = 1 [t CO2e]"]
    for number in range(1, 401):
        lines += [f"quantity q{number} [t CO2e]", f"    = q{number - 1} + 1 [t CO2e]"]
    path.write_text("\n".join(lines) + "\n")
    status, out, err = said(capsys, str(path), "--projects", "64", "--jobs", "1")
    assert (status, err) == (0, "") and "Chain" in out
