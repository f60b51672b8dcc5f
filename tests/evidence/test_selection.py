"""The simulation of choice: worked out rightly, whatever the rulebook holds; the same bytes whoever works on it."""

from __future__ import annotations

import json
import math
import os
import subprocess
import sys
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest

from samesum.cli.main import main
from samesum.evidence.choosing.batches import batches_of
from samesum.evidence.choosing.bench import Terms, draw_errors
from samesum.evidence.choosing.closed_forms import Noise, indifferent, pick_of_all, second_look
from samesum.evidence.choosing.over_issuing import over_issuing
from samesum.evidence.choosing.programs import make_program
from samesum.evidence.choosing.projects import (
    BLOCK,
    CannotDraw,
    Projects,
    from_batches,
    from_domains,
    projects_of,
    stretches,
    truth,
)
from samesum.evidence.choosing.selection import select
from samesum.evidence.choosing.simulate import evaluate
from samesum.evidence.routes.witness import Value
from samesum.evidence.subjects.pointwise import Calculation, NoValue
from samesum.graph import build
from samesum.reading import model as m
from samesum.reading.cases import Case, read_cases
from samesum.reading.read import read_file
from samesum.spans import START
from support.choosing import either_or, figure, found, model_of, simulate, supply

SAMPLES = Path(__file__).parents[2] / "sample_rulebooks"
DRAFTS = ("coastal_wetland", "waste_heat", "woodland", "marsh_example")


def sample(name: str) -> m.Model:
    model = read_file(SAMPLES / f"{name}.rulebook").model
    assert model is not None
    return model


# --- worked out rightly ---------------------------------------------------------------------------


def as_inputs(model: m.Model, projects: Projects, row: int) -> dict[str, Value]:
    """One simulated project as exact values by name and element."""
    values: dict[str, Value] = {}
    domains = {each.name: each.domain for each in (*model.facts, *model.settings)}
    for name, column in projects.inputs.items():
        domain = domains.get(name.partition("@")[0], m.YesNo())
        found_value = column[row]
        if isinstance(domain, m.OneOf):
            values[name] = domain.values[int(found_value)]
        elif isinstance(domain, m.YesNo):
            values[name] = bool(found_value)
        else:
            values[name] = Fraction(float(found_value))
    return values


@pytest.mark.parametrize("name", DRAFTS)
def test_the_truth_is_the_reference_route(name: str) -> None:
    """Against the exact calculation of one project at a time, which shares no code with the arrays."""
    model = sample(name)
    drawn = from_domains(model)
    projects = projects_of(drawn, stretches(drawn, 40)[0], 3)
    program = projects.program
    credits = np.broadcast_to(evaluate(program, projects.inputs, truth(program))[program.result], (40,))
    graph = build(model)
    assert model.result is not None
    for row in range(40):
        exact = Calculation(graph, as_inputs(model, projects, row)).quantity(model.result.name)
        assert credits[row] == pytest.approx(float(exact), rel=1e-9)


def test_the_cases_of_a_sample_come_out_as_their_annex_says() -> None:
    """The worked examples of the samples, on the reference route, through the simulation's own arrays."""
    for name, value in (("coastal_wetland", 15881.69393), ("waste_heat", 49371.5412)):
        model = sample(name)
        cases, problems = read_cases(SAMPLES / f"{name}.cases.yaml", model)
        assert not problems
        given = from_batches(model, batches_of(model, [cases.cases[0]]))
        source = given.sources[0]
        world = truth(source.program)
        if name == "coastal_wetland":  # the annex takes the fifth report, which nobody calls the reference
            world = type(world)({"gwp_methane": 1}, world.inputs)
        found_value = np.broadcast_to(evaluate(source.program, source.inputs, world)[source.program.result], (1,))[0]
        assert found_value == pytest.approx(value, rel=1e-7)


