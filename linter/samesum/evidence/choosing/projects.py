"""Projects for a simulation: drawn from the declared domains, or the projects of a cases file, over and over.

In blocks of equal size, each with random streams of its own keyed by the names of what is drawn, so that a block
comes out the same whichever core works on it, and a name keeps its numbers when other names come or go.
"""

from __future__ import annotations

import hashlib
import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

from samesum.evidence.choosing.latitudes import middle
from samesum.evidence.choosing.programs import Program, make_program, needed_for
from samesum.evidence.choosing.simulate import World, evaluate
from samesum.evidence.routes.witness import Value, usual
from samesum.reading import model as m

if TYPE_CHECKING:
    from samesum.evidence.choosing.batches import Batch
    from samesum.reading.cases import Case

Array = npt.NDArray[Any]
BLOCK = 16_384
_MOST_ATTEMPTS = 4_000


class CannotDraw(ValueError):
    """Projects cannot be had; says why, and what to write, in the trade's words."""


@dataclass(frozen=True, slots=True)
class Source:
    """Where projects come from: one program and ``rows`` of given inputs for each combination of index sizes.

    ``share`` is how many of all projects come from here, out of ``whole``. ``given``: settings and judgements that a
    project fixes (per name whether each row does).
    """

    program: Program
    rows: int
    inputs: Mapping[str, Array]
    given: Mapping[str, Array]


@dataclass(frozen=True, slots=True)
class Supply:
    """``sources`` (one, without rows, when projects are drawn from domains); ``outside`` and ``without_result``: how
    many of the given projects were left out because they fail applicability, or have no result on the reference."""

    model: m.Model
    sources: tuple[Source, ...]
    cases: int
    outside: int
    without_result: int


@dataclass(frozen=True, slots=True)
class Stretch:
    """A block of work: projects ``start`` to ``start + count`` of source ``source``; ``number`` keys the draws."""

    number: int
    source: int
    start: int
    count: int


@dataclass(frozen=True, slots=True)
class Projects:
    """A block's projects: the value of every input (facts, and settings and judgements at their reference)."""

    program: Program
    inputs: Mapping[str, Array]
    given: Mapping[str, Array]
    count: int


def generator(seed: int, block: int, *names: str) -> np.random.Generator:
    """The random stream of a block that belongs to these names."""
    digest = hashlib.sha256("\x1f".join(names).encode()).digest()
    words = [int.from_bytes(digest[at : at + 4], "little") for at in range(0, 16, 4)]
    return np.random.Generator(np.random.PCG64(np.random.SeedSequence([seed, block, *words])))


# --- supply ------------------------------------------------------------------------------------


def from_domains(model: m.Model, unbounded: bool = False) -> Supply:
    """Projects drawn from the declared domains: uniform, or normal within it for a fact with ``mean … spread``.

    Raises ``CannotDraw`` when a fact that matters has neither a whole domain nor a spread; with ``unbounded`` such a
    fact stands at one usual value in all projects instead.
    """
    program = make_program(model)
    for fact in model.facts:
        domain = fact.domain
        if unbounded or not isinstance(domain, m.Range) or fact.spread is not None or not _matters(program, fact):
            continue
        if domain.low is None or domain.high is None:
            raise CannotDraw(
                f"{fact.name} may be any number, so that no projects can be drawn; "
                "give it a domain as in `1 to 500`, or a `mean … spread …`, or give projects with --inputs"
            )
    return Supply(model, (Source(program, 0, {}, {}),), 0, 0, 0)


def from_batches(model: m.Model, batches: Sequence[Batch]) -> Supply:
    """The given projects, each in turn as often as the others. Those outside the rulebook's applicability, and those
    that have no result on the reference route, are left out and counted.

    Raises ``CannotDraw`` when none is left.
    """
    sources: list[Source] = []
    outside = without = 0
    for batch in sorted(batches, key=lambda each: sorted(each.plan.graph.sizes.items())):
        rows = batch.rows
        program = make_program(model, batch.plan.graph.sizes)
        inputs: dict[str, Array] = {**rows.numbers, **rows.codes, **rows.flags}
        given = {name: ~free for name, free in rows.free.items() if not free.all()}
        values = evaluate(program, inputs, truth(program))
        inside = _all([values[number] for number in program.applies], rows.count)
        found = inside & np.isfinite(_full(values[program.result], rows.count))
        outside += int(np.sum(~inside))
        without += int(np.sum(inside & ~found))
        if np.any(found):
            kept = {name: array[found] for name, array in inputs.items()}
            fixed = {name: array[found] for name, array in given.items()}
            sources.append(Source(program, int(np.sum(found)), kept, fixed))
    if not sources:
        raise CannotDraw("none of the projects given has a result: see `samesum trial` for each of them")
    return Supply(model, tuple(sources), sum(batch.rows.count for batch in batches), outside, without)


