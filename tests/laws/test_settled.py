"""What the rulebook itself ``takes`` agrees with a brute-force evaluator on generated rulebooks and projects.

Held to, for each project: routes, distinct results, lowest, highest and reference of ``trial`` to 1e-9 relative. And of
``count`` the figures that are asked of a project: how many routes are open to one and to its developer, and over the
periods. The others of ``count`` are left out (on_paper, reachable, dead branches, the names of places): they depend on
how a choice that nobody makes is spread out into cases. Other laws hold those where every choice is made. The meaning
that brute force follows stands in ``brute.taking``.
"""

from __future__ import annotations

import time

import pytest

from brute import trial as brute
from brute.counts import per_project
from brute.generate import Dice, case
from brute.rulebooks import Rulebook
from brute.settler import is_settled_and_asked, is_settled_per_index, settled_choices, settled_rulebook
from brute.text import render
from laws.test_trial import free_numbers, same
from samesum.evidence.choosing.batches import batches_of
from samesum.evidence.routes.counting import count
from samesum.evidence.routes.diagrams import Limits
from samesum.evidence.routes.relating import build_network
from samesum.evidence.trial.figures import figures_of
from samesum.evidence.trial.outcome import CaseTrial, case_trial
from samesum.graph import DecisionGraph, build
from samesum.reading.cases import Case
from samesum.reading.read import Reader, make_reader, read
from samesum.spans import START

RULEBOOKS = 510
EACH = 102
PROJECTS = 3
SECONDS = 60.0


@pytest.fixture(scope="module")
def reader() -> Reader:
    return make_reader(None)


@pytest.mark.parametrize("first", range(0, RULEBOOKS, EACH))
def test_every_figure_agrees_with_brute_force(first: int, reader: Reader) -> None:
    for seed in range(first, first + EACH):
        made = settled_rulebook(seed)
        text = render(made)
        reading = read(text, "generated.rulebook", reader=reader)
        assert reading.problems == (), f"seed {seed}\n{text}"
        assert reading.model is not None
        graph = build(reading.model)
        dice = Dice(seed)
        cases = [case(made, dice) for _ in range(PROJECTS)]
        for given, found in zip(cases, trials(graph, cases), strict=True):
            what = difference(made, given, found)
            assert not what, f"seed {seed}: {what}\n{given}\n{text}"
        counts = count(graph, SECONDS, build_network(graph, Limits(time.monotonic() + SECONDS)))
        assert counts.exact
        figures = (
            counts.per_project_most, counts.per_project_least, counts.developer_most, counts.over_periods_most,
        )  # fmt: skip
        assert figures == per_project(made), f"seed {seed}\n{text}"


def trials(graph: DecisionGraph, cases: list[brute.Case]) -> list[CaseTrial]:
    given = [
        Case(str(k), {n: tuple(v) if isinstance(v, list) else v for n, v in each.items()}, None, START)
        for k, each in enumerate(cases)
    ]
    found: dict[int, CaseTrial] = {}
    for batch in batches_of(graph.model, given):
        figures = figures_of(batch, time.monotonic() + SECONDS)
        for row, place in enumerate(batch.places.tolist()):
            found[place] = case_trial(given[place].name, figures, row)
    return [found[k] for k in range(len(cases))]


def difference(made: Rulebook, given: brute.Case, found: CaseTrial) -> str:
    """What differs between the two, in a few words; "" when nothing does."""
    expected = brute.trial(made, given)
    if found.outside != expected.outside:
        return f"outside {found.outside}, brute {expected.outside}"
    if expected.outside:
        return ""
    if found.routes != expected.routes:
        return f"routes {found.routes}, brute {expected.routes}"
    free = free_numbers(made, given)
    if not free and found.distinct_results != len(expected.results):
        return f"distinct {found.distinct_results}, brute {len(expected.results)}: {expected.results}"
    for name, one, other, sign in (
        ("lowest", found.lowest, expected.lowest, 1),
        ("highest", found.highest, expected.highest, -1),
        ("reference", found.reference, expected.reference, 0),
    ):
        if (one is None) != (other is None):
            return f"{name} {one}, brute {other}"
        if one is None or other is None:
            continue
        if free and sign:
            # Brute force tries some values of each setting: it can miss an extreme, not go beyond it.
            if found.complete and sign * (one.value - other.value) > 1e-9 * max(1.0, abs(other.value)):
                return f"{name} {one.value}, brute finds {other.value}"
        elif not same(one.value, other.value):
            return f"{name} {one.value}, brute {other.value}"
    return ""


def test_the_generated_rulebooks_hold_what_is_compared() -> None:
    """Nested choices, some per index, some followed or asked, of every kind, with options that are not always open."""
    made = [settled_rulebook(seed) for seed in range(EACH)]
    choices = [(each, q.body, c) for each in made for q in each.quantities for c in settled_choices(q.body)]
    assert {bool(c.extreme) for _, _, c in choices} == {True, False}
    guarded = [c for _, _, c in choices if any(o.only_when is not None for o in c.options)]
    assert len(guarded) > EACH / 4
    assert sum(c is not body for _, body, c in choices) > EACH / 4
    assert sum(map(is_settled_per_index, made)) > EACH / 4
    assert sum(map(is_settled_and_asked, made)) > EACH / 4
    assert any(each.takes is not None for book in made for each in (*book.settings, *book.judgements))