def test_a_case_outside_or_without_a_result_is_left_out_and_said() -> None:
    model = sample("coastal_wetland")
    cases, _ = read_cases(SAMPLES / "coastal_wetland.cases.yaml", model)
    given = from_batches(model, batches_of(model, cases.cases))
    assert (given.cases, given.outside, given.without_result) == (5, 0, 1)
    selection = select(given, 400, Terms(0), closures=False)
    assert selection.projects == 400
    with pytest.raises(CannotDraw, match="none of the projects"):
        from_batches(model, batches_of(model, [case for case in cases.cases if case.name == "Curlew Reach"]))


def test_each_given_project_counts_alike() -> None:
    """100 and 300 t in turn, one option, no error: the truth of all is their mean."""
    text = either_or([(0, 0.1, 0), (0, 0.1, 0)]).replace("1000 to 1000", "0 to 1000")
    model = model_of(text)
    cases = [Case(name, {"amount": Fraction(value)}, None, START) for name, value in (("a", 100), ("b", 300))]
    given = from_batches(model, batches_of(model, cases))
    blocks = [projects_of(given, each, 0) for each in stretches(given, 10)]
    assert sum(float(block.inputs["amount"].sum()) for block in blocks) == 2000


# --- what a rulebook can hold ---------------------------------------------------------------------


def test_a_choice_for_each_element_errs_and_is_decided_element_by_element() -> None:
    """Three strata of equal size: three choices, each a third of the result; the mean is that of one."""
    text = """rulebook "Strata", draft "1"
result credits [t CO2e]
index stratum, at most 3
fact amount [t CO2e] per stratum, 100 to 100
quantity stock [t CO2e] per stratum
    choice by developer
        option rough, error 30 %, cost 0 [USD]
            = amount
        option fine, error 10 %, cost 5 [USD], reference
            = amount
quantity credits [t CO2e]
    = sum(stock over stratum)
"""
    selection = simulate(text, 4 * BLOCK)
    stock = found(selection, "stock")
    for behaviour, value in (("second look", 0.119682684), ("pick of all", 0.126156626)):
        row = figure(stock.figures, behaviour)
        assert row.closed_form == pytest.approx(value, abs=1e-8)
        assert abs(row.simulated - value) < 4 * row.simulated_error
    # Decided apart, the three errors average out: the scatter is that of one choice over the root of three.
    assert figure(stock.figures, "mandated", "rough").simulated_error == pytest.approx(
        0.3 / math.sqrt(3 * 4 * BLOCK), rel=0.03
    )


def test_what_follows_is_carried_along() -> None:
    """What follows the choice takes the same option: a deduction of 20 % with the rough one, none with the fine one.
    E[max(0.8 (1 + e_d), 1 + e_m)] by the formula for two options of biases −20 % and 0, errors 24 % and 10 %."""
    text = """rulebook "Follows", draft "1"
result credits [t CO2e]
fact amount [t CO2e], 100 to 100
quantity stock [t CO2e]
    choice by developer
        option rough, error 30 %, cost 0 [USD]
            = amount
        option fine, error 10 %, cost 5 [USD], reference
            = amount
quantity share
    choice follows stock
        option rough
            = 20 %
        option fine
            = 0
quantity credits [t CO2e]
    = stock * (1 - share)
"""
    stock = found(simulate(text, 8 * BLOCK), "stock")
    options = Noise(-0.2, 0.24), Noise(0, 0.1)
    for behaviour, value in (
        ("pick of all", pick_of_all(options)),
        ("second look", second_look(*options).over_issuance),
        ("indifferent", indifferent(options)),
    ):
        row = figure(stock.figures, behaviour)
        assert row.closed_form is None, "something asks which option was taken"
        assert abs(row.simulated - value) < 4 * row.simulated_error
    assert abs(figure(stock.figures, "mandated", "rough").simulated + 0.2) < 0.01


