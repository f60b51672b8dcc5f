"""What a choice, a setting or a judgement ``takes``: the same as the text that says it without."""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path

import pytest

from samesum.evidence.routes.listing import list_routes
from samesum.evidence.subjects.numbers import jumps
from samesum.evidence.trial.outcome import try_out
from samesum.graph import build
from samesum.outputs.verdict import decided
from samesum.reading.cases import read_cases
from samesum.reading.read import read
from samesum.reviewing.places import Source, places_of
from support.asking import dead_of, evidence_of, gaps_of, model_of, overlaps_of, reader

HEAD = """rulebook "Settled", draft "1"
result credits [t], rounded down to 1, clause 1
fact amount [t], 10 to 100
fact wet, yes or no
"""
PROJECTS = """cases:
  - name: small and wet
    amount: 12
    wet: yes
  - name: large and dry
    amount: 90
    wet: no
"""
CHOICE = """quantity stock [t], clause 2
    choice {header}
        option rough{rough}, error 30 %
            = amount + 5 [t]
        option fine{fine}, error 5 %, reference
            = 1.1 * amount
        option none{none}
            = 2 [t]
"""
SHARE = """quantity share, clause 3
    choice follows stock
        option rough
            = 20 %
        option fine
            = 10 %
        option none
            = 0
"""
ASKED = """quantity asked, clause 4
    cases
        when stock takes rough and wet
            = 1
        when stock takes none
            = 2
        otherwise
            = 3
"""
CREDITS = """quantity credits [t], clause 5
    = stock * (1 - share) * asked
"""


def text(header: str, rough: str = "", fine: str = "", none: str = "") -> str:
    return HEAD + CHOICE.format(header=header, rough=rough, fine=fine, none=none) + SHARE + ASKED + CREDITS


def by_hand(stock: str, share: str, asked: str, more: str = "") -> str:
    bodies = (("stock [t], clause 2", stock), ("share, clause 3", share), ("asked, clause 4", asked))
    return HEAD + "".join(f"quantity {head}\n{body}" for head, body in bodies) + more + CREDITS


def figures(rulebook: str, tmp_path: Path) -> list[float]:
    """Routes, lowest and highest result of each project."""
    model = model_of(rulebook)
    path = tmp_path / "projects.yaml"
    path.write_text(PROJECTS, encoding="utf-8")
    cases, problems = read_cases(path, model)
    assert problems == ()
    tried = try_out(build(model), cases.cases, 30.0)
    made: list[float] = []
    for number in range(len(cases.cases)):
        case = tried.case(number)
        assert case.lowest is not None and case.highest is not None
        made += [float(case.routes or 0), case.lowest.value, case.highest.value]
    return made


ROUGH = by_hand(
    "    = amount + 5 [t]\n",
    "    = 20 %\n",
    "    cases\n        when wet\n            = 1\n        otherwise\n            = 3\n",
)
ROUGH_WHERE_WET = by_hand(
    "    cases in order\n        when wet\n            = amount + 5 [t]\n"
    "        otherwise\n            = 1.1 * amount\n",
    "    cases\n        when wet\n            = 20 %\n        otherwise\n            = 10 %\n",
    "    cases\n        when wet\n            = 1\n        otherwise\n            = 3\n",
)
NONE_UNLESS_SMALL = by_hand(
    "    cases in order\n        when amount > 20 [t]\n            = 2 [t]\n"
    "        otherwise\n            = 1.1 * amount\n",
    "    cases\n        when amount > 20 [t]\n            = 0\n        otherwise\n            = 10 %\n",
    "    cases\n        when amount > 20 [t]\n            = 2\n        otherwise\n            = 3\n",
)
LOWEST = by_hand("    = min(amount + 5 [t], 1.1 * amount, 2 [t])\n", "    = 0\n", "    = 2\n")
HIGHEST_WITHOUT_NONE = by_hand(
    "    = max(amount + 5 [t], 1.1 * amount)\n",
    "    cases\n        when amount + 5 [t] <= 1.1 * amount\n            = 10 %\n"
    "        otherwise\n            = 20 %\n",
    "    cases in order\n        when amount + 5 [t] <= 1.1 * amount\n            = 3\n"
    "        when wet\n            = 1\n        otherwise\n            = 3\n",
)


