"""Rulebooks made to be hard end within their limits, with an honest answer: exact, or a bracket around the truth."""

from __future__ import annotations

import random
import time
from collections.abc import Callable

import pytest

from samesum.evidence.evidence import Evidence
from samesum.evidence.gather import gather
from samesum.evidence.routes.counting import FIGURES, Counts
from samesum.evidence.subjects.all_subjects import subjects_of
from samesum.graph import build
from support.asking import cases, choice, evidence_of, gaps_of, model_of, rulebook
from support.replay import check_witnesses

SECONDS = 3.0
LATE = 15.0  # what a busy machine may take on top; nothing that runs away is that quick


def facts(count: int) -> str:
    return "".join(f"fact f{number}, 0 to 100, clause 1\n" for number in range(count))


def added(letter: str, count: int) -> str:
    return " + ".join(f"{letter}{number}" for number in range(count))


def linear(chance: random.Random) -> str:
    names = [f"f{number}" for number in range(10)]
    return " + ".join(f"{chance.randrange(1, 9)}*{name}" for name in chance.sample(names, 6))


def polynomial(chance: random.Random) -> str:
    names = [f"f{number}" for number in range(8)]
    return " + ".join(f"{chance.randrange(1, 9)}*{a}*{b}" for a, b in (chance.sample(names, 2) for _ in range(6)))


def dense(side: Callable[[random.Random], str], count: int, at: int) -> str:
    chance = random.Random(7)
    return rulebook(
        facts(10),
        *(cases(f"q{k}", [f"{side(chance)} < {at}", f"{side(chance)} >= {at}"]) for k in range(count)),
        result=added("q", count),
    )


def entangled(atoms: list[str], blocks: list[str], count: int) -> str:
    """Conditions in disjunctive form over so many atoms that the diagrams explode."""
    chance = random.Random(5)

    def atom() -> str:
        return chance.choice(["", "not "]) + chance.choice(atoms)

    def condition() -> str:
        return " or ".join("(" + " and ".join(atom() for _ in range(5)) + ")" for _ in range(5))

    return rulebook(
        *blocks, *(cases(f"q{k}", [condition(), "otherwise"]) for k in range(count)), result=added("q", count)
    )


def per_stratum(text: str) -> str:
    return text.replace("[t],", "[t] per stratum,", 1)


HARD = {
    "linear conditions over six facts each": dense(linear, 30, 900),
    "polynomial conditions over six facts each": dense(polynomial, 20, 30_000),
    "forty facts entangled in sixty branch points": entangled(
        [f"g{k}" for k in range(40)], [f"fact g{k}, yes or no, clause 1\n" for k in range(40)], 60
    ),
    "forty choices entangled in sixty branch points": entangled(
        [f"c{k} takes a" for k in range(40)], [choice(f"c{k}", ["a", "b"]) for k in range(40)], 60
    ),
    "a sum that every stratum's choice changes by a fact": rulebook(
        "index stratum, at most 60\nfact a [t] per stratum, 0 to 5, clause 1\n",
        per_stratum(choice("q", ["x", "y"])).replace("= 2 [t]", "= a"),
        cases("w", ["sum(q over stratum) < 90 [t]", "sum(q over stratum) > 90 [t]"]),
        result="w",
    ),
    "polynomials that ten choices make up": rulebook(
        facts(8),
        *(
            choice(f"c{k}", ["a", "b"])
            .replace("[t]", "")
            .replace("= 1", f"= f{k} * f{(k + 1) % 8}")
            .replace("= 2", f"= f{k}^2")
            for k in range(8)
        ),
        cases("q", [f"{added('c', 8)} < 3000", f"{added('c', 8)} > 3000"]),
        result="q",
    ),
    "three thousand thresholds in one condition": rulebook(
        "fact x, 0 to 100000, clause 1\n",
        cases("q", [" or ".join(f"x = {k}" for k in range(3_000)), "otherwise"]),
        result="q",
    ),
    "two thousand named values": rulebook(
        "fact x, one of " + ", ".join(f"v{k}" for k in range(1_999)) + " or v1999, clause 1\n",
        cases("q", [f"x is v{k}" for k in range(300)]),
        result="q",
    ),
    "strata beyond counting one by one": rulebook(
        "index stratum, at most 5000\nfact a [t] per stratum, 0 to 5, clause 1\n",
        per_stratum(cases("q", ["a < 2 [t]", "a > 2 [t]"])),
        result="sum(q over stratum)",
    ),
}


def examined(text: str) -> tuple[Evidence, float]:
    graph = build(model_of(text))
    start = time.monotonic()
    found = gather(graph, SECONDS)
    return found, time.monotonic() - start


