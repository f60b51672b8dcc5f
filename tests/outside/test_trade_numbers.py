"""Trade numbers come out of rulebooks that state them (`checks.md`, "Trade numbers")."""

from __future__ import annotations

from fractions import Fraction

import pytest

from samesum.evidence.trial.outcome import CaseTrial, TrialEvidence, try_out
from samesum.graph import build
from samesum.reading.cases import Case, Value
from samesum.reading.read import read
from samesum.spans import START


def tried(text: str, **values: Value | tuple[Value, ...]) -> TrialEvidence:
    reading = read(text, "trade.rulebook")
    assert reading.problems == () and reading.model is not None
    return try_out(build(reading.model), [Case("project", values, None, START)])


def project(text: str, **values: Value | tuple[Value, ...]) -> CaseTrial:
    return tried(text, **values).case(0)


def only(text: str, **values: Value | tuple[Value, ...]) -> float:
    """The one result of a project."""
    found = project(text, **values)
    assert found.routes == 1 and found.lowest is not None and found.highest is not None
    assert found.lowest.value == found.highest.value
    return found.lowest.value


BIOMASS = """rulebook "Living biomass", draft "1"
result removed [t CO2e/ha]
fact above_ground [t d.m./ha], 0 to 500
constant root_ratio = 0.37
constant carbon_fraction [t C/t d.m.] = 0.47, source "2006 IPCC Guidelines, Volume 4, Table 4.3"
constant c_to_co2 [t CO2e/t C] = 44/12, source "2006 IPCC Guidelines"
quantity removed [t CO2e/ha]
    = above_ground * (1 + root_ratio) * carbon_fraction * c_to_co2
"""


def test_a_hundred_tonnes_of_biomass() -> None:
    assert only(BIOMASS, above_ground=Fraction(100)) == pytest.approx(236.0967, abs=5e-5)


# 100-year potentials of the six values that "the latest IPCC value" may mean (package globalwarmingpotentials, CC0)
METHANE = {"sar": "21", "tar": "23", "ar4": "25", "ar5": "28", "ar5_feedbacks": "34", "ar6": "27.9"}
NITROUS_OXIDE = {"sar": "310", "tar": "296", "ar4": "298", "ar5": "265", "ar5_feedbacks": "298", "ar6": "273"}


@pytest.mark.parametrize(("potentials", "gas"), [(METHANE, "CH4"), (NITROUS_OXIDE, "N2O")])
def test_the_latest_value_is_a_branch_point_with_six(potentials: dict[str, str], gas: str) -> None:
    text = f'rulebook "Latest value", draft "1"\nresult emissions [t CO2e]\nfact flux [t {gas}], 0 to 100\n'
    text += f"quantity potential [t CO2e/t {gas}]\n    choice by programme\n"
    for name, value in potentials.items():
        text += f"        option {name}\n            = {value} [t CO2e/t {gas}]\n"
    text += "quantity emissions [t CO2e]\n    = flux * potential\n"
    found = project(text, flux=Fraction(10))
    assert (found.routes, found.distinct_results) == (6, len(set(potentials.values())))
    assert found.lowest is not None and found.highest is not None
    numbers = [float(value) for value in potentials.values()]
    assert found.lowest.value == pytest.approx(10 * min(numbers), rel=1e-12)
    assert found.highest.value == pytest.approx(10 * max(numbers), rel=1e-12)


PRODUCT = """rulebook "Propagation of a product", draft "1"
result combined
index factor, at most 3
fact uncertainty per factor, 0 % to 100 %
quantity combined
    = sqrt(sum(uncertainty ^ 2 over factor))
"""
TOTAL = """rulebook "Propagation of a sum", draft "1"
result combined
index part, at most 3
fact amount per part, -1000 to 1000
fact uncertainty per part, 0 % to 100 %
quantity combined
    = sqrt(sum((uncertainty * amount) ^ 2 over part)) / abs(sum(amount over part))
"""


def percents(*values: int) -> tuple[Value, ...]:
    return tuple(Fraction(value, 100) for value in values)