@pytest.mark.parametrize(
    ("settled", "plain"),
    [
        pytest.param(text("takes rough"), ROUGH, id="an option"),
        pytest.param(text("takes rough", rough=", only when wet"), ROUGH_WHERE_WET, id="an option where it is open"),
        pytest.param(
            text("takes none", rough=", only when wet", none=", only when amount > 20 [t]"),
            NONE_UNLESS_SMALL,
            id="the reference where it is not",
        ),
        pytest.param(text("takes lowest value"), LOWEST, id="the lowest"),
        pytest.param(text("takes highest value"), HIGHEST_WITHOUT_NONE, id="the highest"),
    ],
)
def test_what_a_choice_takes(settled: str, plain: str, tmp_path: Path) -> None:
    """Every project gets the number of the text that says it without a choice, on one route; nobody decides."""
    assert figures(settled, tmp_path) == pytest.approx(figures(plain, tmp_path))
    for each in (settled, plain):
        found = evidence_of(each)
        assert found.counts.exact and found.counts.per_project_most == 1 and found.counts.developer_most == 1
        assert not gaps_of(found) and not overlaps_of(found)
        assert {point.kind for point in found.graph.branch_points.values()} <= {"cases", "cases in order"}


def test_the_lowest_of_what_is_open(tmp_path: Path) -> None:
    """Elsewhere the rulebook has no number: a gap."""
    found = text("takes lowest value", rough=", only when wet", fine=", only when wet", none=", only when wet")
    evidence = evidence_of(found.replace(SHARE, "").replace(ASKED, "").replace("* (1 - share) * asked", "* 1"))
    assert gaps_of(evidence) == ["stock"]


def test_what_follows_a_follower(tmp_path: Path) -> None:
    """It goes with what the first of the row takes, and so does who asks one of them."""
    follower = SHARE.replace("share, clause 3", "discount, clause 6").replace("follows stock", "follows share")
    asked = ASKED.replace("stock takes", "discount takes")
    for header, plain in (("takes rough", ROUGH), ("takes lowest value", LOWEST)):
        settled = HEAD + CHOICE.format(header=header, rough="", fine="", none="") + SHARE + follower + asked + CREDITS
        settled = settled.replace("(1 - share)", "(1 - discount)")
        assert figures(settled, tmp_path) == pytest.approx(figures(plain, tmp_path))
        found = evidence_of(settled)
        assert found.counts.per_project_most == 1 and not gaps_of(found)


LEAST_OF_TWO = """quantity stock [t], clause 2
    choice takes lowest value
        option rough, only when amount > 20 [t]
            = 1 [t] * sqrt(amount / 1 [t] - 20)
        option fine
            = 1.1 * amount
quantity credits [t], clause 5
    cases
        when stock takes rough
            = stock
        otherwise
            = 2 * stock
"""


def test_an_option_that_is_not_open_need_not_have_a_number(tmp_path: Path) -> None:
    """Nor is it worked out when something asks which was the lowest."""
    plain = """quantity credits [t], clause 5
    cases in order
        when amount > 20 [t]
            = 1 [t] * sqrt(amount / 1 [t] - 20)
        otherwise
            = 2.2 * amount
"""
    assert figures(HEAD + LEAST_OF_TWO, tmp_path) == pytest.approx(figures(HEAD + plain, tmp_path))
    found = evidence_of(HEAD + LEAST_OF_TWO)
    assert found.counts.per_project_least == found.counts.per_project_most == 1
    assert not gaps_of(found)


def test_where_nothing_is_open_nobody_knows_which_was_the_lowest() -> None:
    """A project of which `applies when` asks that is outside, as it is with a choice that somebody makes."""
    stock = LEAST_OF_TWO.replace("option fine", "option fine, only when wet")
    counts = evidence_of(f"{HEAD}{stock}applies when not stock takes rough\n").counts
    assert (counts.per_project_least, counts.per_project_most) == (1, 1)


def test_per_element_and_nested() -> None:
    """Each element has its own lowest; a choice inside an option stays one, under its own name."""
    found = evidence_of(
        """rulebook "Elements", draft "1"
result credits [t], rounded down to 1, clause 1
index plot, at most 3
fact amount [t] per plot, 10 to 100
quantity stock [t] per plot, clause 2
    choice takes lowest value
        option rough
            choice by developer
                option first
                    = amount
                option second
                    = 1.2 * amount
        option fine
            = 1.1 * amount
quantity credits [t], clause 5
    = sum(stock over plot)
"""
    )
    assert found.counts.per_project_most == 2**3
    assert {point.general_id for point in found.graph.branch_points.values()} == {"stock/rough"}


