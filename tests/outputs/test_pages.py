"""Numbers and pages for people: layout where layout is the point."""

from __future__ import annotations

import io
from fractions import Fraction
from types import SimpleNamespace
from typing import cast

import pytest

from samesum.evidence.routes.witness import Witness
from samesum.evidence.trial.outcome import TrialEvidence
from samesum.outputs import amounts, register_cells
from samesum.outputs.json_text import as_json
from samesum.outputs.page import Page, Paper, clean, paper_for, wrapped
from samesum.outputs.projects import Words, as_values, given, project
from samesum.outputs.report.measured import worst_case
from samesum.outputs.tables import table_lines
from samesum.written import number, percent, plain, whole


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (0, "0"),
        (5_511_240_000, "5,511,240,000"),
        (10**15 - 1, "999,999,999,999,999"),
        (10**15, "1,000,000,… (16 digits, about 1.0 × 10^15)"),
        (2**200, "1,606,938,… (61 digits, about 1.6 × 10^60)"),
        (3**50, "717,897,987,… (24 digits, about 7.2 × 10^23)"),
        (9_996 * 10**20, "999,600,000,… (24 digits, about 1.0 × 10^24)"),
    ],
)
def test_counts_for_people(value: int, text: str) -> None:
    assert whole(value) == text


def test_a_count_longer_than_python_writes_by_itself() -> None:
    assert whole(10**5000) == "100,000,000,… (5001 digits, about 1.0 × 10^5000)"


@pytest.mark.parametrize(
    ("value", "text"),
    [
        ("0", "0"),
        ("12", "12"),
        ("44/12", "3.66667"),
        ("0.47", "0.47"),
        ("1/3000000", "3.33333e-7"),
        ("-0.00012", "-0.00012"),
        ("123456.789", "123,457"),
        ("1000", "1,000"),
        ("-9999.5", "-9,999.5"),
        ("2500000", "2,500,000"),
        ("1e18", "1e18"),
        ("12345678901234567890.5", "1.23457e19"),
    ],
)
def test_measured_numbers_for_people(value: str, text: str) -> None:
    assert plain(Fraction(value)) == text


@pytest.mark.parametrize(
    ("value", "text"), [(10.0, "10 times"), (12.34567, "12.3 times"), (21_987_654.0, "22,000,000 times")]
)
def test_a_share_is_written_alike_in_trial_register_and_report(value: float, text: str) -> None:
    assert amounts.share(value) == register_cells.share(value) == text
    proof = SimpleNamespace(low=value, high=None, unbounded="")
    assert f"at least {text} the reference apart" in worst_case(cast(TrialEvidence, SimpleNamespace(proof=proof)))


@pytest.mark.parametrize(
    ("low", "high", "texts"),
    [
        (0.5, 9.8, ("50 % of the reference", "980 %")),
        (9.8, 10.0, ("9.8 times the reference", "10 times")),
        (0.0, 12.0, ("0 times the reference", "12 times")),
        (11.0, 1234.5, ("11 times the reference", "1,230 times")),
        (0.5, float("inf"), ("50 % of the reference", "no bound")),
    ],
)
def test_two_shares_in_one_sentence_have_one_form(low: float, high: float, texts: tuple[str, str]) -> None:
    assert amounts.two_shares(low, high) == texts
    proof = SimpleNamespace(low=low, high=high, unbounded="")
    said = worst_case(cast(TrialEvidence, SimpleNamespace(proof=proof)))
    assert f"can lie {texts[0]} apart" in said and f"at most {texts[1]} apart" in said


def test_a_witness_has_separators_for_people_and_none_in_json() -> None:
    words = Words({"heat": "GJ"}, frozenset(), {"stock": "plot"})
    assert given("heat", Fraction(90_000), words) == "heat 90,000 GJ"
    assert given("stock", (Fraction(1234), Fraction(5)), words) == "stock 1,234 / 5 by plot"
    assert as_values(Witness((("heat", Fraction(90_000)),), (), (), ())) == {"heat": 90_000}


@pytest.mark.parametrize(
    ("value", "text"),
    [("0", "0 %"), ("0.05", "5 %"), ("-0.0786", "-7.86 %"), ("5", "500 %"), ("0.0000123456", "0.00123 %")],
)
def test_shares_for_people(value: str, text: str) -> None:
    assert percent(Fraction(value)) == text


