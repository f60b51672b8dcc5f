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
from samesum.evidence.choosing.selection import Closure, Figure, Found, Selection, select
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
FEW = 2000


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
    return reading, select(from_domains(reading.model), FEW, Terms(0))


def second_row(selection: Selection) -> Figure:
    return figure(selection.figures, "second look")


def second(selection: Selection) -> float:
    return second_row(selection).simulated


# --- samples --------------------------------------------------------------------------------------


@pytest.mark.parametrize("name", DRAFTS)
def test_every_closure_of_a_sample_reads_back_and_leaves_what_the_table_says(name: str) -> None:
    """With a fresh reader, without a problem, with every comment; nobody decides any more what was closed, and what is
    over-issued is what the table promised.

    A rulebook that still holds the reference is simulated with the very errors that the table was made with: then the
    figures are the same to rounding. Where the reference is all that is left (``plain``), its errors are drawn under
    another name, so that the two differ by chance: four standard errors.
    """
    reading, selection = sample(name)
    assert reading.model is not None
    fresh = make_reader()
    for each in selection.found:
        for closure in each.closures:
            share = closure.percent.value if closure.percent is not None else 0.0
            closing = Closing(closure.kind, each.latitude.id, closure.option, share, each.latitude.leaning < 0)
            after = closed(reading, closing, READER)
            again = read(after.text, "again.rulebook", reader=fresh)
            assert again.model is not None and not again.problems
            assert set(comments(reading.text)) <= set(comments(after.text))
            left = {point.general_id for point in build(again.model).branch_points.values() if point.kind == "choice"}
            decided = {*left, *(setting.name for setting in again.model.settings if setting.takes is None)}
            decided |= {judgement.name for judgement in again.model.judgements if judgement.takes is None}
            if closure.kind in ("mandate", "lowest"):
                assert each.latitude.id not in decided
            if closure.kind in ("fixed", "deduct"):
                assert each.latitude.id in decided
            _leaves_what_was_promised(
                closure, each.latitude.id, select(from_domains(again.model), FEW, Terms(0), closures=False)
            )


def _leaves_what_was_promised(closure: Closure, id: str, selection: Selection) -> None:
    alone = next((each for each in selection.found if each.latitude.id == id), None)
    if closure.kind == "fixed":
        assert alone is not None
        periods = next(each for each in alone.periods if each.behaviour == closure.behaviour)
        assert periods.anew["fixed"].value == pytest.approx(closure.left.value, abs=1e-12)
        return
    if closure.kind == "deduct":
        assert alone is not None
        row = figure(alone.figures, closure.behaviour)
        by_formula = closure.percent is not None and closure.percent.error == 0
        # The text gives the percentage to three digits; one from a formula is right for all projects, not for these.
        slack = 4 * row.simulated_error if by_formula else 1e-5
        assert row.simulated == pytest.approx(closure.left.value, abs=slack), id
        return
    assert closure.whole_left is not None
    plain = (
        f"{closure.kind} of {closure.option}" if alone is None or alone.latitude.candidates == ("as stated",) else ""
    )
    whole = second_row(selection)
    slack = 4 * math.hypot(whole.simulated_error, closure.whole_left.error) if plain else 1e-12
    assert whole.simulated == pytest.approx(closure.whole_left.value, abs=slack), (id, closure.kind, closure.option)
    if alone is None:
        return
    row = next(each for each in alone.figures if each.behaviour == "mandated")
    slack = 4 * max(row.simulated_error, closure.left.error)  # a formula may stand for the simulation here
    assert row.simulated == pytest.approx(closure.left.value, abs=max(slack, 1e-12)), (id, closure.kind, closure.option)


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

ONE = (
    either_or([(-0.05, 0.3, 0), (0, 0.1, 1)])
    .replace("result", "periods 5\nresult")
    .replace(
        "    choice by developer", "    # why there is a choice\n    choice by developer, open each period  # so far"
    )
)


def promised(selection: Found, kind: str, option: str = "", behaviour: str = "") -> Closure:
    return next(
        each
        for each in selection.closures
        if each.kind == kind and each.option == option and behaviour in ("", each.behaviour)
    )


def test_mandate() -> None:
    stock = found(simulate(ONE, 4 * BLOCK, closures=True), "stock")
    reference = written(ONE, Closing("mandate", "stock", "way_2"))
    assert "choice" not in reference.text.replace("One choice", "").replace("there is a choice", "")
    assert "    = amount" in reference.text and comments(reference.text) == comments(ONE)
    other = written(ONE, Closing("mandate", "stock", "way_1"))
    assert "    choice takes way_1  # so far\n" in other.text and comments(other.text) == comments(ONE)
    for after, option, bias in ((other, "way_1", -0.05), (reference, "way_2", 0.0)):
        left = promised(stock, "mandate", option).left
        assert left.value == pytest.approx(bias, abs=1e-12)
        again = figure(simulate(after.text, 4 * BLOCK).figures, "mandated", "reference")
        assert abs(again.simulated - left.value) < 4 * again.simulated_error


