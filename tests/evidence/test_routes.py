"""Routes listed for a project are the ones that a brute-force evaluator finds open, each once."""

from __future__ import annotations

from fractions import Fraction

import pytest

from brute.generate import Dice, case, rulebook
from brute.linear import TooLarge
from brute.text import render
from brute.trial import trial
from samesum.evidence.routes.listing import Given, list_routes
from samesum.evidence.routes.witness import Value
from samesum.graph import build
from samesum.reading.read import Reader, make_reader, read


@pytest.fixture(scope="module")
def reader() -> Reader:
    return make_reader(None)


def plain(value: object) -> Value:
    assert isinstance(value, int | float | Fraction | str | bool)
    if isinstance(value, str | bool):
        return {"yes": True, "no": False}.get(value, value) if isinstance(value, str) else value
    return Fraction(value)


def as_project(given: dict[str, object]) -> dict[str, Given]:
    return {
        name: tuple(plain(each) for each in value) if isinstance(value, list | tuple) else plain(value)
        for name, value in given.items()
    }


@pytest.mark.parametrize("first", range(0, 300, 50))
def test_the_same_routes_as_brute_force(first: int, reader: Reader) -> None:
    compared = several = 0
    for seed in range(first, first + 50):
        made = rulebook(seed)
        given = case(made, Dice(seed))
        try:
            expected = trial(made, given)
        except TooLarge:
            continue
        model = read(render(made), "generated.rulebook", reader=reader).model
        assert model is not None
        found = list_routes(build(model), as_project(given), 10_000, 30)
        if not found.exact:
            continue
        compared += 1
        several += expected.routes > 1
        assert found.open == expected.routes, seed
        assert len(found.first) == len(set(found.first)) == expected.routes, seed
    assert compared > 40 and several > 5


def test_the_first_routes_of_very_many(reader: Reader) -> None:
    blocks = ['rulebook "Many", draft "1"\n', "result credits [t CO2e], rounded down to 1\n"]
    for number in range(200):
        blocks.append(
            f"quantity part_{number} [t CO2e]\n    choice by developer\n"
            f"        option low\n            = {number} [t CO2e]\n"
            f"        option high\n            = {number + 1} [t CO2e]\n"
        )
    blocks.append("quantity credits [t CO2e]\n    = " + " + ".join(f"part_{number}" for number in range(200)) + "\n")
    model = read("\n".join(blocks), "many.rulebook", reader=reader).model
    assert model is not None
    found = list_routes(build(model), {}, 5)
    assert found.open == 2**200 and found.exact
    assert len(set(found.first)) == 5
    assert all(len(route) == 200 for route in found.first)
