"""What a choice, a setting or a judgement ``takes``: the same as the text that says it without."""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path

import pytest

from samesum.evidence.choosing.bench import Terms
from samesum.evidence.choosing.projects import from_batches
from samesum.evidence.choosing.selection import select
from samesum.evidence.given import read_given
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


PRESCRIBED = """setting share, 0 % to 20 %, by developer, takes 12 %
setting kind, one of plain or fancy, takes fancy
judgement way, "where so", by verifier, takes no
quantity credits [t], clause 5
    cases
        when way or kind is plain
            = amount
        otherwise
            = amount * (1 - share)
"""


@pytest.mark.parametrize(("form", "given"), [
    ("yaml", "cases:\n  - {name: one, amount: 20, wet: no, share: 12 %, way: no, kind: fancy}\n"),
    ("csv", "name,amount,wet,share,way,kind\none,20,no,0.12,no,fancy\n"),
])  # fmt: skip
def test_a_project_may_give_what_is_taken_anyway(form: str, given: str, tmp_path: Path) -> None:
    """The file of an open draft's projects is read for the closed one; the truth is as if they had not given it."""
    model = model_of(HEAD + PRESCRIBED)
    path = tmp_path / f"projects.{form}"
    path.write_text(given, encoding="utf-8")
    found, problems = read_given(path, model)
    assert problems == () and found is not None
    selection = select(from_batches(model, found.batches(model)), 10, Terms(0))
    second = next(each for each in selection.figures if each.behaviour == "second look")
    assert second.over_issuance == pytest.approx(-0.12)  # the truth: as it is read yes


@pytest.mark.parametrize(("form", "given", "line"), [
    ("yaml", "cases:\n  - name: one\n    amount: 20\n    wet: no\n    share: 13 %\n    way: yes\n    kind: plain\n", 5),
    ("csv", "name,amount,wet,share,way,kind\none,20,no,0.13,yes,plain\n", 2),
])  # fmt: skip
def test_a_project_that_gives_something_else_is_told_so(form: str, given: str, line: int, tmp_path: Path) -> None:
    path = tmp_path / f"projects.{form}"
    path.write_text(given, encoding="utf-8")
    _, problems = read_given(path, model_of(HEAD + PRESCRIBED))
    assert {each.says for each in problems} == {
        "the rulebook itself takes 12 % for `share` (its line 5)",
        "the rulebook itself takes no for `way` (its line 7)",
        "the rulebook itself takes fancy for `kind` (its line 6)",
    }
    assert problems[0].span.line == line and {each.remedy for each in problems} == {"leave it out"}


def test_a_worked_example_on_a_route_that_is_taken(tmp_path: Path) -> None:
    path = tmp_path / "projects.yaml"
    example = "cases:\n  - {{amount: 20, wet: no, expected: {{value: 60, route: {{stock: {}, asked: 2}}}}}}\n"
    path.write_text(example.format("rough"), encoding="utf-8")
    cases, problems = read_cases(path, model_of(text("takes rough")))
    assert problems == () and cases.cases[0].expected is not None
    assert cases.cases[0].expected.route == (("asked", "2"),)
    for header, option in (("takes rough", "fine"), ("takes lowest value", "rough")):
        path.write_text(example.format(option), encoding="utf-8")
        _, problems = read_cases(path, model_of(text(header)))
        says = f"the rulebook itself {header} at `stock`, and nobody chooses there"
        assert [(each.says, each.remedy) for each in problems] == [(says, "leave it out of the route")]


def test_the_lowest_of_many_that_are_open_only_sometimes() -> None:
    """2^20 sets of options can be open together; where none is, there is a gap."""
    facts = "".join(f"fact f{number}, yes or no, clause 1\n" for number in range(20))
    options = "".join(f"        option o{n}, only when f{n}\n            = {n + 1} * amount\n" for n in range(20))
    credits = f"quantity credits [t], clause 2\n    choice takes lowest value\n{options}"
    found = evidence_of(HEAD.replace("fact wet, yes or no\n", facts) + credits)
    assert found.counts.exact and found.counts.per_project_most == 1 and found.counts.reachable == 2**20 - 1
    assert gaps_of(found) == ["credits"]


def test_what_follows_the_lowest_always_has_a_branch() -> None:
    """Also where no solver can tell which is the lowest: one of them is."""
    found = evidence_of(
        """rulebook "Curved", draft "1"
result credits [t], rounded down to 1, clause 1
fact a, 1 to 10
quantity q, clause 2
    choice takes lowest value
        option x
            = exp(a / 5) * 3
        option y
            = a * ln(a + 1) + a
quantity credits [t], clause 3
    choice follows q
        option x
            = 1 [t]
        option y
            = 2 [t]
""",
        5.0,
    )
    assert gaps_of(found) == [] and found.counts.per_project_least == 1