NESTED = """rulebook "Nested", draft "1"
result credits [t CO2e]
fact amount [t CO2e], 100 to 100
quantity stock [t CO2e]
    choice by developer
        option rough, error 30 %, cost 0 [USD]
            = amount
        option measured, cost 5 [USD], reference
            choice by developer
                option field, error 20 %, cost 1 [USD]
                    = amount
                option laboratory, error 5 %, cost 9 [USD], reference
                    = amount
quantity credits [t CO2e]
    = stock
"""


def test_a_choice_inside_an_option() -> None:
    """Picked altogether, the best of three independent estimates counts: the formula for three options."""
    selection = simulate(NESTED, 8 * BLOCK)
    best = pick_of_all([Noise(0, 0.3), Noise(0, 0.2), Noise(0, 0.05)])
    row = figure(selection.figures, "pick of all")
    assert abs(row.simulated - best) < 4 * row.simulated_error
    inner = figure(found(selection, "stock/measured").figures, "pick of all")
    assert inner.closed_form == pytest.approx(pick_of_all([Noise(0, 0.2), Noise(0, 0.05)]), abs=1e-9)
    assert abs(inner.simulated - inner.closed_form) < 4 * inner.simulated_error


def test_values_readings_and_overlaps_go_the_developers_way() -> None:
    """A free value at the end that credits most, a reading as yes or no, an overlap at its larger branch; against the
    middle, yes, and the first: 0.95/0.9, 1.2/1, 110/100."""
    text = """rulebook "Free", draft "1"
result credits [t CO2e]
fact amount [t CO2e], 100 to 100
setting discount, 5 % to 15 %, by developer
setting levy, 0 % to 10 %, by programme
judgement strict, "where appropriate", by developer
quantity factor
    cases
        when strict
            = 1
        when not strict
            = 1.2
quantity stock [t CO2e]
    cases
        when amount >= 100 [t CO2e]
            = amount
        when amount <= 100 [t CO2e]
            = 1.1 * amount
quantity credits [t CO2e]
    = stock * factor * (1 - discount) * (1 - levy)
"""
    selection = simulate(text, 1000)
    for id, value in (("discount", 0.95 / 0.9), ("strict", 1.2), ("stock", 1.1), ("levy", 1 / 0.95)):
        for behaviour in ("second look", "pick of all"):
            assert figure(found(selection, id).figures, behaviour).simulated == pytest.approx(value - 1, abs=1e-12)
    # Together: all of the developer's; what the programme sets stays where it is.
    together = 0.95 / 0.9 * 1.2 * 1.1 - 1
    for behaviour in ("second look", "pick of all"):
        assert figure(selection.figures, behaviour).simulated == pytest.approx(together, abs=1e-12)
    assert figure(selection.figures, "mandated", "reference").simulated == 0
    assert [each.latitude.id for each in selection.ranking] == ["strict", "stock", "discount", "levy"]


def test_an_option_that_leaves_out_is_worked_out_by_its_own_formula() -> None:
    """An emission of 20 of 100, left out for nothing: 25 % too much for all who may."""
    text = """rulebook "Left out", draft "1"
result credits [t CO2e]
fact amount [t CO2e], 100 to 100
fact small, yes or no
quantity emission [t CO2e]
    choice by developer
        option counted, reference
            = 20 [t CO2e]
        option left_out, only when small
            = 0 [t CO2e]
quantity credits [t CO2e]
    = amount - emission
"""
    selection = simulate(text, 4 * BLOCK)
    row = figure(selection.figures, "pick of all")
    assert abs(row.simulated - 0.125) < 4 * row.simulated_error
    assert row.over_credited == pytest.approx(0.5, abs=0.02)
    assert figure(selection.figures, "mandated", "reference").simulated == 0


