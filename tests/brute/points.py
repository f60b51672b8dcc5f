"""The finite list of projects and human inputs that stands for all of them, exactly.

Why a finite list is enough. Numbers matter to a route only through comparisons and table bands.
Taken apart over all branches, each of these asks for the sign of a linear form a·v + c over numeric
facts and settings v (``atoms``; other comparisons are refused with ``TooLarge``). So two points with
the same sign (-, 0, +) of every atom are on the same routes.

Why the list misses no sign pattern (cylindrical decomposition; for linear forms this is
Fourier-Motzkin elimination). Order the variables v1..vn. Eliminate vn: keep the atoms without vn, add
for each two atoms with vn (the ends of vn's range are atoms too) the form in v1..v(n-1) that is zero
where their roots in vn meet. Over any set of (v1..v(n-1)) on which all the forms so found keep their
signs, the roots in vn keep their order, so the points "each root, between each two, beyond the last"
show every pattern of the whole column; and any one (v1..v(n-1)) of the set will do. Likewise inwards.

Why "open to one project" comes out. Facts stand before the verifier's and programme's settings, those
before the developer's. So for the facts of any project there is a point in the list with the same facts'
signs over which the same columns of settings stand. Points are then thinned only where the whole
columns over them show the same patterns.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from itertools import combinations, groupby, pairwise

import numpy as np

from brute.linear import Form, TooLarge, atoms
from brute.rulebooks import Domain, OneOf, Range, Rulebook, at
from brute.taking import prescribed

MOST_ROWS = 30_000
MOST_VARIABLES = 3
SAME = 1e-9
Given = Fraction | int | bool  # a value as Points.columns has it, a number as it is
FACT, FIXED, FREE = 0, 1, 2  # project; setting or judgement of verifier or programme; of developer


# --- points of a few variables that are compared with each other ---------------------------

# A variable inside a component: its range and whose it is (FACT, FIXED, FREE). An atom there: its
# coefficients in the component's order, then the constant.
Variable = tuple[Fraction | None, Fraction | None, int]
Vector = tuple[Fraction, ...]
Point = tuple[float, ...]


@lru_cache(maxsize=4096)
def columns(variables: tuple[Variable, ...], forms: frozenset[Vector]) -> tuple[tuple[int, int, Point], ...]:
    """Representative points of ``variables`` (facts first, then FIXED, then FREE) under ``forms``.

    Gives (project, fixed, point) for each point: equal numbers stand for equal values of the facts, and
    of the facts and FIXED settings. The module's docstring says why none is missing."""
    layers = [set(forms)]
    for k in reversed(range(len(variables))):
        layers[0] |= {_end(k, len(variables), bound) for bound in variables[k][:2] if bound is not None}
        if k:
            here = [f for f in layers[0] if f[k]]
            met = {_meet(f, g, k) for f, g in combinations(here, 2)} | {f for f in layers[0] if not f[k]}
            layers.insert(0, {f for f in met if any(f[:-1])})
            if len(layers[0]) > 200:
                raise TooLarge("too many forms over one component")
    sizes = [sum(1 for v in variables if v[2] == group) for group in (FACT, FIXED, FREE)]
    found: list[Point] = [()]
    for variable, layer in zip(variables, layers, strict=True):
        k = len(found[0])
        ending = [tuple(float(a) for a in f) for f in layer if f[k]]
        found = [(*point, value) for point in found for value in _column(variable, ending, point)]
        if len(found) > MOST_ROWS:
            raise TooLarge("too many points over one component")
    seen = _thinned(list(zip(found, _patterns(found, forms), strict=True)), sizes)[1]
    project: dict[Point, int] = {}
    fixed: dict[Point, int] = {}
    return tuple(
        (
            project.setdefault(p[: sizes[FACT]], len(project)),
            fixed.setdefault(p[: sizes[FACT] + sizes[FIXED]], len(fixed)),
            p,
        )
        for p in seen
    )


def _patterns(points: list[Point], forms: frozenset[Vector]) -> list[bytes]:
    """The signs of all forms at each point. Sums of a few small fractions that are not zero are far from it, so
    floats tell them."""
    if not forms:
        return [b""] * len(points)
    vectors = np.array([[float(a) for a in f] for f in sorted(forms)])
    values = np.array(points) @ vectors[:, :-1].T + vectors[:, -1]
    signs = np.where(np.abs(values) <= SAME, 0, np.sign(values)).astype(np.int8)
    return [row.tobytes() for row in signs]


def _thinned(points: list[tuple[Point, bytes]], sizes: list[int], before: int = 0) -> tuple[object, list[Point]]:
    """What can be seen over points that agree in the first ``before`` values, and one point for each
    different thing seen. ``sizes``: how many values each group from here inwards has."""
    if not sizes:
        return points[0][1], [points[0][0]]
    until = before + sizes[0]
    seen: dict[object, list[Point]] = {}
    for _, over in groupby(points, key=lambda each: each[0][:until]):
        pattern, kept = _thinned(list(over), sizes[1:], until)
        seen.setdefault(pattern, kept)
    return frozenset(seen), [p for kept in seen.values() for p in kept]


def _end(k: int, n: int, bound: Fraction) -> Vector:
    return (*(Fraction(int(i == k)) for i in range(n)), -bound)


def _meet(f: Vector, g: Vector, k: int) -> Vector:
    met = [a / f[k] - b / g[k] for a, b in zip(f, g, strict=True)]
    first = next((a for a in met[:-1] if a), Fraction(1))
    return tuple(a / first for a in met)