def bracket(counts: Counts, name: str) -> tuple[int, int]:
    most = getattr(counts, name)
    return counts.at_least.get(name, most), most


@pytest.mark.parametrize("name", sorted(HARD))
def test_what_is_hard_ends_in_time_with_an_honest_bracket(name: str) -> None:
    found, took = examined(HARD[name])
    assert took < SECONDS + LATE
    counts = found.counts
    for figure in FIGURES:
        low, high = bracket(counts, figure)
        assert 0 <= low <= high, figure
    assert counts.exact == (not counts.at_least) == (not counts.why_inexact)
    check_witnesses(found)
    start = time.monotonic()
    assert subjects_of(found, (), SECONDS), "what lint rules look at"
    assert time.monotonic() - start < SECONDS + LATE


# --- brackets around a truth that is known otherwise ------------------------------------------------

X = "fact x, 0 to 4, clause 2\n"
XY = X + "fact y, 0 to 4, clause 2\n"
KNOWN: list[tuple[str, list[str], tuple[int, int, int]]] = [
    # facts, conditions, (reachable, per_project_most, per_project_least)
    (X, ["exp(x) < 10", "exp(x) >= 10"], (2, 1, 1)),
    (X, ["exp(x) < 0.5", "otherwise"], (1, 1, 1)),
    (X, ["exp(x) < 10", "exp(x) > 5"], (2, 2, 1)),
    (XY, ["exp(x) < exp(y)", "ln(x + 1) >= ln(y + 1)"], (2, 1, 1)),
    (XY, ["x ^ y < 2", "x ^ y >= 2"], (2, 1, 1)),
    (XY, ["(x + 1) ^ 0.7 < 2", "y < 2"], (2, 2, 0)),
    (XY, ["(x - 2) ^ y < 1", "otherwise"], (2, 1, 0)),
    (XY, ["exp(x * y) = 1", "x > 0 and y > 0"], (2, 1, 1)),
    (XY + "setting s, 0 to 1, by developer, clause 3\n", ["x * s < y^2", "x * s >= y^2"], (2, 2, 1)),
    (XY + "setting s, 0 to 1, by developer, clause 3\n", ["exp(s) * x < y", "exp(s) * x >= y"], (2, 2, 1)),
    (XY + "setting s, 0 to 1, by developer, clause 3\nsetting v, 1 to 2, by verifier, clause 3\n",
     ["x < s", "x >= s and s * v < 1.5", "x * v > 9"], (2, 2, 1)),
    # a base below 0 with any exponent has no bounds, so that nothing at all is shown
    (XY, ["(x - 6) ^ floor(y) < 1", "(x - 6) ^ floor(y) >= 1"], (2, 1, 1)),
    (X + "applies when exp(x) > 3, clause 1\n", ["x < 1", "x >= 1"], (1, 1, 1)),
]  # fmt: skip


@pytest.mark.parametrize("number", range(len(KNOWN)))
def test_a_bracket_holds_the_truth(number: int) -> None:
    given, conditions, truth = KNOWN[number]
    found, took = examined(rulebook(given, cases("q", conditions), result="q"))
    assert took < SECONDS + LATE
    for figure, true in zip(("reachable", "per_project_most", "per_project_least"), truth, strict=True):
        low, high = bracket(found.counts, figure)
        assert low <= true <= high, (figure, low, high)
    assert (found.counts.at_least == {}) == found.counts.exact
    check_witnesses(found)


def holds_the_truth(text: str, truth: dict[str, int]) -> None:
    found, took = examined(text)
    assert took < SECONDS + LATE
    for figure, true in truth.items():
        low, high = bracket(found.counts, figure)
        assert low <= true <= high, (figure, low, high)


def test_projects_that_may_be_outside_are_not_taken_for_the_fewest() -> None:
    """S² − 150 S, too long to be written out, is never above 0: else projects with one route would be inside."""
    text = rulebook(
        "index stratum, at most 30\nfact a per stratum, 0 to 5, clause 1\nfact f, yes or no, clause 1\n",
        "quantity s, clause 1\n    = sum(a over stratum)\n",
        "applies when not f or s * s - 150 * s > 1, clause 1\n",
        choice("q", ["a", "b"]).replace("option b", "option b, only when not f"),
        result="q",
    )
    holds_the_truth(text, {"per_project_least": 2, "per_project_most": 2, "reachable": 2})


