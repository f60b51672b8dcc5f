"""Facts of the trade on the samples. Common practice, no source: what people who run programmes report of methodologies
of this kind; none of it is a published figure."""

from __future__ import annotations

from functools import cache
from pathlib import Path

import pytest

from samesum.evidence.choosing.bench import Terms
from samesum.evidence.choosing.projects import BLOCK, from_domains
from samesum.evidence.choosing.selection import Selection, select
from samesum.reading.read import read_file
from support.choosing import figure, found, simulate

SAMPLES = Path(__file__).parents[2] / "sample_rulebooks"
PROJECTS = 2 * BLOCK
# Choices with a rough option that states no bias, beside a better one: sample, branch point, rough option.
ROUGH = [
    ("marsh_example", "soil_carbon", "regional"),
    ("coastal_wetland", "baseline_loss/2", "factor"),
    ("coastal_wetland", "methane/2", "proxy"),
    ("waste_heat", "heat_factor", "published"),
    ("woodland", "dead_wood", "shares"),
    ("woodland", "litter", "shares"),
]


@cache
def bias_of(name: str) -> Selection:
    model = read_file(SAMPLES / f"{name}.rulebook").model
    assert model is not None
    return select(from_domains(model), PROJECTS, Terms(0, join=1.0), closures=False)


@pytest.mark.parametrize(("name", "id", "rough"), ROUGH)
def test_a_mandated_rough_option_is_centred(name: str, id: str, rough: str) -> None:
    """Common practice, no source: the errors of a mandated regional average cancel over many projects."""
    row = figure(found(bias_of(name), id).figures, "mandated", rough)
    assert row.over_credited == pytest.approx(0.5, abs=0.08)
    # A floor at zero credits leaves a little more than the errors alone.
    assert abs(row.simulated) < 4 * row.simulated_error + 0.003


@pytest.mark.parametrize(("name", "id", "rough"), ROUGH)
def test_an_either_or_over_issues_although_both_are_unbiased(name: str, id: str, rough: str) -> None:
    """Common practice, no source: those who come out short pay for the other method, the others keep the first."""
    figures = found(bias_of(name), id).figures
    look, pick = figure(figures, "second look"), figure(figures, "pick of all")
    assert look.difference > 8 * look.difference_error > 0
    assert pick.simulated >= look.simulated - 1e-12


def test_a_conservative_default_does_not_cure_a_free_choice() -> None:
    """Common practice, no source: a default that is 30 % low on average still over-issues when it may be left."""
    text = (SAMPLES / "marsh_example.rulebook").read_text(encoding="utf-8")
    low = text.replace("option regional, error 35 %,", "option regional, error 35 %, bias -30 %,")
    assert low != text
    figures = found(simulate(low, PROJECTS), "soil_carbon").figures
    assert figure(figures, "mandated", "regional").simulated < -0.2
    row = figure(figures, "second look")
    assert row.simulated > 8 * row.simulated_error


@pytest.mark.parametrize("name", ["coastal_wetland", "waste_heat", "woodland", "marsh_example"])
def test_enrolment_alone_over_issues_a_little(name: str) -> None:
    """Common practice, no source: with every choice mandated, those who happen to be over-credited join: a few per
    cent; beside free choice it only adds."""
    figures = bias_of(name).figures
    mandated, look = figure(figures, "mandated", "reference"), figure(figures, "second look")
    assert mandated.joined is not None and look.joined is not None
    assert 4 * mandated.joined.standard_error < mandated.joined.over_issuance < 0.15
    assert look.joined.over_issuance > look.simulated
    assert abs(mandated.simulated) < 4 * mandated.simulated_error + 0.003


@pytest.mark.parametrize("name", ["coastal_wetland_repaired", "waste_heat_repaired", "woodland_repaired"])
def test_a_repaired_draft_shows_no_over_issuance(name: str) -> None:
    """Common practice, no source: nothing is left to choose, and nobody gains by choosing."""
    selection = bias_of(name)
    assert all(row.simulated == 0 for row in selection.figures)
    assert not any(each.per_thousand for each in selection.found)
