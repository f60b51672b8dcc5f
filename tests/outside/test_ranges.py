"""Ranges over a box: published or computed ranges lie inside the proved bounds (`checks.md`, "Ranges over a box").

python-flint (Johansson 2017, Arb, IEEE Trans. Computers 66:1281) is the outside check: its balls are worked out by
other code, at any precision.
"""

from __future__ import annotations

import random

import pytest
from flint import arb, ctx

from samesum.evidence.trial.dividing import range_over_domains
from samesum.evidence.trial.plan import Plan, make_plan
from samesum.graph import build
from samesum.reading.read import read

STEP = """
quantity step
    cases
        when x >= 0
            = 1
        when x < 0
            = 0
"""
CAMEL = "(4 - 2.1 * x ^ 2 + x ^ 4 / 3) * x ^ 2 + x * y + (-4 + 4 * y ^ 2) * y ^ 2"
RUMP = "333.75 * b ^ 6 + a ^ 2 * (11 * a ^ 2 * b ^ 2 - b ^ 6 - 121 * b ^ 4 - 2) + 5.5 * b ^ 8 + a / (2 * b)"

# expression, facts, true lowest and highest as `checks.md` gives them (None: not given there), a polynomial?
ROWS = [
    ("x - x ^ 2", {"x": (0, 1)}, 0, 0.25, True),
    ("x / (x + y)", {"x": (1, 2), "y": (3, 4)}, 1 / 5, 2 / 5, False),
    ("x ^ 2", {"x": (-1, 1)}, 0, 1, True),
    ("x * x", {"x": (-1, 1)}, 0, 1, True),
    ("(x ^ 2 - 2) ^ 2", {"x": (-10, 11)}, 0, None, True),
    ("abs(x) + step - 1", {"x": (-10, 11)}, -1, None, False),
    (CAMEL, {"x": (-3, 3), "y": (-2, 2)}, -1.03162845348987735, None, True),
    ("B * (1 + R) * CF * 44 / 12", {"B": (100, 120), "R": (0.20, 0.37), "CF": (0.44, 0.49)}, 193.6, 295.372, True),
]


def plan(expression: str, facts: dict[str, tuple[float, float]]) -> Plan:
    text = 'rulebook "A box", draft "1"\nresult r\n'
    text += "".join(f"fact {name}, {low:f} to {high:f}\n" for name, (low, high) in facts.items())
    text += (STEP if "step" in expression else "") + f"quantity r\n    = {expression}\n"
    reading = read(text, "box")
    assert reading.problems == () and reading.model is not None
    return make_plan(build(reading.model))


@pytest.mark.parametrize(("expression", "facts", "low", "high", "polynomial"), ROWS)
def test_the_range_lies_inside_the_proved_bounds(
    expression: str, facts: dict[str, tuple[float, float]], low: float, high: float | None, polynomial: bool
) -> None:
    lower, upper = range_over_domains(plan(expression, facts), 10.0)
    assert lower.proved[0] <= low + 1e-15
    assert lower.found[0] >= low - 1e-12 * max(1, abs(low))
    if high is not None:
        assert upper.proved[0] >= high - 1e-13 * high
        assert upper.found[0] <= high + 1e-12 * high
    width = upper.found[0] - lower.found[0]
    if polynomial:
        assert lower.found[0] - lower.proved[0] <= 0.01 * width
        assert upper.proved[0] - upper.found[0] <= 0.01 * width


def value(expression: str, at: dict[str, arb]) -> arb:
    """The expression in Arb's ball arithmetic."""
    text = expression.replace("^", "**")
    if "step" in text:
        at = {**at, "step": arb(1) if at["x"] >= 0 else arb(0)}
    numbers = {name: arb(name) for name in ("333.75", "5.5", "2.1")}
    for number in numbers:
        text = text.replace(number, f"arb('{number}')")
    result = eval(text, {"arb": arb, "abs": abs}, at)  # the expressions stand in this file
    assert isinstance(result, arb)
    return result


@pytest.mark.parametrize(("expression", "facts"), [(row[0], row[1]) for row in ROWS])
def test_no_point_lies_outside_by_another_arithmetic(expression: str, facts: dict[str, tuple[float, float]]) -> None:
    lower, upper = range_over_domains(plan(expression, facts), 10.0)
    draw = random.Random(7)
    ctx.prec = 120
    for _ in range(400):
        at = {name: arb(low) + arb(high - low) * arb(draw.random()) for name, (low, high) in facts.items()}
        found = value(expression, at)
        assert found >= arb(float(lower.proved[0])) and found <= arb(float(upper.proved[0]))


def test_rumps_expression_at_one_point() -> None:
    """Rump 1988: plain floating point gives about −1.18e21, the true value is −0.827396059946821…"""
    facts = {"a": (77617, 77617), "b": (33096, 33096)}
    lower, upper = range_over_domains(plan(RUMP, facts))
    ctx.prec = 300
    true = value(RUMP, {"a": arb(77617), "b": arb(33096)})
    assert abs(true - arb("-0.827396059946821")) < arb("1e-14")
    assert arb(float(lower.proved[0])) <= true
    assert true <= arb(float(upper.proved[0]))


@pytest.mark.parametrize(("expression", "facts"), [(row[0], row[1]) for row in ROWS if "step" not in row[0]])
def test_bounds_shrink_as_the_box_is_divided(expression: str, facts: dict[str, tuple[float, float]]) -> None:
    def width(box: dict[str, tuple[float, float]]) -> float:
        lower, upper = range_over_domains(plan(expression, box), 0.001)
        return float(upper.proved[0] - lower.proved[0])

    name = next(iter(facts))
    low, high = facts[name]
    middle = (low + high) / 2
    halves = [{**facts, name: (low, middle)}, {**facts, name: (middle, high)}]
    assert max(width(half) for half in halves) <= width(facts) * (1 + 1e-12)
