"""Closures written out: what is written parses, keeps every comment, and has the routes and the over-issuance that the
table promised."""

from __future__ import annotations

import math
import re
from functools import cache
from pathlib import Path

import pytest

from samesum.cli.closing import routes_left
from samesum.cli.main import main
from samesum.evidence.choosing.bench import Terms
from samesum.evidence.choosing.projects import BLOCK, from_domains
from samesum.evidence.choosing.selection import Closure, Found, Selection, select
from samesum.evidence.routes.counting import count
from samesum.graph import build
from samesum.outputs.closed import Closing, closed
from samesum.outputs.closed_text import CannotClose, parted
from samesum.outputs.counts import paths_json
from samesum.reading.read import Reading, make_reader, read, read_file
from support.choosing import either_or, figure, found, model_of, simulate

SAMPLES = Path(__file__).parents[2] / "sample_rulebooks"
DRAFTS = ("coastal_wetland", "waste_heat", "woodland")
READER = make_reader()


def written(text: str, *closings: Closing) -> Reading:
    reading = read(text, "test.rulebook", reader=READER)
    for closing in closings:
        reading = closed(reading, closing, READER)
    return reading


def comments(text: str) -> list[str]:
    return sorted(comment for line in text.split("\n") if (comment := parted(line)[1]))


@cache
def sample(name: str) -> tuple[Reading, Selection]:
    reading = read_file(SAMPLES / f"{name}.rulebook", reader=READER)
    assert reading.model is not None
    return reading, select(from_domains(reading.model), 2000, Terms(0))


def second(selection: Selection) -> float:
    return figure(selection.figures, "second look").simulated


# --- samples --------------------------------------------------------------------------------------


@pytest.mark.parametrize("name", DRAFTS)
def test_every_closure_of_a_sample_reads_back(name: str) -> None:
    """With a fresh reader, without a problem, with every comment; what was closed is gone."""
    reading, selection = sample(name)
    assert reading.model is not None
    fresh = make_reader()
    for each in selection.found:
        for closure in each.closures:
            if each.latitude.kind == "judgement":
                continue
            share = closure.percent.value if closure.percent is not None else 0.0
            after = closed(reading, Closing(closure.kind, each.latitude.id, closure.option, share), READER)
            again = read(after.text, "again.rulebook", reader=fresh)
            assert again.model is not None and not again.problems
            assert set(comments(reading.text)) <= set(comments(after.text))
            points = {point.general_id for point in build(again.model).branch_points.values()}
            if closure.kind == "mandate":
                assert each.latitude.id not in {*points, *(setting.name for setting in again.model.settings)}


def test_the_routes_are_those_promised() -> None:
    """Each closure of a sample, counted again from a file of its own."""
    reading, selection = sample("waste_heat")
    assert reading.model is not None
    before = count(build(reading.model), 30)
    promised = routes_left(reading, selection, 30)
    checked = 0
    fresh = make_reader()
    for each in selection.found:
        for closure in each.closures:
            paths = promised.get((each.latitude.id, closure.kind, closure.option))
            if paths is None:
                assert each.latitude.kind == "judgement"
                continue
            share = closure.percent.value if closure.percent is not None else 0.0
            subtracted = each.latitude.id == "efficiency"  # more efficient boilers would have burnt less
            closing = Closing(closure.kind, each.latitude.id, closure.option, share, subtracted)
            again = read(closed(reading, closing, READER).text, "again.rulebook", reader=fresh)
            assert again.model is not None and paths["exact"]
            if closure.behaviour != "pick of all":  # of the two deductions the table counts the second look's
                assert paths_json(count(build(again.model), 30)) == paths, closing
            assert paths["per_project_most"] <= before.per_project_most
            assert paths["over_periods_most"] <= before.over_periods_most
            checked += 1
    assert checked > 20
    for option in ("plate", "tested", "by_age"):  # three boilers, three options each
        assert promised["efficiency", "mandate", option]["on_paper"] * 27 <= before.on_paper


@pytest.mark.parametrize("name", DRAFTS)
def test_a_mandated_reference_leaves_what_the_table_says(name: str) -> None:
    reading = read_file(SAMPLES / f"{name}.rulebook", reader=READER)
    assert reading.model is not None
    projects = 2 * BLOCK
    selection = select(from_domains(reading.model), projects, Terms(3), closures=True)
    for each in selection.ranking[:5]:
        if each.latitude.kind not in ("choice", "setting") or each.latitude.id.count("/"):
            continue
        reference = each.latitude.candidates[each.latitude.reference]
        promised = next(one for one in each.closures if one.kind == "mandate" and one.option == reference)
        assert promised.whole_left is not None
        after = closed(reading, Closing("mandate", each.latitude.id, reference), READER)
        assert after.model is not None
        again = figure(select(from_domains(after.model), projects, Terms(3), closures=False).figures, "second look")
        error = math.hypot(promised.whole_left.error, again.simulated_error)
        assert abs(again.simulated - promised.whole_left.value) < 4 * error, each.latitude.id


