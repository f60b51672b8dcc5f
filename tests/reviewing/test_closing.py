"""Routes that are left when a place counts as a fact, against brute force and against the rulebook rewritten.

The law is one of ``architecture``'s: "closing a branch point never adds a route".
"""

from __future__ import annotations

import re

import numpy as np
import pytest

from brute.counts import Route, _best, _different
from brute.evaluate import Evaluator
from brute.generate import rulebook
from brute.points import representative
from brute.rulebooks import Rulebook
from brute.text import render
from samesum.evidence.routes.closing import Bracket, figures_if_given
from samesum.evidence.routes.layout import Given
from samesum.graph import DecisionGraph, build
from samesum.reading.read import read
from support.asking import counts_of, reader

SECONDS = 60.0


def graph_of(text: str) -> DecisionGraph:
    reading = read(text, "generated.rulebook", reader=reader())
    assert reading.model is not None and not reading.problems
    return build(reading.model)


def left_by_listing(made: Rulebook, general: str, graph: DecisionGraph) -> int:
    """The most routes of one project among which this place is in one branch wherever it is reached."""
    points = representative(made)
    evaluator = Evaluator(made, points)
    routes: list[Route] = []
    open_at = []
    counted = np.zeros(points.rows, dtype=bool)
    for one in evaluator.passes():
        inside = one.mask & one.inside
        counted |= inside
        if inside.any() and one.complete.any():
            routes.append({id: branch for id, branch in one.states.items() if branch is not None})
            open_at.append(one.complete)
    eligible = np.logical_or.reduceat(counted, points.projects)
    if not eligible.any() or not routes:
        return 0
    projects = np.logical_or.reduceat(np.array(open_at), points.projects, axis=1)[:, eligible]
    chosen = {id for id, point in graph.branch_points.items() if point.general_id == general}
    return max(_best([routes[k] for k in np.flatnonzero(one)], chosen) for one in _different(projects))


@pytest.mark.parametrize("first", range(0, 240, 40))
def test_what_closing_a_branch_point_leaves_agrees_with_brute_force(first: int) -> None:
    looked = 0
    for seed in range(first, first + 40):
        made = rulebook(seed)
        text = render(made)
        graph = graph_of(text)
        general = list(dict.fromkeys(point.general_id for point in graph.branch_points.values()))
        asked = [("per_project_most", Given(points=frozenset((id,)))) for id in general]
        found = figures_if_given(graph, asked, SECONDS)
        open_now = counts_of(text, SECONDS).per_project_most
        for id, figure in zip(general, found, strict=True):
            expected = left_by_listing(made, id, graph)
            assert figure == Bracket(expected, expected), f"seed {seed}, {id}\n{text}"
            assert expected <= open_now
            looked += 1
    assert looked > 40


def test_a_judgement_or_setting_that_counts_as_a_fact_is_the_same_as_one() -> None:
    looked = 0
    for seed in range(400):
        text = render(rulebook(seed))
        names = re.findall(r"(?m)^judgement (\w+)", text)
        if not names:
            continue
        graph = graph_of(text)
        asked = [("per_project_most", Given(names=frozenset((name,)))) for name in names]
        for name, figure in zip(names, figures_if_given(graph, asked, SECONDS), strict=True):
            rewritten, count = re.subn(rf'(?m)^judgement {name}, "[^"]*", by \w+', f"fact {name}, yes or no", text)
            assert count == 1
            expected = counts_of(rewritten, SECONDS).per_project_most
            assert figure == Bracket(expected, expected), f"seed {seed}, {name}\n{text}"
            looked += 1
    assert looked > 60


def test_without_time_nothing_is_claimed() -> None:
    graph = graph_of(render(rulebook(3)))
    (found,) = figures_if_given(graph, [("per_project_most", Given())], seconds=-1.0)
    assert found == Bracket(0, None)
