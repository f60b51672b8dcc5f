"""Projects from YAML and from tables: what is read, and every mistake with its place."""

from __future__ import annotations

from datetime import date
from fractions import Fraction
from pathlib import Path

import pyarrow as pa
import pyarrow.parquet as parquet
import pytest

from samesum.reading import model as m
from samesum.reading.cases import Cases, read_cases
from samesum.reading.columns import read_columns
from samesum.reading.read import read

RULEBOOK = """rulebook "Cases", draft "1"
result credits [t CO2e], rounded down to 1
index stratum, at most 3
fact area [ha] per stratum, 1 to 5000
fact depth [m] per stratum, 0 to 5
fact soil, one of mineral, peaty or organic
fact salinity [ppt], 0 to 40
fact flooded, yes or no
fact unused [m], 0 to 9
setting discount, 5 % to 20 %, by developer
judgement access, "where practicable", by developer
constant stock [t CO2e/ha] = 4, source "Table 3, 2024"
quantity credits [t CO2e]
    choice by developer
        option regional
            = sum(area * depth over stratum) * 1 [t CO2e/ha/m] * (1 - discount)
        option plots
            = stock * sum(area over stratum) * salinity / 1 [ppt] * effect
quantity effect
    cases
        when flooded and soil is peaty
            = 1
        when access and not (flooded and soil is peaty)
            = 0.5
        otherwise
            = 0.2
"""


@pytest.fixture(scope="module")
def model() -> m.Model:
    reading = read(RULEBOOK, "cases.rulebook")
    assert reading.problems == () and reading.model is not None
    return reading.model


def given(text: str, model: m.Model, folder: Path) -> tuple[Cases, list[str]]:
    path = folder / "projects.yaml"
    path.write_text(text, encoding="utf-8")
    cases, problems = read_cases(path, model)
    return cases, [f"{each.span.line}:{each.span.column} {each.says}; {each.remedy}" for each in problems]


GOOD = """cases:
  - name: Heron Flats
    area: [120, 1.5 km2]
    depth: [1, 50 cm]
    soil: peaty
    salinity: 12 ppt
    flooded: yes
    discount: 10 %
    access: no
    expected:
      value: 59000
      route: {credits: plots}
"""


def test_a_project_is_read_in_the_declared_units(model: m.Model, tmp_path: Path) -> None:
    cases, problems = given(GOOD, model, tmp_path)
    assert problems == []
    [case] = cases.cases
    assert case.values["area"] == (Fraction(120), Fraction(150))
    assert case.values["depth"] == (Fraction(1), Fraction(1, 2))
    assert case.values["discount"] == Fraction(1, 10)
    assert case.values["flooded"] is True and case.values["access"] is False
    assert case.expected is not None
    assert case.expected.value == 59000 and case.expected.route == (("credits", "plots"),)