def _column(variable: Variable, forms: list[Point], point: Point) -> list[float]:
    """Every root over ``point`` inside the variable's range, one value between each two, and one
    beyond the ends where there is no bound."""
    low, high = (None if bound is None else float(bound) for bound in variable[:2])
    k = len(point)
    roots: list[float] = [bound for bound in (low, high) if bound is not None]
    for f in forms:
        root = -(sum(a * x for a, x in zip(f, point, strict=False)) + f[-1]) / f[k]
        if (low is None or root > low) and (high is None or root < high):
            roots.append(root)
    if not roots:
        return [0.0]
    roots.sort()
    found = [roots[0], *(b for a, b in pairwise(roots) if b - a > SAME)]
    values = [v for a, b in pairwise(found) for v in (a, (a + b) / 2)] + [found[-1]]
    return ([found[0] - 1] if low is None else []) + values + ([found[-1] + 1] if high is None else [])


# --- the list of projects and human inputs -------------------------------------------------


@dataclass(frozen=True)
class Points:
    """Rows of facts, settings and judgements. ``columns`` has an array for each name (``x@2`` for
    an element): numbers as floats, named values as positions in their domain, yes as True.

    Rows of one project stand together, inside it those with the same settings and judgements of verifier and
    programme; ``projects`` and ``fixed`` hold where each such stretch begins."""

    columns: dict[str, np.ndarray]
    rows: int
    projects: np.ndarray
    fixed: np.ndarray


def variables(rulebook: Rulebook) -> Iterator[tuple[str, Domain | None, int]]:
    """Name, domain (None for a judgement) and group of everything that has a value from outside."""
    for fact in rulebook.facts:
        for element in rulebook.elements(fact.index):
            yield at(fact.name, element), fact.domain, FACT
    for setting in rulebook.settings:
        yield setting.name, setting.domain, FREE if setting.by == "developer" else FIXED
    for judgement in rulebook.judgements:
        yield judgement.name, None, FREE if judgement.by == "developer" else FIXED


def representative(rulebook: Rulebook, given: Mapping[str, Given] | None = None) -> Points:
    """The points that stand for all projects and human inputs. What ``given`` holds (values as in
    ``Points.columns``) has that value only, and so has what is prescribed. Raises ``TooLarge`` beyond three
    variables that are compared with each other, or beyond ``MOST_ROWS`` points."""
    given = {**prescribed(rulebook), **(given or {})}
    parts: list[tuple[list[int], list[int], dict[str, list[object]]]] = []
    numeric: dict[str, Variable] = {}
    for name, domain, group in variables(rulebook):
        if isinstance(domain, Range) and name not in given:
            numeric[name] = (domain.low, domain.high, group)
            continue
        if name in given:
            values: list[object] = [given[name]]
        else:
            values = list(range(len(domain.values))) if isinstance(domain, OneOf) else [True, False]
        own = list(range(len(values)))
        none = [0] * len(values)
        parts.append((own if group == FACT else none, own if group != FREE else none, {name: values}))
    settled = {name: value for name, value in given.items() if isinstance(value, Fraction)}
    left = frozenset(form for f in atoms(rulebook) if (form := _settled(f, settled))[0])
    for names, forms in _components(numeric, left):
        ordered = sorted(names, key=lambda n: numeric[n][2])
        vectors = frozenset((*(dict(f[0]).get(n, Fraction(0)) for n in ordered), f[1]) for f in forms)
        found = columns(tuple(numeric[n] for n in ordered), vectors)
        parts.append(
            ([p[0] for p in found], [p[1] for p in found], {n: [p[2][k] for p in found] for k, n in enumerate(ordered)})
        )
    return _table(parts)


def _settled(form: Form, values: dict[str, Fraction]) -> Form:
    """The form with the values of some variables put in."""
    rest = tuple((v, a) for v, a in form[0] if v not in values)
    return rest, form[1] + sum((a * values[v] for v, a in form[0] if v in values), Fraction(0))


def _components(numeric: dict[str, Variable], forms: frozenset[Form]) -> Iterator[tuple[list[str], list[Form]]]:
    group = {name: {name} for name in numeric}
    for f in forms:
        joined = set().union(*(group[v] for v, _ in f[0]))
        for name in joined:
            group[name] = joined
    done: set[str] = set()
    for name in numeric:
        if name not in done:
            done |= group[name]
            if len(group[name]) > MOST_VARIABLES:
                raise TooLarge("too many variables compared with each other")
            yield sorted(group[name]), sorted(f for f in forms if f[0][0][0] in group[name])


def _table(parts: list[tuple[list[int], list[int], dict[str, list[object]]]]) -> Points:
    rows = 1
    for part in parts:
        rows *= len(part[0])
    if rows > MOST_ROWS:
        raise TooLarge(f"{rows} points")
    project, fixed = np.zeros(rows, dtype=np.int64), np.zeros(rows, dtype=np.int64)
    made: dict[str, np.ndarray] = {}
    repeat = rows
    for own, held, held_values in parts:
        repeat //= len(own)
        which = np.arange(rows) // repeat % len(own)
        project = project * (max(own) + 1) + np.array(own)[which]
        fixed = fixed * (max(held) + 1) + np.array(held)[which]
        for name, values in held_values.items():
            made[name] = _array(values)[which]
    order = np.lexsort((fixed, project))
    project, fixed = project[order], fixed[order]
    change = np.diff(project, prepend=-1) != 0
    return Points(
        {name: array[order] for name, array in made.items()},
        rows,
        np.flatnonzero(change),
        np.flatnonzero(change | (np.diff(fixed, prepend=-1) != 0)),
    )


def _array(values: list[object]) -> np.ndarray:
    return np.array([float(v) if isinstance(v, Fraction) else v for v in values])
