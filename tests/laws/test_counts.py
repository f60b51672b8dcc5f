"""Counts agree with a brute-force evaluator on thousands of random rulebooks.

The law is one of ``architecture``'s: "counts agree with a brute-force evaluator on thousands of random
rulebooks". The meaning that brute force follows stands in ``brute.evaluate`` and ``brute.counts``. A rulebook
goes the whole way here: its text is read, its graph built, its conditions examined and its routes counted.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import HealthCheck, assume, given, settings

from brute import counts as brute
from brute.evaluate import Evaluator, Pass
from brute.generate import fits, rulebook, rulebooks
from brute.linear import TooLarge
from brute.points import Given, representative
from brute.rulebooks import OneOf, Rulebook, at
from brute.text import render
from samesum.evidence.routes.conditions import Conditions, examine_conditions
from samesum.evidence.routes.counting import Counts, count
from samesum.evidence.routes.diagrams import Limits
from samesum.evidence.routes.relating import build_network
from samesum.evidence.routes.witness import Witness
from samesum.graph import build
from samesum.reading.read import Reader, make_reader, read

RULEBOOKS = 2_000
EACH = 100
SECONDS = 60.0  # far more than any of these takes, so that a busy machine changes no answer


@pytest.fixture(scope="module")
def reader() -> Reader:
    return make_reader(None)


def answers(made: Rulebook, reader: Reader) -> tuple[Counts, Conditions]:
    """What samesum says of the rulebook's text."""
    reading = read(render(made), "generated.rulebook", reader=reader)
    assert reading.problems == ()
    assert reading.model is not None
    graph = build(reading.model)
    network = build_network(graph, Limits(time.monotonic() + SECONDS))
    return count(graph, SECONDS, network), examine_conditions(network, SECONDS)


def figures(counts: Counts, conditions: Conditions) -> brute.Counts:
    assert counts.exact
    assert conditions.undecided == ()
    return brute.Counts(
        on_paper=counts.on_paper,
        reachable=counts.reachable,
        per_project_most=counts.per_project_most,
        per_project_least=counts.per_project_least,
        developer_most=counts.developer_most,
        over_periods_most=counts.over_periods_most,
        overlaps=tuple(sorted((o.branch_point, *o.branches) for o in conditions.overlaps)),
        gaps=tuple(sorted(g.branch_point for g in conditions.gaps)),
        dead_branches=tuple(sorted((d.branch_point, d.branch) for d in conditions.dead_branches)),
        free_values=tuple(sorted(counts.free_values)),
    )


@pytest.mark.parametrize("first", range(0, RULEBOOKS, EACH))
def test_every_figure_agrees_with_brute_force(first: int, reader: Reader) -> None:
    for seed in range(first, first + EACH):
        made = rulebook(seed)
        expected = brute.count(made)
        counts, conditions = answers(made, reader)
        assert figures(counts, conditions) == expected, f"seed {seed}\n{render(made)}"
        shown(made, counts, conditions)


@settings(
    max_examples=60,
    deadline=None,
    derandomize=True,
    suppress_health_check=[HealthCheck.too_slow, HealthCheck.filter_too_much, HealthCheck.function_scoped_fixture],
)
@given(made=rulebooks())
def test_every_figure_agrees_on_rulebooks_that_shrink(made: Rulebook, reader: Reader) -> None:
    """The same over hypothesis' rulebooks, which come out small when something is wrong."""
    assume(fits(made))
    try:
        expected = brute.count(made)
    except TooLarge:
        assume(False)
    counts, conditions = answers(made, reader)
    assert figures(counts, conditions) == expected, render(made)


# --- witnesses: "Replaying it shows what it claims" -----------------------------------------


def shown(made: Rulebook, counts: Counts, conditions: Conditions) -> None:
    """Every witness, replayed by brute force, shows what it claims, whatever the value of all that it leaves out."""
    for overlap in conditions.overlaps:
        assert overlap.witness is not None
        assert everywhere(made, overlap.witness, overlap_at(overlap.branch_point, overlap.branches)), (
            f"{overlap}\n{render(made)}"
        )
    for gap in conditions.gaps:
        assert gap.witness is not None
        assert everywhere(made, gap.witness, gap_at(gap.branch_point)), f"{gap}\n{render(made)}"
    for witness, figure in ((counts.most_at, counts.per_project_most), (counts.least_at, counts.per_project_least)):
        if witness is not None:
            points = representative(made, values_of(made, witness.facts))
            table = np.array([one.complete for one in Evaluator(made, points).passes()])
            routes = np.logical_or.reduceat(table, points.projects, axis=1).sum(axis=0)
            assert set(routes) == {figure}, f"{witness}\n{render(made)}"


Claim = Callable[[Evaluator, Pass], np.ndarray | bool]


def overlap_at(id: str, pair: tuple[str, str]) -> Claim:
    def claim(evaluator: Evaluator, one: Pass) -> np.ndarray | bool:
        has, open_ = one.asked.get(id, (None, {}))
        inside = one.mask & one.inside
        return brute.overlapping(evaluator.written[id], open_, inside if has is None else inside & has).get(pair, False)

    return claim


def gap_at(id: str) -> Claim:
    return lambda evaluator, one: brute.gaps(one, one.mask & one.inside).get(id, False)


def everywhere(made: Rulebook, witness: Witness, claim: Claim) -> bool:
    """Whether the claim is true of some evaluation that takes the witness's branches, at every
    point that has the witness's values."""
    points = representative(made, values_of(made, witness.inputs))
    evaluator = Evaluator(made, points)
    found = np.zeros(points.rows, dtype=bool)
    for one in evaluator.passes():
        if all(one.states.get(id) == branch for id, branch in witness.route):
            found |= claim(evaluator, one)
    return bool(found.all())


def values_of(made: Rulebook, inputs: tuple[tuple[str, object], ...]) -> dict[str, Given]:
    """A witness's values as brute force has them, element by element; each inside its domain."""
    domains = {d.name: d.domain for d in (*made.facts, *made.settings)}
    found: dict[str, Given] = {}
    for name, value in inputs:
        listed = isinstance(value, tuple)
        for element, one in enumerate(value if isinstance(value, tuple) else (value,), start=1):
            domain = domains.get(name)
            if isinstance(domain, OneOf):
                one = domain.values.index(one)
            elif isinstance(one, Fraction):
                assert domain.low is None or domain.low <= one
                assert domain.high is None or one <= domain.high
            found[at(name, element) if listed else name] = one
    return found
