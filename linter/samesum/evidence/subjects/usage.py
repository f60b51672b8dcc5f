"""What leads to the result, and what its source says."""

from __future__ import annotations

import re
from collections.abc import Iterator

from samesum.graph import names_in
from samesum.reading import model as m
from samesum.reading import walk

_LATEST = re.compile(
    r"\b(latest|current|currently|most recent|most recently|newest|up[- ]to[- ]date|as amended|in force)\b",
    re.IGNORECASE,
)
_YEAR = re.compile(r"\b(1[89]|20|21)\d\d\b")


def undated_latest(source: str) -> bool:
    """Whether a source means a different text next year: "latest" or the like, and no year."""
    return bool(_LATEST.search(source)) and not _YEAR.search(source)


def used_names(model: m.Model) -> tuple[frozenset[str], bool]:
    """The declared names that lead to the result, to applicability or to what an option costs; and whether that
    is all of them (not where a formula on the way could not be read)."""
    bodies = {quantity.name: quantity.body for quantity in model.quantities}
    constants = {constant.name: constant.expression for constant in model.constants}
    whole = True
    found: set[str] = set()
    todo = [model.result.name] if model.result is not None else []
    for applies in model.applies:
        todo += names_in(applies.condition)
        whole = whole and not _unknown(applies.condition)
    while todo:
        name = todo.pop()
        if name in found:
            continue
        found.add(name)
        if name in bodies:
            names, read = _in_body(bodies[name])
            todo += names
            whole = whole and read
        elif name in constants:
            todo += names_in(constants[name])
            whole = whole and not _unknown(constants[name])
    found |= _indices(model, found)
    return frozenset(found), whole


def _in_body(body: m.Body) -> tuple[list[str], bool]:
    names: list[str] = []
    read = True
    for each in walk.bodies(body):
        if isinstance(each, m.Unknown):
            read = False
        if isinstance(each, m.Follows):
            names.append(each.quantity)
        for node in _written(each):
            names += names_in(node)
            read = read and not _unknown(node)
    return names, read


def _written(body: m.Body) -> Iterator[m.Expression | m.Condition]:
    if isinstance(body, m.Formula):
        yield body.expression
    for branch in walk.branches(body):
        condition = walk.condition_of(branch)
        if condition is not None:
            yield condition
        if isinstance(branch, m.Option) and branch.cost is not None:
            yield branch.cost


def _unknown(node: m.Expression | m.Condition) -> bool:
    return any(isinstance(part, m.Unknown) for part in walk.inside(node))


def _indices(model: m.Model, used: set[str]) -> set[str]:
    """Indices that a used fact or quantity is given by, or that a used formula runs over."""
    found = {fact.index for fact in model.facts if fact.name in used}
    for quantity in model.quantities:
        if quantity.name in used:
            found.add(quantity.index)
            for node in walk.written_in(quantity.body):
                found |= {part.index for part in walk.inside(node) if isinstance(part, (m.Reduction, m.Position))}
    for applies in model.applies:
        found |= {part.index for part in walk.inside(applies.condition) if isinstance(part, (m.Reduction, m.Position))}
    return found - {""}