def test_correlations_are_those_stated() -> None:
    for count, rho in ((2, -0.7), (3, -0.4), (4, 0.6), (3, 1.0)):
        program = make_program(model_of(either_or([(0.1, 0.2, 0)] * count, rho)))
        drawn = draw_errors(program, 1, 0, 200_000, "error")
        matrix = np.corrcoef([drawn["stock", number] for number in range(count)])
        assert np.allclose(matrix[~np.eye(count, dtype=bool)], rho, atol=0.01)
        assert np.allclose([drawn["stock", number].std() for number in range(count)], 0.2, rtol=0.01)
        assert np.allclose([drawn["stock", number].mean() for number in range(count)], 0.1, atol=0.003)


def test_a_price_makes_the_cost_count() -> None:
    """A credit's price of 50 with a cost of 10 000 for 1000 true credits: 0.2 in credits."""
    text = either_or([(0, 0.3, 0), (0, 0.1, 10)])
    for price, c in ((None, 0.0), (50.0, 0.2), (1.0, 10.0)):
        row = figure(simulate(text, 4 * BLOCK, price=price).figures, "second look")
        assert row.closed_form == pytest.approx(second_look(Noise(0, 0.3), Noise(0, 0.1, c)).over_issuance, abs=1e-9)
        assert abs(row.simulated - row.closed_form) < 4 * row.simulated_error


def test_the_cheapest_is_tried_first_however_it_is_written() -> None:
    lines = either_or([(0, 0.3, 0), (0, 0.1, 5)])
    turned = lines.replace("cost 0 [USD]", "cost 9000 [USD]")
    assert figure(simulate(lines).figures, "second look").closed_form == pytest.approx(0.119682684, abs=1e-8)
    swapped = second_look(Noise(0, 0.1), Noise(0, 0.3)).over_issuance
    assert figure(simulate(turned).figures, "second look").closed_form == pytest.approx(swapped, abs=1e-9)


def test_periods() -> None:
    """Four periods of one either/or choice, errors anew: fixed at validation, three of the four have no selection in
    them. Errors that stay: what was tried is known from the second period on, which only adds."""
    text = (
        either_or([(0, 0.3, 0), (0, 0.1, 0)])
        .replace("result", "periods 4\nresult")
        .replace("choice by developer", "choice by developer, open each period")
    )
    selection = simulate(text, 8 * BLOCK)
    second = next(each for each in selection.periods if each.behaviour == "second look")
    one = second_look(Noise(0, 0.3), Noise(0, 0.1)).over_issuance
    assert abs(second.anew["as written"].value - one) < 4 * second.anew["as written"].error
    assert abs(second.anew["all fixed"].value - one / 4) < 4 * second.anew["all fixed"].error
    assert abs(second.stay["all fixed"].value - one) < 4 * second.stay["all fixed"].error
    assert second.stay["as written"].value > second.stay["all fixed"].value
    fixed = text.replace("open each period", "fixed at validation")
    again = next(each for each in simulate(fixed, 8 * BLOCK).periods if each.behaviour == "second look")
    assert again.anew["as written"] == second.anew["all fixed"]


def test_a_stated_error_of_a_formula_and_a_deduction_outside_the_reference() -> None:
    text = """rulebook "Stated", draft "1"
result credits [t CO2e]
fact amount [t CO2e], 100 to 100
constant deduction = 10 %, not in reference
quantity stock [t CO2e], error 20 %, bias 5 %
    = amount
quantity credits [t CO2e]
    = stock * (1 - deduction)
"""
    selection = simulate(text, 4 * BLOCK)
    row = figure(selection.figures, "mandated", "reference")
    assert abs(row.simulated - (1.05 * 0.9 - 1)) < 4 * row.simulated_error
    assert row.simulated_error == pytest.approx(0.2 * 0.9 / math.sqrt(4 * BLOCK), rel=0.05)
    assert abs(figure(found(selection, "stock").figures, "mandated", "as stated").simulated - 0.05) < 0.01


# --- drawing --------------------------------------------------------------------------------------