# --- one choice: what is left is what was promised ------------------------------------------------

ONE = either_or([(-0.05, 0.3, 0), (0, 0.1, 1)]).replace("result", "periods 5\nresult").replace(
    "    choice by developer", "    # why there is a choice\n    choice by developer, open each period  # so far"
)


def promised(selection: Found, kind: str, option: str = "", behaviour: str = "") -> Closure:
    return next(
        each
        for each in selection.closures
        if each.kind == kind and each.option == option and behaviour in ("", each.behaviour)
    )


def test_mandate() -> None:
    stock = found(simulate(ONE, 4 * BLOCK, closures=True), "stock")
    for option, bias in (("way_1", -0.05), ("way_2", 0.0)):
        after = written(ONE, Closing("mandate", "stock", option))
        assert "choice" not in after.text.replace("One choice", "").replace("there is a choice", "")
        assert "    = amount" in after.text and comments(after.text) == comments(ONE)
        left = promised(stock, "mandate", option).left
        assert left.value == pytest.approx(bias, abs=1e-12)
        again = figure(simulate(after.text, 4 * BLOCK).figures, "mandated", "reference")
        assert abs(again.simulated - left.value) < 4 * again.simulated_error


def test_lowest() -> None:
    left = promised(found(simulate(ONE, 4 * BLOCK, closures=True), "stock"), "lowest").left
    after = written(ONE, Closing("lowest", "stock"))
    assert "    = min(stock_way_1, stock_way_2)" in after.text and comments(after.text) == comments(ONE)
    again = figure(simulate(after.text, 4 * BLOCK).figures, "mandated", "reference")
    assert left.value < -0.1
    assert abs(again.simulated - left.value) < 4 * again.simulated_error


def test_fixed() -> None:
    before = simulate(ONE, 4 * BLOCK, closures=True)
    left = promised(found(before, "stock"), "fixed")
    after = written(ONE, Closing("fixed", "stock"))
    assert "choice by developer, fixed at validation  # so far" in after.text
    again = next(each for each in simulate(after.text, 4 * BLOCK).periods if each.behaviour == "second look")
    assert again.anew["as written"].value == pytest.approx(left.left.value, abs=1e-12)
    assert left.stay is not None
    assert again.stay["as written"].value == pytest.approx(left.stay.value, abs=1e-12)


@pytest.mark.parametrize("behaviour", ["second look", "pick of all"])
@pytest.mark.parametrize("formula", ["stock", "5 * amount - stock"])
def test_deduct(behaviour: str, formula: str) -> None:
    """Also of an emission, to which it is added; the truth stays what it was."""
    text = ONE.replace("    = stock\n", f"    = {formula}\n")
    percent = promised(found(simulate(text, 4 * BLOCK, closures=True), "stock"), "deduct", "", behaviour).percent
    assert percent is not None and (percent.value > 0) == (formula == "stock")
    after = written(text, Closing("deduct", "stock", "", percent.value))
    sign = "-" if percent.value > 0 else "+"
    assert f"= (amount) * (1 {sign} stock_" in after.text and "not in reference" in after.text
    again = figure(simulate(after.text, 8 * BLOCK).figures, behaviour)
    assert abs(again.simulated) < 4 * again.simulated_error


@pytest.mark.parametrize("name", DRAFTS)
def test_a_deduction_in_a_sample_leaves_nothing(name: str) -> None:
    """Also for a choice for each element. Solved on the very projects that it is read back with, what is left is the
    rounding of the percentage; one from a formula is right for all projects, and these are a sample of them."""
    reading = read_file(SAMPLES / f"{name}.rulebook", reader=READER)
    assert reading.model is not None
    selection = select(from_domains(reading.model), BLOCK, Terms(3), closures=True)
    solved = 0
    for each in selection.found:
        for closure in each.closures:
            if closure.behaviour == "second look" and closure.percent is not None and closure.percent.value:
                after = closed(reading, Closing("deduct", each.latitude.id, "", closure.percent.value), READER)
                assert after.model is not None
                again = found(select(from_domains(after.model), BLOCK, Terms(3), closures=False), each.latitude.id)
                row = figure(again.figures, "second look")
                by_formula = closure.percent.error == 0
                slack = 4 * row.simulated_error if by_formula else 0.05 * row.simulated_error + 1e-5
                assert abs(row.simulated) < slack, each.latitude.id
                solved += 1
    assert solved >= 4


def test_deduct_where_there_is_no_formula_for_it() -> None:
    """A floor at zero makes the result no straight line: the deduction is solved for on simulated projects."""
    text = ONE.replace("    = stock\n", "    = max(0, stock - 0.7 * amount)\n")
    before = found(simulate(text, 4 * BLOCK, closures=True), "stock")
    closure = promised(before, "deduct", "", "second look")
    assert closure.percent is not None and closure.percent.error > 0
    assert figure(before.figures, "second look").simulated > 0.2
    after = written(text, Closing("deduct", "stock", "", closure.percent.value))
    again = figure(simulate(after.text, 4 * BLOCK).figures, "second look")
    assert abs(again.simulated) < 4 * math.hypot(again.simulated_error, closure.left.error)