def test_lowest() -> None:
    left = promised(found(simulate(ONE, 4 * BLOCK, closures=True), "stock"), "lowest").left
    after = written(ONE, Closing("lowest", "stock"))
    assert "    choice takes lowest value  # so far\n" in after.text and comments(after.text) == comments(ONE)
    again = figure(simulate(after.text, 4 * BLOCK).figures, "mandated", "reference")
    assert left.value < -0.1
    assert abs(again.simulated - left.value) < 4 * again.simulated_error


def test_the_lowest_keeps_the_correlation_of_the_errors() -> None:
    """Of two estimates that always err alike none is the lower; a rulebook that forgot it would lose credits."""
    text = either_or([(0, 0.1, 0), (0, 0.1, 1)]).replace(
        "choice by developer", "choice by developer, errors correlated 1"
    )
    after = written(text, Closing("lowest", "stock"))
    assert "choice takes lowest value, errors correlated 1\n" in after.text
    assert abs(second(simulate(after.text, BLOCK))) < 4 * second_row(simulate(after.text, BLOCK)).simulated_error
    assert second(simulate(after.text.replace(", errors correlated 1", ""), BLOCK)) < -0.05


def test_a_setting_and_a_judgement() -> None:
    text = """rulebook "Inputs", draft "1"
result credits [t CO2e]
fact amount [t CO2e], 100 to 100
setting share, 10 % to 20 %, by developer, clause 3  # how much
setting reach [km], 5 to 50, by programme
judgement exposed, "exposed sites", by verifier,
    clause 4
quantity credits [t CO2e]
    cases
        when exposed
            = amount * (1 - share)
        otherwise
            = amount * (1 - share) * 40 [km] / (reach + 10 [km])
"""
    middle = written(text, Closing("mandate", "share"))
    assert "constant share = 15 %, clause 3\n" in middle.text
    end = written(text, Closing("mandate", "share", "12.5 %"))
    assert "setting share, 10 % to 20 %, by developer, clause 3, takes 12.5 %  # how much\n" in end.text
    assert second(simulate(end.text, 1000)) == pytest.approx(0.875 / 0.85 - 1)
    far = written(text, Closing("mandate", "reach", "50 km"))
    assert "by programme, takes 50 [km]\n" in far.text
    read_no = written(far.text, Closing("mandate", "exposed", "no"), Closing("mandate", "share", "10 %"))
    assert "    clause 4, takes no\n" in read_no.text
    assert second(simulate(read_no.text, 1000)) == pytest.approx(0.9 * 40 / 60 / 0.85 - 1)
    assert count(build(model_of(read_no.text))).per_project_most == 1


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


def test_a_mandated_reference_carries_what_follows_and_what_asks() -> None:
    fine = written(TIED, Closing("mandate", "stock", "fine")).text
    assert body(fine, "share") == "# the rough one = 0"
    assert body(fine, "asked") == "cases in order when wet = 3 otherwise = 5"


def test_another_option_mandated_is_one_line_of_the_text() -> None:
    for option in ("rough", "none"):
        text = written(TIED, Closing("mandate", "stock", option)).text
        assert text == TIED.replace("choice by developer", f"choice takes {option}")
    text = written(TIED, Closing("lowest", "stock")).text
    assert text == TIED.replace("choice by developer", "choice takes lowest value")


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
    assert out.read_text(encoding="utf-8") == written(TIED, Closing("mandate", "stock", "rough")).text
    assert file.read_text(encoding="utf-8") == TIED
    assert sorted(each.name for each in tmp_path.iterdir()) == ["a.rulebook", "b.rulebook"]
    assert main(["bias", str(file), "-o", str(out)]) == 2


CLOSED = """rulebook "Closed", draft "1"
result credits [t CO2e]
fact amount [t CO2e], 100 to 100
setting share, 10 % to 20 %, by developer, takes 12 %, clause 3  # so much
judgement odd, "odd, takes long", by verifier, takes yes
quantity stock [t CO2e]
    choice takes fine, errors correlated 0.2  # now
        option rough, error 30 %
            = amount
        option fine, error 5 %, reference
            = amount
quantity credits [t CO2e]
    cases
        when odd
            = stock * (1 - share)
        otherwise
            = stock
"""


def test_what_is_closed_already_can_be_closed_otherwise() -> None:
    for closing, old, new in (
        (Closing("mandate", "share", "13 %"), "takes 12 %", "takes 13 %"),
        (Closing("mandate", "odd", "no"), "takes yes", "takes no"),
        (Closing("mandate", "stock", "rough"), "takes fine", "takes rough"),
        (Closing("lowest", "stock"), "takes fine", "takes lowest value"),
    ):
        assert written(CLOSED, closing).text == CLOSED.replace(old, new)
    for kind in ("fixed", "deduct"):
        with pytest.raises(CannotClose, match="nobody chooses at stock: the rulebook takes fine there"):
            written(CLOSED, Closing(kind, "stock"))
