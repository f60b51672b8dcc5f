"""Small rulebooks with one choice, and their simulation, for the tests of ``bias``."""

from __future__ import annotations

from collections.abc import Sequence

from samesum.evidence.choosing.bench import Terms
from samesum.evidence.choosing.projects import Supply, from_domains
from samesum.evidence.choosing.selection import Figure, Found, Selection, select
from samesum.reading.model import Model
from samesum.reading.read import read


def model_of(text: str) -> Model:
    """The model of a rulebook that has to read without a problem."""
    reading = read(text, "test.rulebook")
    assert not reading.problems, [problem.says for problem in reading.problems]
    assert reading.model is not None
    return reading.model


def either_or(options: Sequence[tuple[float, float, float]], rho: float = 0.0, formula: str = "stock") -> str:
    """A rulebook whose result is one choice between equal formulas: bias, error and cost (in credits, at a price of 1)
    of each option; the last is the reference. The truth is 1000."""
    lines = [
        'rulebook "One choice", draft "1"',
        "result credits [t CO2e]",
        "fact amount [t CO2e], 1000 to 1000",
        "quantity stock [t CO2e]",
        f"    choice by developer{f', errors correlated {rho}' if rho else ''}",
    ]
    for number, (bias, error, cost) in enumerate(options, start=1):
        phrases = f"error {100 * error:.12g} %, bias {100 * bias:.12g} %, cost {1000 * cost:.12g} [USD]"
        last = ", reference" if number == len(options) else ""
        lines += [f"        option way_{number}, {phrases}{last}", "            = amount"]
    return "\n".join([*lines, "quantity credits [t CO2e]", f"    = {formula}"]) + "\n"


def simulate(
    text: str,
    projects: int = 16_384,
    seed: int = 1,
    price: float | None = None,
    join: float | None = None,
    jobs: int = 1,
    closures: bool = False,
) -> Selection:
    return select(supply(text), projects, Terms(seed, price, join), jobs, closures=closures)


def supply(text: str) -> Supply:
    return from_domains(model_of(text))


def found(selection: Selection, id: str) -> Found:
    return next(each for each in selection.found if each.latitude.id == id)


def figure(figures: Sequence[Figure], behaviour: str, option: str = "") -> Figure:
    return next(each for each in figures if each.behaviour == behaviour and each.option in (option, option or ""))
