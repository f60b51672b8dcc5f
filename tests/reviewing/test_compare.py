"""Two drafts held against each other."""

from __future__ import annotations

from pathlib import Path

import pytest

from samesum.examine import examine_reading
from samesum.outputs.comparison import comparison_json, comparison_text
from samesum.outputs.page import Paper
from samesum.reading.read import read
from samesum.reviewing.compare import Comparison, compare
from samesum.reviewing.record import Record
from samesum.reviewing.rows import Register, register_of
from support.asking import reader

SAMPLES = Path(__file__).parents[2] / "sample_rulebooks"

# The branch points, settings and judgements that the repaired drafts close, read off the two texts side by side.
CLOSED = {
    "coastal_wetland": {
        "baseline_loss/2", "gwp_methane", "soil_gain", "elsewhere_carbon", "biomass_end", "biomass_start",
        "biomass_gain", "methane", "methane/2", "methane/3", "site_fuel", "displacement_factor",
        "uncertainty_deduction", "buffer", "buffer/otherwise", "search_radius", "reserve_share",
        "would_have_decayed", "insignificant", "room_to_migrate",
    },
    "waste_heat": {
        "boiler_loss", "capped_output", "common_practice", "efficiency", "flare_methane", "grid_factor",
        "heat_factor", "meter_drift", "metering_deduction", "past_mean", "similar_service",
        "tested_here", "would_be_wasted",
    },
    "woodland": {
        "baseline_carbon", "buffer", "carbon_fraction", "dead_wood", "density", "exposed", "fire_share",
        "litter", "little_scrub", "prudence", "root_share", "soil_carbon_loss", "thinning_loss/1",
        "tractor_emissions", "uncertainty_deduction",
    },
}  # fmt: skip


def register(text: str) -> Register:
    reading = read(text, "draft.rulebook", reader=reader())
    examined = examine_reading(reading, 60.0)
    assert examined.evidence is not None, examined.problems
    return register_of(examined.evidence, reading.text, Record(""), 60.0)


def sample(name: str) -> str:
    return (SAMPLES / f"{name}.rulebook").read_text(encoding="utf-8")


@pytest.mark.parametrize("name", sorted(CLOSED))
def test_each_sample_against_its_repaired_draft_lists_exactly_what_was_closed(name: str) -> None:
    found = compare(register(sample(name)), register(sample(f"{name}_repaired")))
    assert {row.id for row in found.closed} == CLOSED[name]
    assert found.opened == () and not found.grew
    back = compare(register(sample(f"{name}_repaired")), register(sample(name)))
    assert {row.id for row in back.opened} == CLOSED[name]
    assert back.closed == () and back.grew
    assert all(found.figures[figure] == back.figures[figure][::-1] for figure in found.figures)


@pytest.mark.parametrize("name", sorted([*CLOSED, "marsh_example", "every_fault"]))
def test_reordering_and_re_indenting_is_no_change(name: str) -> None:
    text = sample(name)
    found = compare(register(text), register(moved(text)))
    assert (found.added, found.removed, found.changed, found.growth) == ((), (), (), ())
    assert all(before == after for before, after in found.figures.values())


def moved(text: str) -> str:
    """The same declarations the other way round, moved in twice as far, with other blank lines and remarks."""
    head, *rest = blocks(text)
    return "\n".join([head, "", *(f"# moved\n\n{indented(block)}\n" for block in reversed(rest))])


def blocks(text: str) -> list[str]:
    found: list[str] = []
    for line in text.split("\n"):
        if line and not line[0].isspace() and not line.startswith("#"):
            found.append(line)
        elif line.strip() and not line.startswith("#"):
            found[-1] += "\n" + line
    return found


def indented(block: str) -> str:
    return "\n".join(" " * (len(line) - len(line.lstrip(" "))) + line for line in block.split("\n"))


DRAFT = """\
rulebook "Draft", draft "1"
result credits [t], rounded down to 1, clause 9
periods 2
fact depth [m], 0 to 10, clause 2
setting margin, 5 % to 20 %, by developer, clause 3
judgement near, "near the site", by verifier, clause 3
quantity stock [t], clause 4
    choice by developer, fixed at validation
        option tabled
            = 20 [t]
        option plots, only when near
            = 30 [t]
quantity loss [t], clause 5
    cases
        when depth < 5 [m]
            = 1 [t]
        when depth >= 5 [m]
            = 2 [t]
quantity credits [t], clause 9
    = stock * (1 - margin) - loss
"""