@pytest.mark.parametrize(
    ("change", "said"),
    [
        (("soil: peaty", "soil: peety"), "5:11 soil is mineral, peaty or organic, not `peety`; did you mean `peaty`?"),
        (("salinity: 12 ppt", "salinty: 12"), "6:5 the rulebook has no fact, judgement or setting `salinty`; did you"),
        (("    salinity: 12 ppt\n", ""), "2:5 Heron Flats: the fact salinity is missing; "),
        (("12 ppt", "55"), "6:15 salinity is 55 ppt, outside its domain; the rulebook says 0 to 40 ppt"),
        (("12 ppt", "12 ha"), "6:15 salinity is in [ppt], not in [ha]; "),
        (("12 ppt", "12 furlongs"), "6:15 salinity: "),
        (("12 ppt", "twelve"), "6:15 salinity: `twelve` is no number; "),
        (("12 ppt", "0,80 ppt"), "6:15 salinity: a number has no comma; write `0.80`, with a point"),
        (("59000", "2,417"), "11:14 value: a number has no comma; write `2.417`, or `2_417` for thousands"),
        (("10 %", "12"), "8:15 discount is 12, outside its domain; the rulebook says 5 % to 20 %; write `12 %`"),
        (("10 %", "30 %"), "8:15 discount is 0.3, outside its domain; the rulebook says 5 % to 20 %"),
        (("12 ppt", "1/0"), "6:15 salinity: `1/0` divides by zero; "),
        (("[120, 1.5 km2]", "[1, 2, 3, 4]"), "3:11 area has 4 values, and a project has at most 3 of stratum; "),
        (("[120, 1.5 km2]", "[1, 2, 3]"), "4:12 depth has 2 values and area has 3, both per stratum; "),
        (("[120, 1.5 km2]", "120"), "3:11 area is per stratum: a list is expected; "),
        (("[120, 1.5 km2]", "[120, 9000]"), "3:17 area is 9000 ha, outside its domain; "),
        (("flooded: yes", "flooded: maybe"), "7:14 flooded is yes or no, not `maybe`; "),
        (("    access: no\n", "    access: no\n    access: yes\n"), "10:5 `access` stands here a second time"),
        (("    access: no\n", "    access:\n"), "9:12 access has no value; "),
        (("    access: no\n", "    stock: 4\n"), "9:5 `stock` is a constant of the rulebook and is not given by a"),
        (("value: 59000", "value: much"), "11:14 value: `much` is no number; "),
        (("value: 59000", "valu: 5"), "11:7 `valu` is no part of `expected`; did you mean `value`?"),
        (("{credits: plots}", "{credit: plots}"), "12:15 `credit` is no branch point; did you mean `credits`?"),
        (
            ("{credits: plots}", "{soil: peaty}"),
            "12:15 `soil` is no branch point; `samesum register --all` lists the branch points",
        ),
        (("{credits: plots}", "{credits: plot}"), "12:24 `credits` has no branch `plot`; did you mean `plots`?"),
        (("cases:", "case:"), "1:1 the file has no `cases`; "),
        (("soil: peaty", "soil: [peaty"), ""),
    ],
)
def test_every_mistake_has_its_place(change: tuple[str, str], said: str, model: m.Model, tmp_path: Path) -> None:
    assert change[0] in GOOD
    _, problems = given(GOOD.replace(*change), model, tmp_path)
    assert problems and any(each.startswith(said) for each in problems), problems


def test_all_mistakes_are_told_in_one_run(model: m.Model, tmp_path: Path) -> None:
    text = GOOD.replace("soil: peaty", "soil: peety").replace("12 ppt", "55").replace("yes", "maybe")
    text += GOOD.removeprefix("cases:\n").replace("[1, 50 cm]", "[9, 1]")
    cases, problems = given(text, model, tmp_path)
    assert [each.partition(" ")[0] for each in problems] == ["5:11", "6:15", "7:14", "13:5", "15:13"]
    assert cases.cases == ()


def test_a_fact_that_leads_nowhere_may_be_missing(model: m.Model, tmp_path: Path) -> None:
    assert "unused" not in GOOD
    assert given(GOOD, model, tmp_path)[1] == []


@pytest.mark.parametrize("text", ["", "cases: []\n", "cases: 3\n", "- 1\n", "cases:\n  - 4\n", "cases: {a: 1}\n"])
def test_what_is_no_file_of_cases_is_said(text: str, model: m.Model, tmp_path: Path) -> None:
    cases, problems = given(text, model, tmp_path)
    assert cases.cases == () and problems


def test_a_file_that_is_not_there(model: m.Model, tmp_path: Path) -> None:
    _, problems = read_cases(tmp_path / "nowhere.yaml", model)
    assert [each.says for each in problems] == ["there is no such file"]


# --- tables --------------------------------------------------------------------------------

HEAD = "name,area@1,area@2,depth@1,depth@2,soil,salinity,flooded,discount\n"
ROWS = "Heron,120,150,1,0.5,peaty,12,yes,0.1\nMoor,40,,2,,mineral,3,no,\n"


def table(text: str, model: m.Model, folder: Path) -> tuple[object, list[str]]:
    path = folder / "projects.csv"
    path.write_text(text, encoding="utf-8")
    columns, problems = read_columns(path, model)
    return columns, [f"{each.span.line}:{each.span.column} {each.says}" for each in problems]


def test_a_csv_of_projects(model: m.Model, tmp_path: Path) -> None:
    path = tmp_path / "projects.csv"
    path.write_text(HEAD + ROWS)
    columns, problems = read_columns(path, model)
    assert problems == () and columns is not None
    assert columns.names == ("Heron", "Moor")
    assert columns.sizes["stratum"].tolist() == [2, 1]
    assert columns.numbers["area@1"].tolist() == [120, 40]
    assert columns.given["discount"].tolist() == [True, False]
    assert columns.flags["flooded"].tolist() == [True, False]


