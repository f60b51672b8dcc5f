"""Everything in a rulebook that somebody decides and that moves the result: choices, overlaps, settings, judgements.

All elements of an index together are one latitude, each element with a decision of its own.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from fractions import Fraction
from typing import Literal

from samesum.evidence.choosing.programs import LOWEST, STATED, Program
from samesum.evidence.routes.witness import usual
from samesum.graph import BranchPoint
from samesum.reading import model as m
from samesum.reading import walk

Kind = Literal["choice", "overlap", "setting", "judgement", "stated"]


@dataclass(frozen=True, slots=True)
class Latitude:
    """``id`` is the branch point's general id, or a setting's or judgement's name. ``candidates`` are options, branches
    or values by name; ``reference`` the one that counts as the truth. ``stated``: nobody decides, but the quantity says
    how it errs, or the rulebook has settled what is taken. ``noises``: bias and error of each option that states one.
    ``withheld``: deductions against this choice, which the truth does not know. ``leaning``: of a choice, 1 where more
    of what it gives credits more, −1 where it credits less, 0 where it goes both ways or nobody asked."""

    id: str
    kind: Kind
    by: m.Decider
    timing: Literal["validation", "period", ""]
    clause: str
    candidates: tuple[str, ...]
    reference: int
    noises: Mapping[str, tuple[float, float]] = field(default_factory=dict)
    withheld: tuple[str, ...] = ()
    values: tuple[float | int | bool, ...] = ()
    low: float = 0.0
    high: float = 0.0
    leaning: int = 0

    @property
    def is_input(self) -> bool:
        """Whether this is a setting or a judgement, settled ones included."""
        return bool(self.values)

    def points(self, program: Program) -> tuple[str, ...]:
        """The branch points in projects of this size, one an element; the name itself for an input."""
        if self.is_input:
            return (self.id,) if self.id in program.inputs else ()
        graph = program.graph
        mine = (id for id in program.points if graph.branch_points[id].general_id == self.id)
        return tuple(id for id in mine if id in program.selects)


def find_latitudes(program: Program) -> tuple[Latitude, ...]:
    """In the order of the rulebook: branch points first, then settings and judgements."""
    graph = program.graph
    live = set(program.live)
    found: dict[str, Latitude] = {}
    for id, point in graph.branch_points.items():
        if point.general_id in found or program.selects.get(id) not in live:
            continue
        if id in program.taken:
            found[point.general_id] = _settled(point, program.taken[id])
        elif isinstance(point.body, m.Choice):
            stated = point.branches == (STATED,)
            found[point.general_id] = Latitude(
                id=point.general_id,
                kind="stated" if stated else "choice",
                by=point.body.by,
                timing=point.timing,
                clause=point.clause,
                candidates=point.branches,
                reference=program.choosing[id].order[0],
                noises={
                    option.name: (float(option.bias or 0), float(option.error or 0))
                    for option in point.body.options
                    if option.error is not None or option.bias is not None
                },
                withheld=_withheld(program, point.quantity),
            )
        elif point.kind == "cases" and sum(condition is not None for condition in point.conditions) > 1:
            found[point.general_id] = Latitude(
                point.general_id, "overlap", "developer", "", point.clause, point.branches, 0
            )
    latitudes = list(found.values())
    inputs: list[m.Setting | m.Judgement] = [*graph.model.settings, *graph.model.judgements]
    for each in inputs:
        if any(number in live for number in program.inputs.get(each.name, ())):
            known = _input(each)
            if each.name in program.prescribed:
                value = program.prescribed[each.name]
                known = replace(known, kind="stated", candidates=("as prescribed",), reference=0, values=(value,))
            latitudes.append(known)
    return tuple(latitudes)


def _settled(point: BranchPoint, branch: int) -> Latitude:
    """A choice that nobody makes any more."""
    assert isinstance(point.body, m.Choice)
    name = m.LOWEST if branch == LOWEST else m.HIGHEST if branch < 0 else point.branches[branch]
    noises = {
        option.name: (float(option.bias or 0), float(option.error or 0))
        for option in point.body.options
        if option.name == name and (option.error is not None or option.bias is not None)
    }
    return Latitude(point.general_id, "stated", point.body.by, "", point.clause, (name,), 0, noises)


def _withheld(program: Program, quantity: str) -> tuple[str, ...]:
    declared = next(each for each in program.graph.model.quantities if each.name == quantity)
    mentioned = {
        inner.name
        for node in walk.written_in(declared.body)
        for inner in walk.inside(node)
        if isinstance(inner, m.Reference) and inner.kind == "constant"
    }
    return tuple(name for name in program.withheld if name in mentioned)


def _input(each: m.Setting | m.Judgement) -> Latitude:
    if isinstance(each, m.Judgement) or isinstance(each.domain, m.YesNo):
        values: tuple[float | int | bool, ...] = (True, False)
        names: tuple[str, ...] = ("yes", "no")
        reference = 0
    elif isinstance(each.domain, m.OneOf):
        values, names, reference = tuple(range(len(each.domain.values))), each.domain.values, 0
    else:
        return _number(each, each.domain)
    kind: Kind = "judgement" if isinstance(each, m.Judgement) else "setting"
    return Latitude(each.name, kind, each.by, "", each.about.clause, names, reference, values=values)


def middle(domain: m.Domain) -> Fraction | str | bool:
    """Where a setting stands when nobody gives it: mid-domain, its only end or 0; the first name; yes."""
    if not isinstance(domain, m.Range):
        return usual(domain)
    if domain.low is None or domain.high is None:
        return domain.low if domain.low is not None else domain.high if domain.high is not None else Fraction(0)
    return (domain.low + domain.high) / 2


def _number(each: m.Setting, domain: m.Range) -> Latitude:
    """A numeric setting: both ends, the middle, and the quarters between, in case the best is not at an end."""
    stands = middle(domain)
    assert isinstance(stands, Fraction)
    low = domain.low if domain.low is not None else stands
    high = domain.high if domain.high is not None else stands
    places = sorted({low, (low + stands) / 2, stands, (stands + high) / 2, high})
    percent = not each.unit.text and high <= 1
    behind = " %" if percent else f" {each.unit.text}" if each.unit.text else ""
    return Latitude(
        each.name,
        "setting",
        each.by,
        "",
        each.about.clause,
        tuple(f"{float(place) * (100 if percent else 1):g}{behind}" for place in places),
        places.index(stands),
        values=tuple(float(place) for place in places),
        low=float(low),
        high=float(high),
    )