def test_what_a_setting_brings_about_elsewhere_is_not_taken_for_the_fewest() -> None:
    """Where the rulebook applies, exp(s) can be put on either side of y/x; at x = 0 it could not."""
    text = rulebook(
        XY + "setting s, 0 to 1, by developer, clause 3\napplies when 1.4 * x <= y <= 1.6 * x and x >= 1, clause 1\n",
        cases("q", ["exp(s) * x < y", "exp(s) * x >= y"]),
        cases("w", ["x = 0 and y > 0", "otherwise"]),
        result="q + w",
    )
    holds_the_truth(text, {"per_project_least": 2, "per_project_most": 2, "reachable": 2})


@pytest.mark.parametrize(
    ("given", "conditions"),
    [
        (X, ["exp(x) < 10", "exp(x) >= 10"]),
        (XY, ["x ^ y < 2", "x ^ y >= 2"]),
        (XY, ["exp(x) < exp(y)", "exp(x) >= exp(y)"]),
    ],
)
def test_what_cannot_be_told_is_no_gap_and_no_overlap(given: str, conditions: list[str]) -> None:
    found = evidence_of(rulebook(given, cases("q", conditions), result="q"))
    assert (found.conditions.gaps, found.conditions.overlaps, found.conditions.dead_branches) == ((), (), ())


def test_a_sure_gap_is_found_beside_what_cannot_be_told() -> None:
    found = evidence_of(rulebook(XY, cases("q", ["exp(x) < 1.5", "y > 1 and x > 3"]), result="q"))
    assert gaps_of(found) == ["q"]
    check_witnesses(found)


# --- large, but not hard ---------------------------------------------------------------------------


def chain(count: int) -> str:
    blocks = [f"quantity c{k} [t], clause 1\n    = c{k + 1} + 1 [t]\n" for k in range(count)]
    return rulebook(*blocks, choice(f"c{count}", ["a", "b"]), result="c0")


def nested(depth: int) -> str:
    lines = ["quantity q [t], clause 2"]
    for k in range(depth):
        pad = " " * (2 * k + 1)
        lines += [f"{pad}cases", f"{pad} when x < {k}", f"{pad}  = {k} [t]", f"{pad} when x >= {k}"]
    lines.append(" " * (2 * depth + 1) + "= 9 [t]")
    return rulebook("fact x, 0 to 1000, clause 1\n", "\n".join(lines) + "\n", result="q")


def asking_each_other(count: int) -> str:
    blocks = [
        choice(f"c{k}", ["a", "b"]).replace("option b", f"option b, only when c{k + 1} takes a") for k in range(count)
    ]
    return rulebook(*blocks, choice(f"c{count}", ["a", "b"]), result="c0")


def fibonacci(k: int) -> int:
    a, b = 0, 1
    for _ in range(k):
        a, b = b, a + b
    return a


LARGE: dict[str, tuple[str, int]] = {
    "a thousand facts in branch points of their own": (
        rulebook(
            facts(1_000),
            *(cases(f"q{k}", [f"f{k} < 50", f"f{k} >= 50"]) for k in range(1_000)),
            result=added("q", 1_000),
        ),
        2**1_000,
    ),
    "a sum of two thousand facts": (
        rulebook(facts(2_000), cases("q", [f"{added('f', 2_000)} < 5000", "otherwise"]), result="q"),
        2,
    ),
    "a chain of two thousand quantities": (chain(2_000), 2),
    "cases nested ninety deep": (nested(90), 90),
    "choices that each ask the next": (asking_each_other(200), fibonacci(203)),
    "a choice in each of two thousand strata": (
        rulebook("index stratum, at most 2000\n", per_stratum(choice("q", ["x", "y"])), result="sum(q over stratum)"),
        2**2_000,
    ),
    "a threshold on the sum of thirty choices": (
        rulebook(
            "index stratum, at most 30\n",
            per_stratum(choice("q", ["x", "y"])),
            cases("w", ["sum(q over stratum) < 45 [t]", "sum(q over stratum) >= 45 [t]"]),
            result="w",
        ),
        2**30,
    ),
    "a threshold on a sum over three hundred strata": (
        rulebook(
            "index stratum, at most 300\nfact a [t] per stratum, 0 to 5, clause 1\n",
            cases("q", ["sum(a over stratum) < 100 [t]", "sum(a over stratum) >= 100 [t]"]),
            result="q",
        ),
        2,
    ),
}


@pytest.mark.parametrize("name", sorted(LARGE))
def test_what_is_only_large_is_exact(name: str) -> None:
    text, reachable = LARGE[name]
    found = evidence_of(text)
    assert found.counts.exact, found.counts.why_inexact
    assert found.counts.reachable == reachable
    assert not found.conditions.undecided