def test_an_overlap_in_order() -> None:
    text = """rulebook "Overlap", draft "1"
result credits [t CO2e]
fact amount [t CO2e], 100 to 100
quantity credits [t CO2e]
    cases  # two hold
        when amount >= 100 [t CO2e]
            = amount
        when amount <= 100 [t CO2e]
            = 1.1 * amount
"""
    assert second(simulate(text, 1000)) == pytest.approx(0.1)
    after = written(text, Closing("in order", "credits"))
    assert "    cases in order  # two hold\n" in after.text
    assert second(simulate(after.text, 1000)) == 0
    assert count(build(model_of(after.text))).per_project_most == 1


# --- what hangs on a choice -----------------------------------------------------------------------

TIED = """rulebook "Tied", draft "1"
result credits [t CO2e]
fact amount [t CO2e], 100 to 100
fact wet, yes or no
quantity stock [t CO2e]
    choice by developer
        option rough, error 30 %
            = amount
        option fine, error 10 %, reference
            = amount
        option none, only when wet
            = 0 [t CO2e]
quantity share
    choice follows stock
        option rough
            # the rough one
            = 20 %
        option fine
            = 0
        option none
            = 1
quantity asked
    cases
        when stock takes none and wet
            = 1
        when stock takes none and not wet
            = 2
        otherwise
            cases in order
                when wet or stock takes rough
                    = 3
                when not (stock takes fine)
                    = 4
                otherwise
                    = 5
quantity credits [t CO2e]
    = stock * (1 - share) * asked
"""


def body(text: str, name: str) -> str:
    found_text = re.search(rf"^quantity {name}\b[^\n]*\n((?:    .*\n)*)", text, re.MULTILINE)
    assert found_text is not None
    return re.sub(r"\s+", " ", found_text[1]).strip()


def test_mandate_carries_what_follows_and_what_asks() -> None:
    rough = written(TIED, Closing("mandate", "stock", "rough")).text
    assert (body(rough, "share"), body(rough, "asked")) == ("# the rough one = 20 %", "= 3")
    fine = written(TIED, Closing("mandate", "stock", "fine")).text
    assert body(fine, "share") == "# the rough one = 0"
    assert body(fine, "asked") == "cases in order when wet = 3 otherwise = 5"
    none = written(TIED, Closing("mandate", "stock", "none")).text
    assert body(none, "share") == "# the rough one = 1"
    assert body(none, "asked").startswith("cases when wet = 1 when not wet = 2 otherwise")


def test_lowest_carries_what_follows_and_what_asks() -> None:
    text = written(TIED, Closing("lowest", "stock")).text
    assert body(text, "stock") == (
        "cases when wet = min(stock_rough, stock_fine, stock_none) otherwise = min(stock_rough, stock_fine)"
    )
    assert body(text, "share").startswith("cases in order when stock = stock_rough # the rough one = 20 %")
    assert "when stock = stock_none and wet" in text and "takes" not in text
    assert count(build(model_of(text))).per_project_most == 1


def test_what_cannot_be_closed_is_said_in_words(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    for closing, words in (
        (Closing("mandate", "stok"), "did you mean `stock`"),
        (Closing("mandate", "stock", "fin"), "did you mean `fine`"),
        (Closing("lowest", "asked"), "is no choice"),
        (Closing("in order", "stock"), "is no `cases`"),
    ):
        with pytest.raises(CannotClose, match=words):
            written(TIED, closing)
    file = tmp_path / "a.rulebook"
    file.write_text(TIED, encoding="utf-8")
    for words_given, says in (("mandat:stock", "did you mean `mandate`"), ("stock", "write KIND:BRANCH_POINT"),
                              ("fixed=3:stock", "takes no value"), ("deduct=much:stock", "no percentage")):  # fmt: skip
        assert main(["bias", str(file), "--write-closed", words_given]) == 2
        assert says in capsys.readouterr().err
    assert file.read_text(encoding="utf-8") == TIED


def test_the_command_writes_whole_files_and_only_where_asked(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    file, out = tmp_path / "a.rulebook", tmp_path / "b.rulebook"
    file.write_text(TIED, encoding="utf-8")
    assert main(["bias", str(file), "--write-closed", "mandate:stock"]) == 0
    assert capsys.readouterr().out == written(TIED, Closing("mandate", "stock")).text
    assert main(["bias", str(file), "--write-closed", "mandate=rough:stock", "-o", str(out)]) == 0
    assert "the reference is no longer in the text" in capsys.readouterr().err
    assert out.read_text(encoding="utf-8") == written(TIED, Closing("mandate", "stock", "rough")).text
    assert file.read_text(encoding="utf-8") == TIED
    assert sorted(each.name for each in tmp_path.iterdir()) == ["a.rulebook", "b.rulebook"]
    assert main(["bias", str(file), "-o", str(out)]) == 2
