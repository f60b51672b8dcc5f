"""Projects as rows of arrays: those with the same number of elements stand side by side."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING

import numpy as np

from samesum.evidence.trial.arrays import Array
from samesum.evidence.trial.plan import Plan, make_plan, resized
from samesum.evidence.trial.values import Rows
from samesum.reading import model as m
from samesum.reading.cases import Case, Value

if TYPE_CHECKING:
    from samesum.reading.columns import Columns


@dataclass(frozen=True, slots=True)
class Batch:
    """Rows of one size. ``places``: which projects of the input they are."""

    plan: Plan
    rows: Rows
    places: Array


def sizes_of(case: Case, model: m.Model) -> tuple[tuple[str, int], ...]:
    """How many elements of each index a project has: as many as its lists are long."""
    found = {index.name: index.most for index in model.indices}
    for fact in model.facts:
        value = case.values.get(fact.name)
        if fact.index and isinstance(value, tuple):
            found[fact.index] = len(value)
    return tuple(found.items())


def batches_of(model: m.Model, cases: Sequence[Case]) -> list[Batch]:
    """Projects grouped by size, each group with the plan of that size. Raises ``Unplannable``."""
    groups: dict[tuple[tuple[str, int], ...], list[int]] = {}
    for place, case in enumerate(cases):
        groups.setdefault(sizes_of(case, model), []).append(place)
    found = []
    for sizes, places in groups.items():
        plan = make_plan(resized(model, dict(sizes)))
        found.append(Batch(plan, rows_of(plan, [cases[place] for place in places]), np.array(places)))
    return found


def batches_of_columns(model: m.Model, columns: Columns) -> list[Batch]:
    """Projects of a table, grouped by size. Raises ``Unplannable``."""
    count = len(columns.names)
    sizes = np.stack([columns.sizes[index.name] for index in model.indices] or [np.zeros(count, dtype=np.int64)])
    kinds, which = np.unique(sizes, axis=1, return_inverse=True)
    which = which.reshape(-1)
    found = []
    for number in range(kinds.shape[1]):
        places = np.flatnonzero(which == number)
        wanted = {index.name: int(kinds[place, number]) for place, index in enumerate(model.indices)}
        plan = make_plan(resized(model, wanted))
        found.append(Batch(plan, _rows_of_columns(plan, columns, places), places))
    return found


def _inputs(plan: Plan) -> Iterator[tuple[m.Fact | m.Setting | m.Judgement, m.Domain, int, str]]:
    """Every input of a project of this size: what declares it, its domain, its element (0 where it has none) and id.
    What the rulebook prescribes itself stands there, too, as the reference has it."""
    model = plan.graph.written
    declared: list[m.Fact | m.Setting | m.Judgement] = [*model.facts, *model.settings, *model.judgements]
    for each in declared:
        index = each.index if isinstance(each, m.Fact) else ""
        domain: m.Domain = m.YesNo() if isinstance(each, m.Judgement) else each.domain
        for element in range(1, plan.graph.sizes.get(index, 0) + 1) if index else (0,):
            yield each, domain, element, f"{each.name}@{element}" if index else each.name


def _rows_of_columns(plan: Plan, columns: Columns, places: Array) -> Rows:
    numbers: dict[str, Array] = {}
    codes: dict[str, Array] = {}
    flags: dict[str, Array] = {}
    free: dict[str, Array] = {}
    for each, domain, _, id in _inputs(plan):
        given = columns.given[id][places] if id in columns.given else np.zeros(len(places), dtype=bool)
        if not isinstance(each, m.Fact):
            free[id] = ~given if each.takes is None else np.zeros(len(places), dtype=bool)
        if isinstance(domain, m.Range):
            known = columns.numbers[id][places] if id in columns.numbers else np.zeros(len(places))
            numbers[id] = np.where(given, known, float(middle(domain)))
        elif isinstance(domain, m.OneOf):
            named = columns.codes[id][places] if id in columns.codes else np.zeros(len(places), dtype=np.int64)
            codes[id] = np.where(given, named, 0)
        else:
            flag = columns.flags[id][places] if id in columns.flags else np.ones(len(places), dtype=bool)
            flags[id] = np.where(given, flag, True)
    return Rows(len(places), numbers, codes, flags, free)


def rows_of(plan: Plan, cases: Sequence[Case]) -> Rows:
    """The inputs of projects of one size. What nobody gives stands as the reference has it: a setting half-way, its
    first name or yes, a judgement yes; and is marked free."""
    numbers: dict[str, Array] = {}
    codes: dict[str, Array] = {}
    flags: dict[str, Array] = {}
    free: dict[str, Array] = {}
    for each, domain, element, id in _inputs(plan):
        given = [_value(case, each.name, element) for case in cases]
        if not isinstance(each, m.Fact):
            free[id] = np.array([value is None and each.takes is None for value in given])
        if isinstance(domain, m.Range):
            usual = middle(domain)
            numbers[id] = np.array([float(usual if value is None else Fraction(value)) for value in given])
        elif isinstance(domain, m.OneOf):
            codes[id] = np.array([0 if value is None else domain.values.index(str(value)) for value in given])
        else:
            flags[id] = np.array([True if value is None else bool(value) for value in given])
    return Rows(len(cases), numbers, codes, flags, free)


def _value(case: Case, name: str, element: int) -> Value | None:
    value = case.values.get(name)
    if isinstance(value, tuple):
        return value[element - 1] if element else None
    return value


def middle(domain: m.Range) -> Fraction:
    """Half-way through a domain; 0, or its one end, where it has no bound."""
    if domain.low is None or domain.high is None:
        return domain.low if domain.low is not None else domain.high if domain.high is not None else Fraction(0)
    return (domain.low + domain.high) / 2


def single(plan: Plan, values: Mapping[str, Value | tuple[Value, ...]]) -> Rows:
    """One project from plain values."""
    from samesum.spans import START

    return rows_of(plan, [Case("", values, None, START)])
