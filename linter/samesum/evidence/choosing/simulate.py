"""One rulebook worked out for many projects at once, with every decision in our hand (numpy).

Takes a ``Program``, arrays of facts, and a ``World``: which branch is taken where, how wrong each option's estimate
is, which input is set to what. Gives the result of every project.

An option that states an error (or a bias) is an estimate: it gives the choice's reference value × (1 + e), worked
out with whatever the rest of the rulebook gives in that world, so an error travels on through everything that
uses it. An option that states neither is worked out by its own formula: nobody errs in reading off a zero.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import numpy.typing as npt

from samesum.evidence.choosing.programs import LOWEST, Lookup, Program, needed_for
from samesum.evidence.trial import plan

Array = npt.NDArray[Any]
Branch = int | Array


@dataclass(frozen=True, slots=True)
class World:
    """``branches``: the branch wanted at a branch point (else the reference's), or ``LOWEST`` or ``HIGHEST``; where it
    is not open, the reference counts. ``inputs``: facts, settings, judgements set otherwise than the projects say.
    ``errors``: e of an option's estimate by branch point and option (else 0). ``factors``: what a choice's value is
    multiplied by, by general id."""

    branches: Mapping[str, Branch] = field(default_factory=dict)
    inputs: Mapping[str, Any] = field(default_factory=dict)
    errors: Mapping[tuple[str, int], Array] = field(default_factory=dict)
    factors: Mapping[str, float] = field(default_factory=dict)


def evaluate(
    program: Program,
    inputs: Mapping[str, Array],
    world: World,
    base: Sequence[Any] | None = None,
    numbers: Sequence[int] | None = None,
) -> list[Any]:
    """The value of every node: an array over the projects, or one number where all have the same.

    With ``base`` (the values of another world) only ``numbers`` are worked out anew: ``program.after`` the branch
    points and inputs in which the two worlds differ. What has no value is not finite. A point's value is the pair of
    the branch taken and the reference's branch (−1 where none is open).
    """
    values: list[Any] = [None] * len(program.nodes) if base is None else list(base)
    with np.errstate(all="ignore"):
        for number in program.live if numbers is None else numbers:
            values[number] = _value(program, number, values, inputs, world)
    return values


def _value(program: Program, number: int, values: list[Any], inputs: Mapping[str, Array], world: World) -> Any:
    node = program.nodes[number]
    if node.kind == "linear":
        return _linear(node, program.weights[number], values)
    if node.kind == "select":
        return _selected(program, node, values, inputs, world)
    if node.kind == "point":
        return _point(program, node, values, world)
    if node.kind in ("input", "holds", "code"):
        return world.inputs[node.name] if node.name in world.inputs else inputs[node.name]
    if node.kind == "lookup":
        return _looked_up(program.lookups[number], [values[arg] for arg in node.args])
    if node.kind in _SIMPLE:
        return _SIMPLE[node.kind](node, [values[arg] for arg in node.args])
    raise AssertionError(f"no way to work out a node of kind {node.kind}")


def _linear(node: plan.Node, weights: tuple[float, ...], values: list[Any]) -> Any:
    total: Any = None
    ours = False  # whether ``total`` is an array of our own, which may be added to in place
    for arg, weight in zip(node.args, weights, strict=True):
        term = values[arg]
        if weight != 1.0:
            term = -term if weight == -1.0 else term * weight
        if total is None:
            total, ours = term, weight != 1.0
        elif ours and isinstance(total, np.ndarray) and np.shape(term) in ((), total.shape):
            total += term
        else:
            total, ours = total + term, True
    number = float(node.number)
    if total is None:
        return number
    if not number:
        return total
    if ours and isinstance(total, np.ndarray):
        total += number
        return total
    return total + number


def _product(node: plan.Node, args: list[Any]) -> Any:
    total = args[0]
    for arg in args[1:]:
        total = total * arg
    return total


def _folded(function: Callable[[Any, Any], Any]) -> Callable[[plan.Node, list[Any]], Any]:
    def fold(node: plan.Node, args: list[Any]) -> Any:
        total = args[0]
        for arg in args[1:]:
            total = function(total, arg)
        return total

    return fold


def _nearest(x: Any) -> Any:
    # Half goes away from zero, as the language has it.
    return np.copysign(np.floor(np.abs(x) + 0.5), x)


_CALLS: Mapping[str, Callable[[Any], Any]] = {
    "abs": np.abs,
    "sqrt": np.sqrt,
    "exp": np.exp,
    "ln": np.log,
    "round": _nearest,
    "floor": np.floor,
    "ceil": np.ceil,
}
_COMPARES: Mapping[str, Callable[[Any, Any], Any]] = {
    "<": np.less,
    "<=": np.less_equal,
    ">": np.greater,
    ">=": np.greater_equal,
    "=": np.equal,
    "<>": np.not_equal,
}


def _is(node: plan.Node, args: list[Any]) -> Any:
    held: Any = np.False_
    for code in node.chosen:
        held = held | (args[0] == code)
    return held


_SIMPLE: Mapping[str, Callable[[plan.Node, list[Any]], Any]] = {
    "number": lambda node, args: float(node.number),
    "named": lambda node, args: node.chosen[0],
    "true": lambda node, args: np.True_,
    "product": _product,
    "divide": lambda node, args: np.divide(args[0], args[1]),
    "power": lambda node, args: np.power(args[0], args[1]),
    "min": _folded(np.minimum),
    "max": _folded(np.maximum),
    "call": lambda node, args: _CALLS[node.name](args[0]),
    "compare": lambda node, args: _COMPARES[node.name](args[0], args[1]),
    "is": _is,
    "takes": lambda node, args: np.equal(args[0][0], node.chosen[0]),
    "all": _folded(np.logical_and),
    "some": _folded(np.logical_or),
    "not": lambda node, args: np.logical_not(args[0]),
}


def _looked_up(lookup: Lookup, args: list[Any]) -> Any:
    found: Any = np.nan
    for value, tests in zip(reversed(lookup.values), reversed(lookup.tests), strict=True):
        held: Any = np.True_
        for arg, test in zip(args, tests, strict=True):
            held = held & _answers(arg, test)
        found = np.where(held, value, found)
    return found


def _answers(arg: Any, test: int | tuple[float, float]) -> Any:
    return (arg > test[0]) & (arg <= test[1]) if isinstance(test, tuple) else arg == test


def _point(program: Program, node: plan.Node, values: list[Any], world: World) -> tuple[Branch, Branch]:
    choosing = program.choosing.get(node.name)
    wanted = world.branches.get(node.name)
    if choosing is None:
        return _cases(program, node, values, wanted)
    if choosing.leader:
        there = values[node.args[-1]]
        return _mapped(choosing.leader, there[0]), _mapped(choosing.leader, there[1])
    free = [program.nodes[arg].kind == "true" for arg in node.args]
    reference: Branch = -1
    for number in reversed(choosing.order):
        reference = number if free[number] else _where(values[node.args[number]], number, reference)
    if wanted is None or (isinstance(wanted, int) and wanted < 0):  # which is the lowest is for its select to find out
        return reference, reference
    taken = wanted
    for number, arg in enumerate(node.args):
        if not free[number]:
            taken = _where(np.logical_and(np.equal(wanted, number), np.logical_not(values[arg])), reference, taken)
    return taken, reference


def _cases(program: Program, node: plan.Node, values: list[Any], wanted: Branch | None) -> tuple[Branch, Branch]:
    point = program.graph.branch_points[node.name]
    first: Branch = -1
    for number in reversed(range(len(node.args))):
        if point.conditions[number] is None:
            first = number
    for number in reversed(range(len(node.args))):
        if point.conditions[number] is not None:
            first = _where(values[node.args[number]], number, first)
    if wanted is None or point.kind != "cases":
        return first, first
    taken = first
    for number, arg in enumerate(node.args):
        if point.conditions[number] is not None:
            taken = _where(np.logical_and(np.equal(wanted, number), values[arg]), number, taken)
    return taken, first


def _where(held: Any, yes: Branch, no: Branch) -> Branch:
    if np.ndim(held) == 0:
        return yes if held else no
    # Branches are small numbers: arrays of bytes are the fastest to go through.
    return np.where(held, *(each if isinstance(each, np.ndarray) else np.int8(each) for each in (yes, no)))


def _mapped(onto: tuple[int, ...], taken: Branch) -> Branch:
    if isinstance(taken, np.ndarray):
        return np.asarray((*onto, -1), dtype=np.int8)[taken]
    return onto[taken] if taken >= 0 else -1


def picked(which: Branch, among: Sequence[Any]) -> Any:
    """For each project the value of its own branch; not finite where it has none."""
    if not isinstance(which, np.ndarray):
        return among[which] if which >= 0 else np.nan
    if not any(isinstance(value, np.ndarray) and value.ndim for value in among):
        return np.asarray((*among, np.nan), dtype=np.float64)[which]  # −1 is the last: none
    found: Any = among[0] if int(which.min(initial=0)) >= 0 else np.where(which == 0, among[0], np.nan)
    for number in range(1, len(among)):
        found = np.where(which == number, among[number], found)
    return found


def _selected(program: Program, node: plan.Node, values: list[Any], inputs: Mapping[str, Array], world: World) -> Any:
    taken, reference = values[node.args[0]]
    bodies = [values[arg] for arg in node.args[1:]]
    choosing = program.choosing.get(node.name)
    if choosing is None:
        return picked(taken, bodies)
    extreme = world.branches.get(node.name)
    sought = extreme if isinstance(extreme, int) and extreme < 0 else 0
    offered = list(bodies)
    if any(choosing.stated):
        clean = [
            _as_reference(program, node.args[1 + number], nested, values, inputs, world) if nested else bodies[number]
            for number, nested in enumerate(choosing.nested)
        ]
        truth = picked(reference, clean)
        for number, stated in enumerate(choosing.stated):
            if not stated or not (sought or _any(taken, number)):
                continue
            error = world.errors.get((node.name, number))
            estimate = truth if error is None else truth * (1.0 + error)
            if choosing.nested[number]:
                # What is chosen inside an option errs on top of what the option says of itself.
                ratio = bodies[number] / clean[number]
                estimate = np.where(np.equal(clean[number], 0.0), estimate, estimate * ratio)
            offered[number] = estimate
    if sought:
        guards = [values[arg] for arg in program.nodes[node.args[0]].args]
        taken = _extreme(offered, guards, choosing.order, sought)
        values[node.args[0]] = (taken, reference)
    chosen = picked(taken, offered)
    factor = world.factors.get(choosing.point.general_id)
    return chosen if factor is None else chosen * factor


def _extreme(offered: Sequence[Any], guards: Sequence[Any], order: Sequence[int], sought: int) -> Branch:
    """The open branch with the lowest (or highest) value; of several alike the one most fit to stand for the truth."""
    sign = 1.0 if sought == LOWEST else -1.0
    best: Any = np.inf
    taken: Branch = -1
    for number in order:
        value = np.where(guards[number], sign * np.asarray(offered[number], dtype=np.float64), np.inf)
        lower = value < best
        taken = _where(lower, number, taken)
        best = np.where(lower, value, best)
    return taken


def _any(taken: Branch, number: int) -> bool:
    return bool(np.any(taken == number)) if isinstance(taken, np.ndarray) else taken == number


def _as_reference(
    program: Program,
    body: int,
    nested: Sequence[str],
    values: list[Any],
    inputs: Mapping[str, Array],
    world: World,
) -> Any:
    """The value of an option's body with every choice inside it on its reference and without error."""
    points = set(nested)
    quiet = World(
        {id: branch for id, branch in world.branches.items() if id not in points},
        world.inputs,
        {key: error for key, error in world.errors.items() if key[0] not in points},
        world.factors,
    )
    inner = list(values)
    needed = set(needed_for(program.nodes, (body,)))
    for number in program.after(nested):
        if number in needed:
            inner[number] = _value(program, number, inner, inputs, quiet)
    return inner[body]