def test_numbers_for_programs_are_exact() -> None:
    assert number(Fraction(18)) == 18 and isinstance(number(Fraction(18)), int)
    assert number(Fraction(1, 20)) == 0.05
    assert number(Fraction(125, 6)) == "125/6"
    assert number(Fraction(10) ** 400) == 10**400
    assert as_json({"many": 7**6000}).count("\n") == 3


def test_wrapping_keeps_long_words_whole_and_percents_together() -> None:
    assert wrapped("an error of 35 % is large", 14) == ["an error of", "35 % is large"]
    assert wrapped("a/very/long/path/that/does/not/fit x", 10) == ["a/very/long/path/that/does/not/fit", "x"]
    assert wrapped("湿地の炭素 湿地", 10) == ["湿地の炭素", "湿地"]


def test_nothing_in_a_text_steers_the_terminal() -> None:
    assert clean("a\x1b[31m\u202eb\x00\r\n") == "a�[31m�b���"
    assert clean("größe क्‍ष") == "größe क्‍ष"


def test_colours_only_on_a_terminal() -> None:
    class Terminal(io.StringIO):
        def isatty(self) -> bool:
            return True

    assert paper_for(Terminal(), {}).colour
    assert not paper_for(Terminal(), {"NO_COLOR": "1"}).colour
    assert not paper_for(Terminal(), {"TERM": "dumb"}).colour
    assert not paper_for(io.StringIO(), {}).colour
    assert not paper_for(None, {}).colour
    assert paper_for(io.StringIO(), {"COLUMNS": "5"}).width == 24
    assert paper_for(io.StringIO(), {"COLUMNS": "x"}).width == 80
    page = Page(Paper(80, True))
    page.line("error", "bad")
    assert page.text == "\x1b[1;31merror\x1b[0m\n"


def test_a_narrow_page_puts_entries_below_their_label() -> None:
    page = Page(Paper(30))
    page.entry("why", "because it moves", indent=4, column=10)
    assert page.text == "    why\n      because it moves\n"
    page = Page(Paper(60))
    page.heading("Title")
    page.entry("why", "because it moves the number by a lot of tonnes each year", indent=2, column=10)
    assert page.text == (
        "Title ──────────────────────────────────────────────────────\n"
        "  why       because it moves the number by a lot of tonnes\n"
        "            each year\n"
    )


WORDS = Words(
    {"salinity": "ppt", "area": "ha", "discount": "", "soil": ""}, frozenset({"discount"}), {"area": "stratum"}
)


def test_a_project_in_the_trades_words() -> None:
    witness = Witness(
        (("soil", "mineral"), ("salinity", Fraction(0)), ("area", (Fraction(120), Fraction(80)))),
        (("discount", Fraction(1, 20)),),
        (("access", True),),
        (("soil_carbon", "plots"),),
    )
    assert project(witness, WORDS) == (
        "a project with soil mineral, salinity 0 ppt, area 120 / 80 ha by stratum, discount set to 5 % "
        "and access read as yes"
    )
    assert as_values(witness) == {
        "soil": "mineral",
        "salinity": 0,
        "area": [120, 80],
        "discount": 0.05,
        "access": True,
    }
    assert project(Witness((), (), (), ()), WORDS) == "any project"
    equal = Witness((("area", (Fraction(5), Fraction(5))), ("flooded", False)), (), (), ())
    assert project(equal, WORDS) == "a project with area 5 ha in every stratum and flooded no"


def test_a_table_breaks_no_name_where_there_is_room() -> None:
    """The columns that can be wrapped between words give way; on a page that is too narrow, names do."""
    titles = ("what is left when it is closed", "branch point")
    rows = [("a great deal of it, all things considered", "baseline_carbon_of_the_stratum")]
    for width in (48, 60, 80):
        lines = table_lines(titles, rows, Paper(width))
        assert any("baseline_carbon_of_the_stratum" in line for line in lines)
        assert max(map(len, lines)) <= width
    assert max(map(len, table_lines(titles, rows, Paper(30)))) <= 30
