"""The generator makes every feature often enough to matter."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator
from dataclasses import fields, is_dataclass

from brute.counts import count
from brute.evaluate import names
from brute.generate import rulebook
from brute.rulebooks import (
    And,
    Band,
    Call,
    Cases,
    Chain,
    Choice,
    Compare,
    Constant,
    Follows,
    Formula,
    Holds,
    Index,
    Is,
    Judgement,
    Lookup,
    Neg,
    Not,
    OneOf,
    Op,
    Option,
    Or,
    Over,
    Position,
    Range,
    Ref,
    Rulebook,
    Setting,
    Table,
    Takes,
    YesNo,
    branches,
)

# --- what is generated -------------------------------------------------------------------------


def inside(node: object) -> Iterator[object]:
    yield node
    if is_dataclass(node):
        for each in fields(node):
            value = getattr(node, each.name)
            for part in value if isinstance(value, tuple) else (value,):
                yield from inside(part)


def features(made: Rulebook) -> set[str]:
    """What a generated rulebook has that is worth having."""
    found: set[str] = set()
    quantities = {q.name: q for q in made.quantities}
    humans = {s.name for s in made.settings}
    for node in inside(made):
        found.add(type(node).__name__)
        if isinstance(node, Cases):
            found.add("in order" if node.in_order else "plain cases")
        if isinstance(node, Choice):
            found |= {node.by, node.timing or "no timing"}
        if isinstance(node, Option) and node.only_when is not None:
            found.add("only when")
        if isinstance(node, Compare):
            mentioned = {name for side in (node.left, node.right) for name in names(side)}
            for name in mentioned & set(quantities):
                under = list(inside(quantities[name].body))
                found.add("a calculated quantity compared")
                if any(isinstance(each, Choice) for each in under):
                    found.add("a calculated quantity that hangs on a choice compared")
                if any(isinstance(each, Ref) and each.name in humans for each in under):
                    found.add("a calculated quantity that hangs on a setting compared")
            if len(mentioned - humans) > 1:
                found.add("two names compared")
            if mentioned & humans:
                found.add("a setting compared")
        if isinstance(node, Cases | Choice) and any(not isinstance(b, Formula) for _, _, b in branches(node)):
            found.add("nested")
        if isinstance(node, Lookup) and any(isinstance(each, Lookup) for a in node.arguments for each in inside(a)):
            found.add("a table asked with what a table answers")
        if isinstance(node, Op) and all(
            any(isinstance(each, Lookup) for each in inside(side)) for side in (node.left, node.right)
        ):
            found.add("tables on both sides of an operation")
    for applies in made.applies:
        if any(isinstance(each, Holds) and each.name in {j.name for j in made.judgements} for each in inside(applies)):
            found.add("applies on a judgement")
    if len(made.indices) > 1:
        found.add("two indices")
    found |= {node.name for node in inside(made) if isinstance(node, Call | Over)}
    found |= {f"operator {node.operator}" for node in inside(made) if isinstance(node, Op)}
    if any(q.index for q in made.quantities):
        found.add("per index")
    return found


def test_every_feature_is_generated_often_enough() -> None:
    """In at least one rulebook in a hundred, and the figures take values that can tell a mistake."""
    many = 600
    tally: Counter[str] = Counter()
    for seed in range(many):
        made = rulebook(seed)
        tally.update(features(made))
        found = count(made)
        tally.update(
            name
            for name, shows in {
                "a gap": found.gaps,
                "an overlap": found.overlaps,
                "a dead branch": found.dead_branches,
                "a free value": found.free_values,
                "projects that differ": found.per_project_most != found.per_project_least,
                "routes that exclude each other": found.per_project_most < found.reachable,
                "less on the ground than on paper": found.reachable < found.on_paper,
                "others decide": found.developer_most < found.per_project_most,
                "fixed at validation": found.over_periods_most < found.per_project_most**made.periods,
            }.items()
            if shows
        )
    kinds = (And, Or, Not, Compare, Chain, Is, Holds, Takes, Formula, Cases, Choice, Follows, Lookup, Over, Call, Neg)
    kinds += (Position, Band, Constant, YesNo, OneOf, Range, Setting, Judgement, Table, Index)
    wanted = [kind.__name__ for kind in kinds]
    wanted += [
        "developer",
        "verifier",
        "programme",
        "validation",
        "period",
        "nested",
        "two indices",
        "sum",
        "mean",
        "min",
        "max",
        "abs",
        "sqrt",
        "ln",
        *(f"operator {sign}" for sign in "+-*/^"),
        "in order",
        "plain cases",
        "no timing",
        "only when",
        "per index",
        "applies on a judgement",
        "a calculated quantity compared",
        "a calculated quantity that hangs on a choice compared",
        "a calculated quantity that hangs on a setting compared",
        "two names compared",
        "a setting compared",
        "a table asked with what a table answers",
        "tables on both sides of an operation",
        "a gap",
        "an overlap",
        "a dead branch",
        "a free value",
        "projects that differ",
        "routes that exclude each other",
        "less on the ground than on paper",
        "others decide",
        "fixed at validation",
    ]
    assert {name: tally[name] for name in wanted if tally[name] < many / 100} == {}