def changed(*pairs: tuple[str, str], allow: tuple[str, ...] = ()) -> Comparison:
    text = DRAFT
    for old, new in pairs:
        assert text.count(old) == 1
        text = text.replace(old, new)
    return compare(register(DRAFT), register(text), allow, 60.0)


@pytest.mark.parametrize(
    ("old", "new", "name", "says"),
    [
        ("fixed at validation", "open each period", "stock", "was fixed at validation"),
        (", only when near", "", "stock", "options without their condition: plots"),
        (
            "        option plots",
            "        option guess\n            = 9 [t]\n        option plots",
            "stock",
            "more options: guess",
        ),
        ("depth < 5 [m]", "depth <= 5 [m]", "loss", "two branches are open at once"),
        ("depth < 5 [m]", "depth < 4 [m]", "loss", "no result here now"),
        ("5 % to 20 %", "5 % to 25 %", "margin", "the values that may be set are more"),
        (
            "when depth < 5 [m]\n            = 1 [t]\n        when depth >= 5 [m]",
            "when depth < 50 [m] * margin\n            = 1 [t]\n        otherwise",
            "loss",
            "conditions that the developer can move",
        ),
    ],
)
def test_every_way_of_leaving_more_is_told(old: str, new: str, name: str, says: str) -> None:
    found = changed((old, new))
    assert found.grew
    assert any(each.name == name and says in each.says for each in found.growth), found.growth


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ("= 20 [t]", "= 21 [t]"),
        ("5 % to 20 %", "6 % to 20 %"),
        ("option tabled", "option from_the_table"),
        ("by verifier, clause 3", "by programme, clause 3"),
        ("depth < 5 [m]", "depth < 5.0 [m]"),
        ('"near the site"', '"close to the site"'),
    ],
)
def test_what_leaves_no_more_is_let_pass(old: str, new: str) -> None:
    assert not changed((old, new)).grew


FIGURED = (
    ("choice by developer, fixed at validation", "choice by developer, fixed at validation, errors correlated 0.5"),
    ("option tabled", "option tabled, error 35 %, bias 2 %, cost 0 [USD]"),
    ("option plots,", "option plots, error 8 %, cost 30 [USD],"),
)


def figured(old: str, new: str) -> Comparison:
    before = DRAFT
    for pair in FIGURED:
        assert before.count(pair[0]) == 1
        before = before.replace(*pair)
    assert before.count(old) == 1
    return compare(register(before), register(before.replace(old, new)), (), 60.0)


@pytest.mark.parametrize(
    ("old", "new", "says", "aspect"),
    [
        # sd of the difference at first: sqrt(0.35² + 0.08² - 2 · 0.5 · 0.35 · 0.08) = 0.3177
        ("error 8 %", "error 60 %", "estimates of tabled and plots lie further apart: the standard deviation of their "
         "difference is 52.2 %, not 31.8 %", ("option plots, error", "8 %", "60 %")),
        ("error 8 %", "error 1 %", "difference is 34.5 %, not 31.8 %", ("option plots, error", "8 %", "1 %")),
        ("error 8 %, ", "", "error of plots (8 %) is stated no longer", ("option plots, error", "8 %", "")),
        ("bias 2 %", "bias -3 %", "biases of tabled and plots lie further apart: 3 %, not 2 %",
         ("option tabled, bias", "2 %", "-3 %")),
        ("correlated 0.5", "correlated 0.2", "difference is 34.3 %, not 31.8 %", ("errors correlated", "50 %", "20 %")),
    ],
)  # fmt: skip
def test_estimates_that_lie_further_apart_leave_more(
    old: str, new: str, says: str, aspect: tuple[str, str, str]
) -> None:
    found = figured(old, new)
    [change] = found.changed
    assert change.aspects == (aspect,)
    assert found.grew and [each.name for each in found.growth] == ["stock"]
    assert says in found.growth[0].says


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ("error 8 %", "error 9 %"),  # the wider one is 35 %: a little more of the other brings them together
        ("bias 2 %", "bias -2 %"),  # as far from the other one as before
        ("bias 2 %, ", ""),
        ("cost 30 [USD]", "cost 3 [USD]"),
        ("correlated 0.5", "correlated 0.6"),
    ],
)
def test_estimates_that_lie_no_further_apart_are_listed_and_let_pass(old: str, new: str) -> None:
    found = figured(old, new)
    assert len(found.changed) == 1 and len(found.changed[0].aspects) == 1
    assert found.growth == ()