def test_error_propagation() -> None:
    """2006 IPCC Guidelines, Volume 1, Chapter 3, Approach 1 (equations recalled)."""
    assert only(PRODUCT, uncertainty=percents(3, 30, 10)) == pytest.approx(0.31764760349, abs=5e-12)
    found = only(TOTAL, amount=(Fraction(120), Fraction(-40)), uncertainty=percents(15, 30))
    assert found == pytest.approx(0.27041634566, abs=5e-12)


DISCOUNT = """rulebook "Uncertainty discount", draft "1"
result credited
fact average, 0 to 1000
fact half_width, 0 % to 60 %
table share by uncertainty
    up to 10 % = 0 %
    above 10 % up to 15 % = 25 %
    above 15 % up to 20 % = 50 %
    above 20 % up to 30 % = 75 %
    above 30 % = 100 %
quantity credited
    = average * (1 - share(half_width) * half_width)
"""


@pytest.mark.parametrize(("width", "credited"), [("10", 100), ("10.1", 97.475), ("15.1", 92.45), ("30.1", 69.9)])
def test_an_uncertainty_discount_leaps(width: str, credited: float) -> None:
    """A CDM forestry tool (recalled): four jumps."""
    assert only(DISCOUNT, average=Fraction(100), half_width=Fraction(width) / 100) == pytest.approx(credited, abs=1e-9)


DEAD_WOOD = """rulebook "Dead wood and litter", draft "1"
result pool
fact elevation [m], 0 to 4000
fact rain [mm], 0 to 5000
fact plots, 0 to 100
fact tree, 0 to 1000
quantity pool
    choice by developer
        option defaults
            cases in order
                when elevation > 2000 [m]
                    = 7 % * tree
                when elevation > 1000 [m]
                    = 6 % * tree
                when rain < 1000 [mm]
                    = 2 % * tree
                when rain <= 1600 [mm]
                    = 1 % * tree
                otherwise
                    = 6 % * tree
        option measured_plots
            cases in order
                when elevation > 2000 [m]
                    = 1.07 * plots
                when elevation > 1000 [m]
                    = 1.06 * plots
                when rain < 1000 [mm]
                    = 1.02 * plots
                when rain <= 1600 [mm]
                    = 1.01 * plots
                otherwise
                    = 1.05 * plots
"""


def test_defaults_against_plots_in_five_cells() -> None:
    """Dead wood and litter defaults against plots, five cells of elevation and rain: 10 routes over all projects
    (recalled), two of them open to each."""
    from samesum.evidence.gather import gather

    reading = read(DEAD_WOOD, "pools")
    assert reading.problems == () and reading.model is not None
    counts = gather(build(reading.model)).counts
    assert (counts.reachable, counts.per_project_most, counts.exact) == (10, 2, True)
    for elevation, rain in ((2500, 800), (1500, 800), (500, 800), (500, 1200), (500, 2000)):
        found = project(
            DEAD_WOOD, elevation=Fraction(elevation), rain=Fraction(rain), plots=Fraction(12), tree=Fraction(300)
        )
        assert found.routes == 2


ANY_TABLE = """rulebook "0005-simpletable-A", draft "1"
result approved
fact age, 18 to 120
fact risk, one of low, medium or high
fact affordable, yes or no
quantity approved
    cases
        when age >= 18 and risk is low and affordable
            = 1
        when age < 18
            = 0
        when risk is high
            = 0
        when not affordable
            = 0
        when risk is medium
            = 1 * 0
        when age >= 18 and risk is low and not affordable
            = 0
"""


def test_overlaps_with_equal_outcome_are_proved_harmless() -> None:
    """After the Decision Model and Notation table 0005-simpletable-A (dmn-tck/tck, Apache-2.0), re-worded: rules that
    hold together give one outcome."""
    text = ANY_TABLE.replace("fact age, 18 to 120", "fact age, 0 to 120")
    found = tried(text, age=Fraction(15), risk="high", affordable=False)
    pairs = {branches for _, branches in found.proof.harmless}
    assert {("2", "3"), ("2", "4"), ("3", "4")} <= pairs
    case = found.case(0)
    assert case.routes == 3 and case.distinct_results == 1 and case.spread is None
    assert found.proof.verdict == "same number"
