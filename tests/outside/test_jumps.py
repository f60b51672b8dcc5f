"""Jumps at thresholds against published values.

2006 IPCC Guidelines, Volume 4, Table 4.4, root-to-shoot ratios by above-ground biomass (ratios .40/.29 for
conifers at 50 t d.m./ha, .46/.23 for broadleaf at 75, .56/.28 for dry land at 20); total = AGB (1 + R). The
totals on both sides and the sizes of the jumps are computed from the table.
"""

from __future__ import annotations

from fractions import Fraction

import pytest

from samesum.evidence.subjects.jumps import find_jumps
from samesum.graph import build
from samesum.reading.read import read

ROWS = [
    ("conifers", 50, "0.40", "0.29", "70.0", "64.5", -7.86),
    ("broadleaf", 75, "0.46", "0.23", "109.5", "92.25", -15.75),
    ("dry", 20, "0.56", "0.28", "31.2", "25.6", -17.95),
]
HEAD = """rulebook "Roots", draft "1"
result total [t d.m./ha], rounded down to 1
fact above_ground [t d.m./ha], 1 to 150
"""


def in_cases(border: int, below: str, above: str) -> str:
    return f"""{HEAD}
quantity ratio
    cases
        when above_ground < {border} [t d.m./ha]
            = {below}
        when above_ground > {border} [t d.m./ha]
            = {above}

quantity total [t d.m./ha]
    = above_ground * (1 + ratio)
"""


def in_a_table(border: int, below: str, above: str) -> str:
    return f"""{HEAD}
table ratio by density [t d.m./ha]
    up to {border} [t d.m./ha] = {below}
    above {border} [t d.m./ha] = {above}

quantity total [t d.m./ha]
    = above_ground * (1 + ratio(above_ground))
""".replace(" by density [t d.m./ha]", " by density")


@pytest.mark.parametrize("write", [in_cases, in_a_table])
@pytest.mark.parametrize(("name", "border", "below", "above", "before", "after", "percent"), ROWS)
def test_root_to_shoot(
    write: object, name: str, border: int, below: str, above: str, before: str, after: str, percent: float
) -> None:
    assert callable(write)
    reading = read(write(border, below, above), f"{name}.rulebook")
    assert reading.problems == () and reading.model is not None
    found = find_jumps(build(reading.model))
    assert found.untold == ()
    (jump,) = found.found
    assert (jump.asked, jump.at) == ("above_ground", border)
    assert (jump.result_before, jump.result_after) == (Fraction(before), Fraction(after))
    assert jump.result_size is not None
    assert jump.result_size == (Fraction(after) - Fraction(before)) / Fraction(before)
    assert abs(float(jump.result_size) * 100 - percent) < 0.005


def test_an_uncertainty_discount_with_four_jumps() -> None:
    """Uncertainty discount of a forestry tool of the Clean Development Mechanism (recalled): U up to 10 % none,
    up to 15 % 25 % of U, up to 20 % 50 %, up to 30 % 75 %, above 100 %."""
    reading = read(
        """rulebook "Discount", draft "1"
result credits [t CO2e], rounded down to 1
fact half_width, 0 % to 50 %
table share by uncertainty
    up to 10 % = 0
    above 10 % up to 15 % = 25 %
    above 15 % up to 20 % = 50 %
    above 20 % up to 30 % = 75 %
    above 30 % = 100 %

quantity credits [t CO2e]
    = 100 [t CO2e] * (1 - half_width * share(half_width))
""",
        "discount.rulebook",
    )
    assert reading.problems == () and reading.model is not None
    found = find_jumps(build(reading.model)).found
    assert [(jump.at, jump.before, jump.after) for jump in sorted(found, key=lambda jump: jump.at)] == [
        (Fraction(10, 100), 100, Fraction("97.5")),
        (Fraction(15, 100), Fraction("96.25"), Fraction("92.5")),
        (Fraction(20, 100), 90, 85),
        (Fraction(30, 100), Fraction("77.5"), 70),
    ]