@pytest.mark.parametrize(
    ("old", "new", "now", "then"),
    [
        ((0.1, 0.1, 1), (0.1, 0.01, 1), "9 %", "0 %"),
        ((0.1, 0.2, 1), (0.2, 0.2, 1), "", ""),
        ((0.2, 0.2, 1), (0.1, 0.2, 1), "10 %", "0 %"),
        ((0.1, 0.2, 0.5), (0.1, 0.05, 0.4), "", ""),  # 17.3 %, then 9.2 %
        ((0.1, 0.2, -0.5), (0.1, 0.2, 0), "", ""),
        ((0.1, 0.2, 0), (0.1, 0.2, -0.5), "26.5 %", "22.4 %"),
        ((0.1, 0.2, 0), (0.1, 0.2000001, 0), "22.360688", "22.360679"),
        ((0, 0.1, 0.5), (0, 0.1, 0), "", ""),  # where one does not err, there is nothing to go together
    ],
)
def test_growth_is_how_far_two_estimates_lie_apart(
    old: tuple[float, float, float], new: tuple[float, float, float], now: str, then: str
) -> None:
    before, after = (
        register(
            DRAFT.replace("fixed at validation", f"fixed at validation, errors correlated {together}")
            .replace("option tabled", f"option tabled, error {first}")
            .replace("option plots", f"option plots, error {second}")
        )
        for first, second, together in (old, new)
    )
    says = [each.says for each in compare(before, after, (), 60.0).growth]
    if not now:
        assert says == []
    else:
        assert len(says) == 1 and "the estimates of tabled and plots lie further apart" in says[0]
        assert f"is {now}" in says[0] and f"not {then}" in says[0]


def test_of_several_pairs_any_that_lies_further_apart_counts() -> None:
    guess = "        option guess, error 50 %\n            = 9 [t]\n"
    third = DRAFT.replace("        option plots", f"{guess}        option plots")
    [growth] = compare(
        register(third.replace("option tabled", "option tabled, error 10 %")),
        register(third.replace("option tabled", "option tabled, error 20 %")),
        (),
        60.0,
    ).growth
    # 53.9 %, not 51 %, to guess; 20 %, not 10 %, to plots
    assert "estimates of tabled and guess lie further apart" in growth.says and "53.9 %, not 51 %" in growth.says


def test_an_option_put_in_the_place_of_another_counts_with_its_own_error() -> None:
    before = DRAFT.replace("option tabled", "option tabled, error 10 %")
    wider = compare(register(before), register(before.replace("tabled, error 10 %", "guess, error 30 %")), (), 60.0)
    assert "estimates of guess and plots lie further apart" in wider.growth[0].says
    assert not compare(register(before), register(before.replace("tabled", "guess")), (), 60.0).grew


def test_an_error_that_is_stated_at_last_is_no_growth() -> None:
    assert not changed(("option tabled", "option tabled, error 35 %")).grew
    other = DRAFT.replace("option plots", "option plots, error 8 %")
    found = compare(
        register(other), register(other.replace("error 8 %", "error 80 %").replace("tabled", "tabled, error 35 %"))
    )
    assert "estimates of tabled and plots" in found.growth[0].says


def test_having_a_result_is_not_called_growth() -> None:
    gap = ("depth < 5 [m]", "depth < 4 [m]")
    text = DRAFT.replace(*gap)
    mended = comparison_text([compare(register(text), register(DRAFT))], Paper(100, False))
    assert "One project, at least     0 → 2 (every project has a result now)" in mended
    assert "(grew)" not in mended and "leaves nothing more to anybody" in mended
    broken = comparison_text([changed(gap)], Paper(100, False))
    assert "One project, at least     2 → 0 (some projects have no result now)" in broken