def test_units_in_cells_are_converted(model: m.Model, tmp_path: Path) -> None:
    path = tmp_path / "projects.csv"
    path.write_text(HEAD + ROWS.replace(",12,yes", ",12 ppt,yes").replace("0.1\n", "10 %\n"))
    columns, problems = read_columns(path, model)
    assert problems == () and columns is not None
    assert columns.numbers["salinity"].tolist() == [12, 3]
    assert columns.numbers["discount"][0] == 0.1


@pytest.mark.parametrize(
    ("change", "said"),
    [
        (("peaty", "peety"), "2:6 soil is mineral, peaty or organic, not `peety`"),
        (("salinity", "salinty"), "1:7 the rulebook has no fact, setting or judgement `salinty`"),
        (("depth@1", "depth@9"), "1:4 `depth@9` is no element of stratum"),
        ((",3,no", ",77,no"), "3:7 salinity is 77, outside its domain"),
        ((",3,no", ",,no"), "3:1 the fact salinity is missing"),
        (("Moor,40,,2", "Moor,,40,2"), "3:1 area has an empty cell before a filled one"),
        (("Moor,40,,2", "Moor,40,50,2"), "3:1 depth and area have different numbers of values"),
        (("yes", "sometimes"), "2:8 flooded is yes or no, not `sometimes`"),
        (("area@1,area@2", "name,area@1"), "1:2 the column `name` stands here a second time"),
        ((",120,150", ",120,nan"), "2:3 area: nan is no number"),
        ((",3,no", ",inf,no"), "3:7 salinity: inf is no number"),
        ((",120,150", ",NA,150"), "2:2 area: `NA` is no number"),
        ((",3,no", ',"0,5",no'), "3:7 salinity: a number has no comma"),
        (("yes,0.1", "yes,12"), "2:9 discount is 12, outside its domain"),
        (("Moor", "Heron"), "3:1 two projects are called Heron (first on line 2)"),
        ((",area@2", ",area@1"), "1:3 the column `area@1` stands here a second time"),
    ],
)
def test_mistakes_in_tables(change: tuple[str, str], said: str, model: m.Model, tmp_path: Path) -> None:
    assert change[0] in HEAD + ROWS
    columns, problems = table((HEAD + ROWS).replace(*change), model, tmp_path)
    assert columns is None
    assert said in problems, problems


@pytest.mark.parametrize(
    "change", [(",120,150", ",120 t,150"), (",120,150", ",120,nan"), (",120,150", ",NA,150"), (",3,no", ",inf,no")]
)
def test_a_number_that_cannot_be_read_is_told_once(change: tuple[str, str], model: m.Model, tmp_path: Path) -> None:
    _, problems = table((HEAD + ROWS).replace(*change), model, tmp_path)
    assert len(problems) == 1 and "outside its domain" not in problems[0]


def test_many_rows_with_one_mistake_are_summed_up(model: m.Model, tmp_path: Path) -> None:
    rows = "".join(f"P{number},120,,1,,peaty,{99 if number % 2 else 9},yes,\n" for number in range(100))
    _, problems = table(HEAD + rows, model, tmp_path)
    assert len(problems) == 6
    assert problems[-1] == "13:7 and 45 more rows from here on with the same mistake"


def test_parquet_with_a_column_of_lists(model: m.Model, tmp_path: Path) -> None:
    made = pa.table(
        {
            "area": pa.array([[120.0, 150.0], [40.0]]),
            "depth": pa.array([[1.0, 0.5], [2.0]]),
            "soil": ["peaty", "mineral"],
            "salinity": [12, 3],
            "flooded": [True, False],
        }
    )
    path = tmp_path / "projects.parquet"
    parquet.write_table(made, path)
    columns, problems = read_columns(path, model)
    assert problems == () and columns is not None
    assert columns.sizes["stratum"].tolist() == [2, 1]
    assert columns.numbers["area@2"].tolist() == [150, 0]