def test_facts_are_drawn_as_declared() -> None:
    text = """rulebook "Drawn", draft "1"
result credits [t CO2e]
fact flat [t CO2e], 100 to 300
fact bell [t CO2e], 0 to 400, mean 100 spread 80
fact free [t CO2e], mean 50 spread 5
fact kind, one of oak, elm or ash
fact wet, yes or no
fact part [t CO2e], 0 to 300
applies when part <= flat
applies when wet or flat < 200 [t CO2e]
table extra [t CO2e] by kind
    oak = 1
    elm = 2
    ash = 3
quantity credits [t CO2e]
    = flat + bell + free + extra(kind) + part
"""
    drawn = supply(text)
    inputs = projects_of(drawn, stretches(drawn, BLOCK)[0], 5).inputs
    flat, bell, part = inputs["flat"], inputs["bell"], inputs["part"]
    assert flat.min() >= 100 and flat.max() <= 300
    assert bell.min() >= 0 and bell.max() <= 400
    # A normal cut off at 0 and 400: mean 100 + 80 (φ(−1.25) − φ(3.75)) / (Φ(3.75) − Φ(−1.25)).
    assert bell.mean() == pytest.approx(116.33, abs=4 * bell.std() / math.sqrt(BLOCK))
    assert inputs["free"].std() == pytest.approx(5, rel=0.03)
    assert np.all(part <= flat) and np.all(inputs["wet"] | (flat < 200))
    assert np.bincount(inputs["kind"]) / BLOCK == pytest.approx([1 / 3] * 3, abs=0.02)


def test_what_cannot_be_drawn_is_said_in_words() -> None:
    unbounded = either_or([(0, 0.1, 0), (0, 0.1, 0)]).replace(", 1000 to 1000", "")
    with pytest.raises(CannotDraw, match="amount may be any number"):
        supply(unbounded)
    impossible = either_or([(0, 0.1, 0), (0, 0.1, 0)]).replace("result", "applies when amount > 2000 [t CO2e]\nresult")
    with pytest.raises(CannotDraw, match="applies when"):
        simulate(impossible, 10)


# --- the same bytes -------------------------------------------------------------------------------


def test_the_same_on_one_core_and_on_two() -> None:
    model = sample("marsh_example")
    one, two = (select(from_domains(model), 3 * BLOCK + 17, Terms(7, 20.0, 1.0), jobs) for jobs in (1, 2))
    assert (one.figures, one.found, one.periods) == (two.figures, two.found, two.periods)


def test_the_same_bytes_with_another_hash_seed() -> None:
    words = [sys.executable, "-m", "samesum", "bias", str(SAMPLES / "waste_heat.rulebook"), "--json"]
    words += ["--projects", "20000", "--seed", "5", "--join", "1", "--price", "12"]
    outputs = []
    for hash_seed, jobs in (("0", "1"), ("1", "2"), ("4711", "1")):
        environment = {**os.environ, "PYTHONHASHSEED": hash_seed}
        done = subprocess.run([*words, "--jobs", jobs], capture_output=True, env=environment, check=True)
        outputs.append(done.stdout)
    assert outputs[0] == outputs[1] == outputs[2]
    assert json.loads(outputs[0])["seed"] == 5


def test_another_seed_gives_other_numbers_that_agree() -> None:
    text = either_or([(0, 0.3, 0), (0, 0.1, 0)])
    a, b = (figure(simulate(text, 4 * BLOCK, seed=seed).figures, "second look") for seed in (1, 2))
    assert a.simulated != b.simulated
    assert abs(a.simulated - b.simulated) < 4 * math.hypot(a.simulated_error, b.simulated_error)


def test_other_names_in_the_file_leave_a_choices_numbers_alone() -> None:
    """Streams are keyed by name: a second choice beside it does not move the first one's draws."""
    alone = either_or([(0, 0.3, 0), (0, 0.1, 0)])
    beside = alone.replace(
        "quantity credits [t CO2e]\n    = stock",
        "quantity other [t CO2e]\n    choice by developer\n        option a, error 10 %\n            = amount\n"
        "        option b, error 5 %, reference\n            = amount\n"
        "quantity credits [t CO2e]\n    = stock + other",
    )
    first, second = (figure(found(simulate(text), "stock").figures, "pick of all") for text in (alone, beside))
    assert second.simulated == pytest.approx(first.simulated / 2, abs=1e-9)