def test_an_allowed_place_is_allowed_with_all_that_it_brings_about() -> None:
    more = ("        option plots", "        option guess\n            = 9 [t]\n        option plots")
    alone = changed(more)
    assert {each.name for each in alone.growth} == {"stock", "per_project_most", "developer_most", "over_periods_most"}
    allowed = changed(more, allow=("stock",))
    assert [(each.name, each.allowed) for each in allowed.growth] == [("stock", True)]
    assert not allowed.grew
    both = changed(more, ("depth < 5 [m]", "depth <= 5 [m]"), allow=("stock",))
    assert both.grew and "loss" in {each.name for each in both.growth if not each.allowed}


def test_a_change_names_what_differs_before_and_after() -> None:
    found = changed(("= 20 [t]", "= 21 [t]"), ("clause 5", "clause 5.1"))
    told = {change.after.id: change.aspects for change in found.changed}
    assert told == {
        "stock": (("option tabled", "= 20 [t]", "= 21 [t]"),),
        "loss": (("clause", "5", "5.1"),),
    }


TAKEN = """\
rulebook "Draft", draft "1"
result credits [t], rounded down to 1, clause 9
fact soil, one of wet or dry
setting margin, 5 % to 20 %, takes 12 %, clause 3
setting strip [kg], 5 to 20, takes 6, clause 3.1
setting method, one of simple or detailed, takes simple
judgement near, "near the site", takes yes, clause 3
quantity inner [t], clause 5
    cases
        when soil is wet
            choice takes lowest value
                option low
                    = 1 [t]
                option high
                    = 2 [t]
        otherwise
            = 3 [t]
quantity credits [t], clause 9
    choice takes fine
        option fine, error 10 %
            = (inner + strip) * (1 - margin)
        option rough, only when near and method is simple
            = inner
"""


@pytest.mark.parametrize(
    ("old", "new", "id", "before", "after"),
    [
        ("takes fine", "takes rough", "credits", "takes fine", "takes rough"),
        ("takes lowest", "takes highest", "inner/1", "takes lowest value", "takes highest value"),
        ("takes 12 %", "takes 20 %", "margin", "takes 12 %", "takes 20 %"),
        ("takes 12 %", "takes 12.0000001 %", "margin", "takes 12 %", "takes 12.0000001 %"),
        ("takes 6", "takes 7", "strip", "takes 6 kg", "takes 7 kg"),
        ("takes simple", "takes detailed", "method", "takes simple", "takes detailed"),
        ("takes yes", "takes no", "near", "takes yes", "takes no"),
    ],
)
def test_another_thing_that_is_taken_is_listed_and_leaves_nothing_more(
    old: str, new: str, id: str, before: str, after: str
) -> None:
    assert TAKEN.count(old) == 1
    found = compare(register(TAKEN), register(TAKEN.replace(old, new)), (), 60.0)
    [(was, now)] = found.taken
    assert (was.id, now.id, was.text, now.text) == (id, id, before, after)
    assert found.growth == ()
    text = comparison_text([found], Paper(100, False))
    assert f"{before} → {after}" in text and f"~ {id} (" in text
    assert "No branch point was added" not in text and "leaves nothing more" in text
    [listed] = comparison_json(found)["changed"]
    assert listed["branch_point"] == id and listed["who_decides"] == "nobody"
    assert listed["changes"] == [{"what": "what is taken", "before": before, "after": after}]


def test_the_same_value_in_other_words_is_nothing_else_that_is_taken() -> None:
    other = TAKEN.replace("takes 12 %", "takes 0.12").replace(
        "strip [kg], 5 to 20, takes 6", "strip [t], 0.005 to 0.02, takes 6 [kg]"
    )
    assert compare(register(TAKEN), register(other), (), 60.0).taken == ()


def test_what_somebody_decides_again_is_opened_and_not_said_to_take_something_else() -> None:
    found = compare(register(TAKEN), register(TAKEN.replace("choice takes fine", "choice by developer")), (), 60.0)
    assert found.taken == () and [row.id for row in found.opened] == ["credits"]