@pytest.mark.parametrize("content", [b"", b"PAR1 nonsense", b"a\xff,b\n1,2\n"])
def test_what_is_no_table_is_said(content: bytes, model: m.Model, tmp_path: Path) -> None:
    for name in ("projects.csv", "projects.parquet"):
        path = tmp_path / name
        path.write_bytes(content)
        columns, problems = read_columns(path, model)
        assert columns is None and problems
    for name in ("nowhere.csv", "nowhere.parquet"):
        columns, problems = read_columns(tmp_path / name, model)
        assert columns is None
        assert [(each.says, each.remedy) for each in problems] == [
            ("there is no such file", "check the name and the folder")
        ]


PLAIN: dict[str, object] = {
    "area@1": [120.0, 40.0],
    "depth@1": [1.0, 2.0],
    "soil": ["peaty", "mineral"],
    "salinity": [12.0, 3.0],
    "flooded": [True, False],
}


@pytest.mark.parametrize(
    ("column", "said"),
    [
        (pa.array([12.0, float("nan")]), "salinity: nan is no number"),
        (pa.array([12.0, float("-inf")]), "salinity: -inf is no number"),
        (pa.array([True, False]), "salinity is a number, and the column holds yes and no"),
        (pa.array([date(2024, 1, 1), None]), "the column `salinity` holds dates, and not numbers or texts"),
        (pa.array([b"12", b"3"]), "the column `salinity` holds raw bytes, and not numbers or texts"),
        (pa.array([{"a": 1}, {"a": 2}]), "the column `salinity` holds several things in one cell, and not numbers"),
        (pa.array([[1.0], [2.0]]), "salinity has 1 values in a row"),
    ],
)
def test_columns_that_hold_no_numbers(column: pa.Array, said: str, model: m.Model, tmp_path: Path) -> None:
    path = tmp_path / "projects.parquet"
    parquet.write_table(pa.table({**PLAIN, "salinity": column}), path)
    columns, problems = read_columns(path, model)
    assert columns is None
    assert any(each.says.startswith(said) for each in problems), problems


@pytest.mark.parametrize("element", [{"a": 1}, b"1", date(2024, 1, 1), True, float("nan")])
def test_lists_that_hold_no_numbers(element: object, model: m.Model, tmp_path: Path) -> None:
    path = tmp_path / "projects.parquet"
    kept = {name: values for name, values in PLAIN.items() if name != "area@1"}
    parquet.write_table(pa.table({**kept, "area": pa.array([[element], [element]])}), path)
    columns, problems = read_columns(path, model)
    assert columns is None and any("area" in each.says for each in problems)


def test_a_parquet_column_that_stands_twice(model: m.Model, tmp_path: Path) -> None:
    path = tmp_path / "projects.parquet"
    parquet.write_table(pa.Table.from_arrays([pa.array([1.0]), pa.array([2.0])], names=["salinity", "salinity"]), path)
    columns, problems = read_columns(path, model)
    assert columns is None
    assert [each.says for each in problems] == ["the column `salinity` stands here a second time"]


@pytest.mark.parametrize(
    ("content", "said"),
    [
        ((HEAD + ROWS).replace(",", ";").encode(), "columns are separated by commas here, not by `;`"),
        (HEAD.replace(",", ";").encode() + b"Heron;1,5;2\n", "columns are separated by commas here, not by `;`"),
        (b"\x00\x01\x02,\xff\n\x00\n1,2,3\n", "this is not a text file"),
        (HEAD.encode() + b"Heron,1\n", "the rows do not all have as many cells as there are columns"),
        (b"", "the file is empty"),
    ],
)
def test_what_a_csv_is_instead(content: bytes, said: str, model: m.Model, tmp_path: Path) -> None:
    path = tmp_path / "projects.csv"
    path.write_bytes(content)
    columns, problems = read_columns(path, model)
    assert columns is None and len(problems) == 1
    assert problems[0].says.startswith(said) and problems[0].says.isprintable()


def test_a_folder_is_no_table(model: m.Model, tmp_path: Path) -> None:
    for name in ("folder.csv", "folder.parquet"):
        (tmp_path / name).mkdir()
        columns, problems = read_columns(tmp_path / name, model)
        assert columns is None and [each.says for each in problems] == ["this is a folder"]