def from_cases(model: m.Model, cases: Sequence[Case]) -> Supply:
    """The projects of a file of cases. Raises ``CannotDraw`` as ``from_batches`` does."""
    from samesum.evidence.choosing.batches import batches_of

    return from_batches(model, batches_of(model, cases))


def truth(program: Program) -> World:
    """The world of the true credits: reference everywhere, no error, deductions for choice left out."""
    return World(inputs=dict.fromkeys(program.withheld, 0.0))


def stretches(supply: Supply, projects: int) -> tuple[Stretch, ...]:
    """The blocks that make up so many projects; of given ones each source gets its share."""
    whole = sum(source.rows for source in supply.sources)
    made: list[Stretch] = []
    done = 0
    for number in range(len(supply.sources)):
        rows_so_far = sum(each.rows for each in supply.sources[: number + 1])
        end = projects * rows_so_far // whole if whole else projects
        start = 0
        while start < end - done:
            count = min(BLOCK, end - done - start)
            made.append(Stretch(len(made), number, start, count))
            start += count
        done = end
    return tuple(made)


def projects_of(supply: Supply, stretch: Stretch, seed: int) -> Projects:
    """A block's projects. Raises ``CannotDraw`` when hardly any drawn project meets ``applies when``."""
    source = supply.sources[stretch.source]
    if source.rows:
        rows = (stretch.start + np.arange(stretch.count)) % source.rows
        inputs = {name: array[rows] for name, array in source.inputs.items()}
        given = {name: held[rows] for name, held in source.given.items()}
        return Projects(source.program, inputs, given, stretch.count)
    return Projects(source.program, _drawn(supply.model, source.program, stretch, seed), {}, stretch.count)


def _coded(value: Value, domain: m.Domain) -> float | int | bool:
    """A value as the arrays hold it: a number, the place of a name in its domain, yes or no."""
    if isinstance(value, str):
        return domain.values.index(value) if isinstance(domain, m.OneOf) else -1
    return value if isinstance(value, bool) else float(value)


def _reference_of(each: m.Setting | m.Judgement) -> float | int | bool:
    """Where a setting or judgement stands when nobody gives it: mid-domain, the first name, yes."""
    if isinstance(each, m.Judgement):
        return True
    return _coded(middle(each.domain), each.domain)


# --- drawn projects ----------------------------------------------------------------------------


def _matters(program: Program, fact: m.Fact) -> bool:
    sizes = program.graph.sizes
    names = [f"{fact.name}@{place}" for place in range(1, sizes[fact.index] + 1)] if fact.index else [fact.name]
    live = set(program.live)
    return any(number in live for name in names for number in program.inputs.get(name, ()))


def _drawn(model: m.Model, program: Program, stretch: Stretch, seed: int) -> dict[str, Array]:
    """Facts of so many projects inside applicability that have a result on the reference route.

    Conditions of applicability that share no fact are met one after the other, so that the odds of missing do not
    multiply; then whole projects without a reference result are drawn again.
    """
    domains = _fact_domains(model, program)
    count = stretch.count
    decided: list[m.Setting | m.Judgement] = [*model.settings, *model.judgements]
    fixed: dict[str, Array] = {each.name: np.full(count, _reference_of(each)) for each in decided}
    groups = _groups(program, domains)
    inputs = dict(fixed)
    kept = np.zeros(count, dtype=bool)
    for attempt in range(_MOST_ATTEMPTS):
        fresh = dict(fixed)
        for names, conditions in groups:
            fresh.update(_inside(program, domains, names, conditions, fresh, count, (seed, stretch.number, attempt)))
        values = evaluate(program, fresh, truth(program))
        found = np.isfinite(_full(values[program.result], count))
        if attempt == 0:
            inputs, kept = fresh, found
        else:
            wanted = np.flatnonzero(~kept)
            source = np.flatnonzero(found)[: len(wanted)]
            places = wanted[: len(source)]
            for name in domains:
                inputs[name][places] = fresh[name][source]
            kept[places] = True
        if kept.all():
            return inputs
    raise CannotDraw("hardly any project of the declared domains has a result: see the gaps in `samesum count`")


Key = tuple[int, int, int]