def test_what_is_decided_inside_keeps_its_id(tmp_path: Path) -> None:
    """So that a case, a review and the simulation mean the same place before and after an option is mandated."""
    stock = """quantity stock [t], clause 2
    choice {}
        option rough
            choice by developer
                option first
                    = amount
                option second
                    = table_value(amount)
        option fine
            = 1.1 * amount
"""
    table = "table table_value [t], amount\n    up to 50 = 12\n"
    for header in ("takes rough", "takes lowest value"):
        found = evidence_of(HEAD + table + stock.format(header) + "quantity credits [t], clause 5\n    = stock\n")
        assert {point.general_id for point in found.graph.branch_points.values()} == {"stock/rough"}
        assert gaps_of(found) == ["stock/rough"]


def test_settings_and_judgements(tmp_path: Path) -> None:
    settled = """setting share, 10 % to 20 %, by developer, takes 12 %
setting method, one of simple or detailed, takes detailed
setting strict, yes or no, by programme, takes no
judgement exposed, "exposed sites", by verifier, takes yes
table factor by method, clause 3, source "Table 2"
    simple = 1
    detailed = 1.25
quantity credits [t], clause 5
    cases
        when exposed and method is detailed and not strict
            = amount * (1 - share) * factor(method)
        otherwise
            = 0
"""
    plain = HEAD + "quantity credits [t], clause 5\n    = amount * 1.1\n"
    assert figures(HEAD + settled, tmp_path) == pytest.approx(figures(plain, tmp_path))
    found = evidence_of(HEAD + settled)
    assert found.counts.per_project_most == 1
    assert not found.graph.branch_points and not found.graph.model.settings


@pytest.mark.parametrize(
    ("line", "says", "remedy"),
    [
        ("    choice takes rouhg", "`rouhg` is no option of this choice", "did you mean `rough`?"),
        ("    choice takes lowest", "`lowest` is no option of this choice", "write `choice takes lowest value`"),
        ("    choice takes the lowest", "`the lowest` is nothing that a choice can take",
         "write one of its options, `lowest value` or `highest value`"),
        ("    choice takes rough, open each period",
         "`open each period` does not belong to a choice that takes one option",
         "it may have `errors correlated …`"),
    ],
)  # fmt: skip
def test_what_no_choice_can_take(line: str, says: str, remedy: str) -> None:
    found = read(text("by developer").replace("    choice by developer", line), "test.rulebook", reader=reader())
    assert [(each.says, each.remedy) for each in found.problems] == [(says, remedy)]


@pytest.mark.parametrize(
    ("line", "says"),
    [
        ("setting share, 10 % to 20 %, takes 25 %", "this value is outside the domain"),
        ("setting share, 10 % to 20 %, takes much", "`much` is no number"),
        ("setting way, one of short or long, takes shot", "`shot` is none of its values"),
        ('judgement odd, "where odd", takes perhaps', "`perhaps` is none of its values"),
    ],
)
def test_what_nothing_can_take(line: str, says: str) -> None:
    found = read(f"{HEAD}{line}\nquantity credits [t]\n    = amount\n", "test.rulebook", reader=reader())
    assert [each.says for each in found.problems] == [says]
    assert found.problems[0].span.line == 5


def test_only_what_is_written_is_shown() -> None:
    """Which options were open is asked by quantities that nobody wrote; no list shows them, and of sets of options
    that are never open together no branch is called dead."""
    found = text("takes lowest value", rough=", only when wet", fine=", only when not wet", none=", only when wet")
    evidence = evidence_of(found)
    assert dead_of(evidence) == [("asked", "1")]  # where it is wet, `none` is always the lower one
    assert gaps_of(evidence) == []
    shown = {point.id for point in evidence.graph.branch_points.values() if point.is_written}
    assert shown == {"stock", "share", "asked"}
    assert set(places_of(evidence.graph, Source.of(found))) == shown | {"amount", "wet", "credits"}
    [route] = list_routes(evidence.graph, {"wet": True, "amount": Fraction(20)}, 5).first
    assert route == (("stock", "rough and none"), ("share", "none"), ("asked", "2"))
    assert decided(evidence)["total"] == 3
    assert [each.name for each in jumps(evidence, 5.0)] == []
