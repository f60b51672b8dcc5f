"""Branches that give one number: proved, refuted, or not told."""

from __future__ import annotations

import pytest

from samesum.evidence.subjects.equal import Workshop, is_zero, same_number
from samesum.graph import DecisionGraph, build
from samesum.reading.read import read

HEAD = """rulebook "Equal", draft "1"
result credits [t CO2e], rounded down to 1
fact area [ha], 1 to 500
fact share, 0 to 1
fact soil, one of sand or clay
table stock [t CO2e/ha] by soil
    sand = 3
    clay = 3
"""


def graph_of(first: str, second: str) -> DecisionGraph:
    reading = read(
        f"""{HEAD}
quantity base [t CO2e]
    = 2 [t CO2e/ha] * area

quantity credits [t CO2e]
    choice by developer
        option a
            = {first}
        option b
            = {second}
""",
        "equal.rulebook",
    )
    assert reading.problems == () and reading.model is not None
    return build(reading.model)


@pytest.mark.parametrize(
    ("first", "second", "answer"),
    [
        ("2 [t CO2e/ha] * area", "base", "yes"),
        ("2 [t CO2e/ha] * area", "3 [t CO2e/ha] * area", "no"),
        ("(1 + share)^2 * base", "base + 2 * share * base + share * share * base", "yes"),
        ("stock(soil) * area", "3 [t CO2e/ha] * area", "yes"),
        ("max(share, 0) * base", "share * base", "yes"),
        ("abs(share - 0.5) * base", "max(share - 0.5, 0.5 - share) * base", "yes"),
        ("exp(share) * base", "exp(share + 0) * base", "yes"),
        ("exp(ln(share + 1)) * base", "(share + 1) * base", "cannot tell"),
        ("min(area, 499.9 [ha]) * 2 [t CO2e/ha]", "base", "no"),
    ],
)
def test_same_number(first: str, second: str, answer: str) -> None:
    graph = graph_of(first, second)
    point = graph.branch_points["credits"]
    found = same_number(Workshop.of(graph, 20), point, 0, 1, together=False)
    assert found == answer


@pytest.mark.parametrize(
    ("first", "answer"),
    [("0 [t CO2e]", "yes"), ("base - 2 [t CO2e/ha] * area", "yes"), ("share * base", "no"), ("base", "no")],
)
def test_is_zero(first: str, answer: str) -> None:
    graph = graph_of(first, "base")
    assert is_zero(Workshop.of(graph, 20), graph.branch_points["credits"], 0) == answer