def _inside(
    program: Program,
    domains: Mapping[str, m.Fact],
    names: Sequence[str],
    conditions: Sequence[int],
    others: Mapping[str, Array],
    count: int,
    key: Key,
) -> dict[str, Array]:
    seed, block, attempt = key
    streams = {name: generator(seed, block, "fact", name, str(attempt)) for name in names}
    made = {name: _draw(streams[name], domains[name], count) for name in names}
    if not conditions:
        return made
    needed = needed_for(program.nodes, conditions)
    kept = _met(program, {**others, **made}, conditions, needed, count)
    for _ in range(_MOST_ATTEMPTS):
        missing = np.flatnonzero(~kept)
        if not len(missing):
            return made
        again = {name: _draw(streams[name], domains[name], count) for name in names}
        found = np.flatnonzero(_met(program, {**others, **again}, conditions, needed, count))[: len(missing)]
        places = missing[: len(found)]
        for name in names:
            made[name][places] = again[name][found]
        kept[places] = True
    clauses = ", ".join(sorted({each.about.clause for each in program.graph.model.applies if each.about.clause}))
    where = f" (clause {clauses})" if clauses else ""
    raise CannotDraw(
        f"hardly any project of the declared domains meets `applies when`{where}; "
        "narrow the domains of the facts, or give projects with --inputs"
    )


def _draw(stream: np.random.Generator, fact: m.Fact, count: int) -> Array:
    domain = fact.domain
    if isinstance(domain, m.YesNo):
        return stream.random(count) < 0.5
    if isinstance(domain, m.OneOf):
        return stream.integers(0, len(domain.values), count, dtype=np.int64)
    low = float(domain.low) if domain.low is not None else -math.inf
    high = float(domain.high) if domain.high is not None else math.inf
    if fact.spread is None:
        if not math.isfinite(low) or not math.isfinite(high):
            return np.full(count, _coded(usual(domain), domain))
        return stream.uniform(low, high, count) if high > low else np.full(count, low)
    mean, spread = float(fact.spread.mean), float(fact.spread.spread)
    values = mean + spread * stream.standard_normal(count)
    for _ in range(_MOST_ATTEMPTS):
        beyond = np.flatnonzero((values < low) | (values > high))
        if not len(beyond):
            return values
        values[beyond] = mean + spread * stream.standard_normal(len(beyond))
    raise CannotDraw(
        f"{fact.name}: hardly any value around its mean lies inside its domain; mend its `mean … spread …`"
    )


def _fact_domains(model: m.Model, program: Program) -> dict[str, m.Fact]:
    """The facts that something asked for needs, by name and element."""
    live = set(program.live)
    found: dict[str, m.Fact] = {}
    for fact in model.facts:
        places = range(1, program.graph.sizes[fact.index] + 1) if fact.index else (0,)
        for place in places:
            name = f"{fact.name}@{place}" if fact.index else fact.name
            if any(number in live for number in program.inputs.get(name, ())):
                found[name] = fact
    return found


def _groups(program: Program, domains: Mapping[str, m.Fact]) -> list[tuple[tuple[str, ...], tuple[int, ...]]]:
    """Facts with the conditions of applicability that tie them; free facts last, on their own."""
    ties: list[tuple[set[str], set[int]]] = []
    for condition in program.applies:
        names = {
            program.nodes[number].name
            for number in needed_for(program.nodes, (condition,))
            if program.nodes[number].kind in ("input", "code", "holds")
        } & set(domains)
        conditions = {condition}
        apart = []
        for other in ties:
            if other[0] & names:
                names |= other[0]
                conditions |= other[1]
            else:
                apart.append(other)
        ties = [*apart, (names, conditions)]
    tied = set().union(*(names for names, _ in ties)) if ties else set()
    groups = [(tuple(sorted(names)), tuple(sorted(conditions))) for names, conditions in ties]
    groups.sort()
    return [*groups, (tuple(sorted(set(domains) - tied)), ())]


def _met(
    program: Program, inputs: Mapping[str, Array], conditions: Sequence[int], needed: Sequence[int], count: int
) -> Array:
    values = evaluate(program, inputs, truth(program), numbers=needed)
    return _all([values[number] for number in conditions], count)


def _all(conditions: Sequence[Any], count: int) -> Array:
    met = np.ones(count, dtype=bool)
    for each in conditions:
        met &= each
    return met


def _full(value: Any, count: int) -> Array:
    return np.broadcast_to(np.asarray(value, dtype=np.float64), (count,))


def blocks(supply: Supply, projects: int, seed: int) -> Iterator[Projects]:
    """The projects, block after block."""
    for stretch in stretches(supply, projects):
        yield projects_of(supply, stretch, seed)