def test_a_project_without_a_value_in_a_calculation_is_said_so() -> None:
    """The exact calculation, used above, raises where the arrays have no finite number."""
    model = sample("marsh_example")
    graph = build(model)
    values: dict[str, Value] = {f"area@{n}": Fraction(10) for n in range(1, 5)}
    values |= {f"plot_mean@{n}": Fraction(100) for n in range(1, 5)}
    values |= {"soil": "mineral", "salinity": Fraction(2), "discount": Fraction(1, 10), "access": True}
    with pytest.raises(NoValue):
        Calculation(graph, values).quantity("net_removals")


def test_the_cheapest_option_for_all_has_its_closed_form() -> None:
    """It is the option's own bias, as long as one option is the cheapest for every project."""
    cheapest = figure(simulate(either_or([(-0.05, 0.3, 0), (0, 0.1, 1)])).figures, "mandated", "cheapest")
    assert cheapest.closed_form == pytest.approx(-0.05, abs=1e-12)
    assert abs(cheapest.simulated + 0.05) < 4 * cheapest.simulated_error
    now_one_now_the_other = (
        either_or([(-0.05, 0.3, 1), (0, 0.1, 2)])
        .replace(
            "fact amount [t CO2e], 1000 to 1000", "fact amount [t CO2e], 1000 to 1000\nfact dear [USD], 0 to 5_000"
        )
        .replace("cost 1000 [USD]", "cost dear")
    )
    assert figure(simulate(now_one_now_the_other).figures, "mandated", "cheapest").closed_form is None


def test_what_is_taken_has_no_value(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """The true credits are there; what is issued has none, and the gap is what has to be mended."""
    path = tmp_path / "gap.rulebook"
    path.write_text(
        """rulebook "Gap", draft "1"
result credits [t]
fact amount [t], 10 to 100
setting way, one of plain or fancy, takes fancy
table factor by way, source "Table 1"
    plain = 1
quantity credits [t]
    = amount * factor(way)
""",
        encoding="utf-8",
    )
    assert main(["bias", str(path), "--projects", "100"]) == 2
    assert (
        "no project has a result with what the rulebook takes; `samesum check` names the gap" in capsys.readouterr().err
    )


def test_a_written_deduction_is_held_against_the_truth() -> None:
    """What it was solved for is gone: the place over-issues nothing, and `check` asks for no second deduction."""
    text = either_or([(0, 0.3, 0), (0, 0.1, 1)])
    closures = found(simulate(text, closures=True), "stock").closures
    [closure] = (each for each in closures if each.kind == "deduct" and each.behaviour == "second look")
    assert closure.percent is not None and closure.percent.value > 0.05
    share = closure.percent.value
    deducted = text.replace(
        "quantity stock", f"constant less = {100 * share:.6f} %, not in reference\nquantity stock"
    ).replace("            = amount", "            = amount * (1 - less)")
    one = found(simulate(deducted), "stock")
    assert abs(one.per_thousand) < 4 * one.per_thousand_error and one.per_thousand_error > 0
    [told] = over_issuing(model_of(deducted))
    assert told.value is not None and told.error is not None and abs(told.value) < 4 * told.error
    [told] = over_issuing(model_of(text))
    assert told.value is not None and told.value > 0.1


def test_more_of_what_is_below_zero_is_less_of_it_taken_away() -> None:
    """A tenth more of −1000 lowers the credits; a higher value still credits more."""
    below_zero = either_or([(0, 0.3, 0), (0, 0.1, 1)], formula="3000 [t CO2e] + stock").replace("= amount", "= -amount")
    assert found(simulate(below_zero, closures=True), "stock").latitude.leaning == 1
