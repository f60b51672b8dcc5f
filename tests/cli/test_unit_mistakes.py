"""A rulebook with units that do not fit: told in whole sentences, and nothing is claimed of it."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from samesum.cli.main import main
from samesum.evidence.gather import gather
from samesum.evidence.subjects.declared import unit_mismatches
from samesum.graph import build
from samesum.reading.read import read_file
from support.asking import reader

MISTAKES = Path(__file__).parents[1] / "reading" / "mistakes"
WRONG = """rulebook "Dune planting", draft "1"

result total [t CO2e], rounded down to 1, clause 9

fact area [ha], 1 to 10, clause 1
fact spare [kg C], 1 to 10, clause 2
constant rate [t CO2e/ha] = 3, clause 3, source "IPCC 2006"

quantity aside [t CO2e], clause 8
    = {aside}

quantity total [t CO2e], clause 9
    = {total}
"""


@pytest.fixture(autouse=True)
def own_cache(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path / "cache"))


def written(folder: Path, total: str, aside: str = "area * rate") -> str:
    path = folder / "dune.rulebook"
    path.write_text(WRONG.format(total=total, aside=aside), encoding="utf-8")
    cases = "cases:\n  - name: Gull Spit\n    area: 2\n    spare: 3\n"
    (folder / "dune.cases.yaml").write_text(cases, encoding="utf-8")
    return str(path)


def test_what_to_write_instead_is_a_whole_sentence() -> None:
    reading = read_file(MISTAKES / "units.rulebook", reader=reader())
    assert reading.model is not None
    found = [str(each.attributes["help"]) for each in unit_mismatches(gather(build(reading.model)), reading.problems)]
    assert len(found) > 15
    assert [text for text in found if not (text[0].isupper() and text[-1] in ".?")] == []
    assert "The language reference lists the units." in found and "Leave the unit out." in found


def test_the_verdict_waits_for_the_units(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = written(tmp_path, "area * rate + spare")
    assert main(["check", path]) == 1
    page = capsys.readouterr().out
    assert "waits until the mistake in the units is mended" in page and "proved" not in page
    main(["check", path, "--json"])
    assert json.loads(capsys.readouterr().out)["files"][0]["verdict"] == "cannot tell"
    assert main(["report", path]) == 0
    assert "The verdict waits until the mistake in the units is mended." in capsys.readouterr().out
    assert main(["count", path]) == 0
    assert "cannot be added" in capsys.readouterr().err
    main(["check", written(tmp_path, "area * rate")])
    assert "one route for every project: proved" in capsys.readouterr().out


def test_trial_works_no_number_out_past_a_mistake(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    cases = ["--inputs", str(tmp_path / "dune.cases.yaml")]
    path = written(tmp_path, "aside", "area * rate + spare")
    assert main(["trial", path, *cases]) == 2
    out, err = capsys.readouterr()
    assert out == "" and "dune.rulebook:10:21" in err and "until the mistakes in the units are mended" in err
    # beside the way to the result it is told, and the numbers stand
    assert main(["trial", written(tmp_path, "area * rate", "area * rate + spare"), *cases]) == 0
    out, err = capsys.readouterr()
    assert "6 t CO2e" in out and "dune.rulebook:10:21" in err


@pytest.mark.parametrize(
    "setting",
    [
        "setting take [t], 5 to 20, takes 10 [ha]",
        "setting take [t], 5 to 20, by developer, takes 10 [ha]",
        "setting take [t], takes 10 %",
    ],
)
def test_a_value_that_is_taken_and_has_the_wrong_unit_is_told_once(
    setting: str, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = tmp_path / "dune.rulebook"
    path.write_text(
        'rulebook "Dune", draft "1"\nresult total [t], rounded down to 1 [t], clause 1\n'
        f"{setting}, clause 2\nquantity total [t], clause 3\n    = 2 * take\n",
        encoding="utf-8",
    )
    assert main(["check", str(path), "--json"]) == 1
    found = json.loads(capsys.readouterr().out)["findings"]
    assert [each["rule"] for each in found] == ["unit-mismatch"]
