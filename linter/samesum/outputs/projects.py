"""A project that shows something, in the trade's words and as plain values."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

from samesum.evidence.routes.witness import Value, Witness
from samesum.reading import model as m
from samesum.written import number, percent, plain

LONGEST = 9


@dataclass(frozen=True, slots=True)
class Words:
    """How the names of a rulebook are spoken of."""

    units: Mapping[str, str]
    shares: frozenset[str]
    indices: Mapping[str, str]


def words_for(model: m.Model) -> Words:
    """The words of one rulebook: units by name, which plain numbers are shares, the index of each fact."""
    both: tuple[m.Fact | m.Setting, ...] = (*model.facts, *model.settings)
    return Words(
        {each.name: each.unit.text for each in both},
        frozenset(each.name for each in both if _is_share(each)),
        {each.name: each.index for each in model.facts if each.index},
    )


def _is_share(declared: m.Fact | m.Setting) -> bool:
    domain = declared.domain
    return (
        not declared.unit.text
        and isinstance(domain, m.Range)
        and domain.low is not None
        and domain.high is not None
        and domain.low >= -1
        and domain.high <= 1
    )


def project(witness: Witness, words: Words) -> str:
    """``a project with soil mineral and salinity 10 ppt``; "any project" when nothing matters."""
    facts = [given(name, value, words) for name, value in witness.facts]
    set_to = [given(name, value, words, " set to") for name, value in witness.settings]
    read = [f"{name} read as {'yes' if value else 'no'}" for name, value in witness.judgements]
    everything = [*facts, *set_to, *read]
    left = len(everything) - LONGEST
    if left > 1:
        everything = [*everything[:LONGEST], f"{left} more given values"]
    return f"a project with {_joined(everything)}" if everything else "any project"


def shown(witness: Witness, words: Words, besides: str = "") -> str:
    """A project, and the branches on the way to what it shows; ``besides`` is the branch point (general id) whose
    own branch is told already."""
    steps = [(point, branch) for point, branch in witness.route if not besides or general_id(point) != besides]
    return project(witness, words) + (f", on the route {route(steps)}" if steps else "")


def general_id(point: str) -> str:
    """A branch point's id without its element's number: ``stock@3/plots`` is ``stock/plots``."""
    head, slash, tail = point.partition("/")
    return head.partition("@")[0] + slash + tail


def route(steps: Iterable[tuple[str, str]]) -> str:
    """``soil_carbon: plots, methane: 2``."""
    return ", ".join(f"{point}: {branch}" for point, branch in steps)


def given(name: str, value: Value | tuple[Value, ...], words: Words, verb: str = "") -> str:
    if isinstance(value, tuple):
        index = words.indices.get(name, "element")
        if len(value) > 1 and len(set(value)) == 1:
            return f"{name}{verb} {_value(name, value[0], words)} in every {index}"
        shown = [_value(name, each, words, number == len(value)) for number, each in enumerate(value, start=1)]
        return f"{name}{verb} {' / '.join(shown)} by {index}"
    return f"{name}{verb} {_value(name, value, words)}"


def _value(name: str, value: Value, words: Words, with_unit: bool = True) -> str:
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, str):
        return value
    if name in words.shares:
        return percent(value)
    unit = words.units.get(name, "")
    return f"{plain(value)} {unit}" if unit and with_unit else plain(value)


def _joined(parts: list[str]) -> str:
    return parts[0] if len(parts) == 1 else f"{', '.join(parts[:-1])} and {parts[-1]}"


def as_values(witness: Witness) -> dict[str, Any]:
    """A witness for JSON: every name given with its value, numbers in the declared unit. The branches taken
    stand beside it, because a fact may be called ``route``."""
    return {name: _plain_value(value) for name, value in witness.inputs}


def _plain_value(value: Value | tuple[Value, ...]) -> Any:
    if isinstance(value, tuple):
        return [_plain_value(each) for each in value]
    if isinstance(value, Fraction):
        return number(value)
    return value