CONDITIONED = DRAFT.replace(
    "periods 2\n",
    "periods 2\nindex stratum, at most 3\nfact wide [m] per stratum, 0 to 9\nfact soil, one of wet, dry or bare\n"
    "constant limit [m] = 5\napplies when depth <= 8 [m]\n",
)


def conditioned(old: str, new: str, *others: tuple[str, str], text: str = CONDITIONED) -> Comparison:
    before = text.replace("only when near", f"only when {old}")
    after = text.replace("only when near", f"only when {new}")
    for other in others:
        assert other[0] in after
        after = after.replace(*other)
    return compare(register(before), register(after), (), 60.0)


@pytest.mark.parametrize(
    ("old", "new", "more"),
    [
        ("depth < 5 [m]", "depth < 6 [m]", True),
        ("depth < 5 [m]", "depth <= 5 [m]", True),
        ("depth < 5 [m]", "depth < 4 [m]", False),
        ("depth < 5 [m]", "depth < 500 [cm]", False),
        ("depth < 8.5 [m]", "depth < 9 [m]", False),  # the rulebook is for no project from 8 m on
        ("depth < 5 [m]", "depth > 5 [m]", True),
        ("near", "depth < 5 [m]", True),
        ("near", "near and depth < 5 [m]", False),
        ("near or soil is wet", "near or soil is not bare", True),
        ("soil is not bare", "soil is one of wet or dry", False),
        ("depth * (1 - margin) < 5 [m]", "depth * (1 - margin) < 6 [m]", True),
        ("depth < limit", "depth < 5 [m]", False),
        ("depth < limit", "depth < limit + 1 [m]", True),
        ("sum(wide over stratum) < 20 [m]", "sum(wide over stratum) < 21 [m]", True),
        ("sum(wide over stratum) < 20 [m]", "sum(wide over stratum) < 19 [m]", False),
        ("loss < 5 [t]", "loss < 6 [t]", None),
        ("10 [m] / depth < 5", "10 [m] / depth < 6", None),
    ],
)
def test_a_condition_that_changed_counts_when_it_lets_more_projects_through(
    old: str, new: str, more: bool | None
) -> None:
    found = conditioned(old, new)
    [change] = [each for each in found.changed if each.after.id == "stock"]
    assert change.wider == (("plots", more),)
    assert any("some projects have the option plots now" in each.says for each in found.growth) is (more is True)
    assert comparison_json(found)["changed"][0]["not_worked_out"] == ([] if more is not None else ["plots"])
    text = comparison_text([found], Paper(100, False))
    assert ("whether more projects have plots now was not worked out" in text) is (more is None)
    assert ("As far as was worked out" in text) is (more is None)


def test_a_condition_on_something_declared_otherwise_is_not_worked_out() -> None:
    for other in (("depth [m], 0 to 10", "depth [m], 0 to 9"), ("limit [m] = 5", "limit [m] = 6")):
        found = conditioned("depth < limit", "depth < limit and depth < 9 [m]", other)
        assert [each.wider for each in found.changed if each.after.id == "stock"] == [(("plots", None),)]


PER_STRATUM = CONDITIONED.replace("quantity stock [t],", "quantity stock [t] per stratum,").replace(
    "= stock *", "= sum(stock over stratum) *"
)
INSIDE = CONDITIONED.replace(
    """    choice by developer, fixed at validation
        option tabled
            = 20 [t]
        option plots, only when near
            = 30 [t]
""",
    """    cases
        when depth < 3 [m]
            choice by developer
                option tabled
                    = 20 [t]
                option plots, only when near
                    = 30 [t]
        otherwise
            = 9 [t]
""",
)


@pytest.mark.parametrize(
    ("text", "old", "new", "more"),
    [
        (PER_STRATUM, "wide < 5 [m]", "wide < 6 [m]", True),
        (PER_STRATUM, "wide < 5 [m]", "wide < 4 [m]", False),
        (INSIDE, "depth < 5 [m]", "depth < 4 [m]", False),
        (INSIDE, "depth < 5 [m]", "depth < 6 [m]", None),  # nobody who gets here is that deep
    ],
)
def test_a_condition_per_element_or_inside_another_branch(text: str, old: str, new: str, more: bool | None) -> None:
    found = conditioned(old, new, text=text)
    assert [each.wider for each in found.changed if each.wider] == [(("plots", more),)]
