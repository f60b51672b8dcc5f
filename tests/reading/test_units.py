"""Units: read as pint reads the same definitions, multiplied and converted exactly."""

from __future__ import annotations

from fractions import Fraction

import pint
import pytest
from pint.util import UnitsContainer

from samesum.reading.model import PLAIN, Unit
from samesum.reading.units import (
    UnitMistake,
    UnitTable,
    conversion,
    load_units,
    money_of,
    multiplied,
    raised,
    read_unit,
    same_dimension,
)
from samesum.shipped import shipped_folder


@pytest.fixture(scope="module")
def table() -> UnitTable:
    return load_units()


def unit(text: str, table: UnitTable) -> Unit:
    found = read_unit(text, table)
    assert isinstance(found, Unit), found
    return found


def test_every_unit_means_what_pint_reads_in_the_same_file(table: UnitTable) -> None:
    registry = pint.UnitRegistry(None, non_int_type=Fraction)
    lines = (shipped_folder("grammar") / "units.txt").read_text(encoding="utf-8").splitlines()
    # pint wants a sign of its own for `%` and `°C`; everything else is read as it stands.
    registry.load_definitions([line for line in lines if "%" not in line and "°C" not in line])
    names = [name for name in table.units if name not in ("%", "percent", "°C", "degC")]
    assert len(names) > 150
    for name in names:
        quantity = registry.Quantity(Fraction(1), UnitsContainer({name: 1})).to_base_units()
        factor, terms = table.units[name]
        theirs = {str(base).strip("[]"): Fraction(power) for base, power in quantity.dimensionality.items()}
        assert Fraction(quantity.magnitude) == factor, name
        assert theirs == dict(terms), name


@pytest.mark.parametrize(
    ("text", "other", "factor"),
    [
        ("kg", "t", Fraction(1, 1000)),
        ("km2", "ha", Fraction(100)),
        ("MWh", "GJ", Fraction(36, 10)),
        ("kg CH4/head/year", "t CH4/(head year)", Fraction(1, 1000)),
        ("t C/ha", "kg C/m2", Fraction(1, 10)),
        ("m3", "l", Fraction(1000)),
        ("%", "", Fraction(1, 100)),
        ("kWh per day", "W", Fraction(1000, 24)),
        ("ha^-1", "1/ha", Fraction(1)),
        ("m^2", "m2", Fraction(1)),
        ("t CO2e/t C", "kg CO2e/kg C", Fraction(1)),
    ],
)
def test_units_of_one_dimension_convert_exactly(text: str, other: str, factor: Fraction, table: UnitTable) -> None:
    here, there = unit(text, table), unit(other, table) if other else PLAIN
    assert same_dimension(here, there)
    assert conversion(here, there) == factor


@pytest.mark.parametrize(
    ("text", "other"),
    [
        ("t C", "t CO2e"),
        ("t CH4", "t d.m."),
        ("t", "t C"),
        ("USD", "EUR"),
        ("ppt", "%"),
        ("t km", "t"),
        ("m3 CH4", "m3"),
        ("MWh", "MWh heat"),
        ("t dry matter", "t matter"),
    ],
)
def test_different_things_do_not_convert(text: str, other: str, table: UnitTable) -> None:
    assert not same_dimension(unit(text, table), unit(other, table))


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("yera", "year"),
        ("tCO2e", "[t CO2e]"),
        ("kgCH4", "[kg CH4]"),
        ("CO2e", "[t CO2e]"),
        ("t/", "ends too early"),
        ("(t", "not closed"),
        ("t)", "cannot be read"),
        ("ha forest", "mass, volume or energy"),
        ("t^99", "small whole number"),
        ("t^", "small whole number"),
        ("ton", "tonne"),
        ("", "no unit"),
        ("t €", "cannot stand"),
        ("((((((((((t))))))))))", ""),
        ("t^(1/0)", "power"),
    ],
)
def test_a_unit_that_cannot_be_read_says_what_to_write(text: str, words: str, table: UnitTable) -> None:
    found = read_unit(text, table)
    assert isinstance(found, UnitMistake)
    assert words in f"{found.says} {found.remedy}"


def test_products_are_written_so_that_they_read_back(table: UnitTable) -> None:
    texts = ["t C/ha", "ha", "t CO2e/t C", "USD/ha", "kg d.m.", "m2", "1/year", "head", "%"]
    for one in texts:
        for other in texts:
            for sign in (1, -1):
                product = multiplied(unit(one, table), unit(other, table), table, sign)
                again = unit(product.text, table) if product.text else PLAIN
                assert (product.factor, product.dimension) == (again.factor, again.dimension), product
    assert multiplied(unit("t C/ha", table), unit("ha", table), table).text == "t C"
    assert raised(unit("t^2", table), Fraction(1, 2), table).text == "t"


def test_money_is_one_currency_to_the_first_power(table: UnitTable) -> None:
    assert money_of(unit("USD", table)) == "USD"
    assert money_of(unit("USD/ha", table)) == ""
    assert money_of(unit("t", table)) == ""
