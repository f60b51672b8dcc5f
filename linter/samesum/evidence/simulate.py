"""One rulebook worked out for many projects at once, with every decision in our hand (numpy).

Takes the rulebook as small operations (``plan``), arrays of facts, and a ``World``: which branch is taken
where, how wrong each option's estimate is, which input is set to what. Gives the result of every project.

An option that states an error (or a bias) is an estimate: it gives the choice's reference value × (1 + e), worked
out with whatever the rest of the rulebook gives in that world, so an error travels on through everything that
uses it. An option that states neither is worked out by its own formula: nobody errs in reading off a zero.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
import numpy.typing as npt

from samesum.evidence import plan
from samesum.evidence.pointwise import preferred
from samesum.graph import BranchPoint, DecisionGraph, Element, build
from samesum.reading import model as m

Array = npt.NDArray[Any]
Branch = int | Array
STATED = "as stated"
"""The one branch of a quantity that states an error without offering a choice."""


@dataclass(frozen=True, slots=True)
class World:
    """``branches``: the branch wanted at a branch point (else the reference's); where it is not open, the reference
    counts. ``inputs``: facts, settings, judgements set otherwise than the projects say. ``errors``: e of an option's
    estimate by branch point and option (else 0). ``factors``: what a choice's value is multiplied by, by general id."""

    branches: Mapping[str, Branch] = field(default_factory=dict)
    inputs: Mapping[str, Any] = field(default_factory=dict)
    errors: Mapping[tuple[str, int], Array] = field(default_factory=dict)
    factors: Mapping[str, float] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Choosing:
    """A choice, or what follows one. ``stated``: whether each option is an estimate; ``order``: from the most to the
    least fit to stand for the truth; ``leader``: the branch each option stands for there; ``nested``: for each option
    the branch points inside it."""

    point: BranchPoint
    stated: tuple[bool, ...]
    order: tuple[int, ...]
    leader: tuple[int, ...]
    nested: tuple[tuple[str, ...], ...]


@dataclass(frozen=True, slots=True)
class Program:
    """``nodes`` in an order in which each stands after what it uses; ``live`` those that anything asked for needs."""

    graph: DecisionGraph
    nodes: tuple[plan.Node, ...]
    live: tuple[int, ...]
    result: int
    applies: tuple[int, ...]
    costs: Mapping[tuple[str, int], int]
    points: Mapping[str, int]
    selects: Mapping[str, int]
    choosing: Mapping[str, Choosing]
    lookups: Mapping[int, Lookup]
    inputs: Mapping[str, tuple[int, ...]]
    withheld: Mapping[str, float]
    _after: dict[frozenset[str], tuple[int, ...]] = field(default_factory=dict)

    def after(self, keys: Iterable[str]) -> tuple[int, ...]:
        """The nodes that change with these branch points (by id) or inputs (by name), in order."""
        wanted = frozenset(keys)
        found = self._after.get(wanted)
        if found is None:
            changed = bytearray(len(self.nodes))
            for key in wanted:
                for number in (self.points.get(key), self.selects.get(key), *self.inputs.get(key, ())):
                    if number is not None:
                        changed[number] = 1
            for number in self.live:
                if not changed[number] and any(changed[arg] for arg in self.nodes[number].args):
                    changed[number] = 1
            found = tuple(number for number in self.live if changed[number])
            self._after[wanted] = found
        return found


@dataclass(frozen=True, slots=True)
class Lookup:
    """Rows of a table as numbers: for each row its value and one test an argument (a code, or a band's ends)."""

    values: tuple[float, ...]
    tests: tuple[tuple[int | tuple[float, float], ...], ...]


# --- making ------------------------------------------------------------------------------------


def make_program(model: m.Model, sizes: Mapping[str, int] | None = None) -> Program:
    """The program of a rulebook for projects with so many elements of each index (``at most`` when not given).

    Raises ``plan.Unplannable`` when a part of the rulebook could not be resolved.
    """
    stated = replace(model, quantities=tuple(_with_statement(each) for each in model.quantities))
    graph = plan.resized(stated, sizes or {}) if sizes else build(stated)
    withheld = {each.name: float(_plain(each.expression)) for each in model.constants if each.withheld}
    maker = _Maker(graph, withheld)
    if model.result is None:
        raise plan.Unplannable("the rulebook has no result")
    result = maker.instance(model.result.name)
    applies = tuple(maker.condition(each.condition, {}) for each in model.applies)
    choosing: dict[str, Choosing] = {}
    costs: dict[tuple[str, int], int] = {}
    selects = {node.name: number for number, node in enumerate(maker.nodes) if node.kind == "select"}
    for id in selects:
        point = graph.branch_points[id]
        if isinstance(point.body, m.Cases):
            continue
        choosing[id] = _choosing(point, graph)
        if isinstance(point.body, m.Choice):
            for number, option in enumerate(point.body.options):
                if option.cost is not None:
                    node = maker.expression(option.cost, graph.instances[point.instance].elements)
                    costs[id, number] = maker.linear([(node, option.cost.unit.factor)])
    nodes = tuple(maker.nodes)
    inputs: dict[str, list[int]] = {}
    for number, node in enumerate(nodes):
        if node.kind in ("input", "code", "holds"):
            inputs.setdefault(node.name, []).append(number)
    return Program(
        graph=graph,
        nodes=nodes,
        live=_live(nodes, (result, *applies, *costs.values())),
        result=result,
        applies=applies,
        costs=costs,
        points={node.name: number for number, node in enumerate(nodes) if node.kind == "point"},
        selects={node.name: number for number, node in enumerate(nodes) if node.kind == "select"},
        choosing=choosing,
        lookups={number: _lookup(node, graph.model) for number, node in enumerate(nodes) if node.kind == "lookup"},
        inputs={name: tuple(found) for name, found in inputs.items()},
        withheld=withheld,
    )


class _Maker(plan._Maker):
    """The plan's maker, except that a constant which is not in the reference stays an input."""

    def __init__(self, graph: DecisionGraph, withheld: Mapping[str, float]) -> None:
        super().__init__(graph)
        self._withheld = withheld

    def expression(self, node: m.Expression, elements: Element) -> int:
        if isinstance(node, m.Reference) and node.kind == "constant" and node.name in self._withheld:
            return self.make(plan.Node("input", name=node.name))
        return super().expression(node, elements)


def _with_statement(quantity: m.Quantity) -> m.Quantity:
    """A quantity that states how it errs, as a choice with one option: nobody chooses, the error is there."""
    if quantity.error is None and quantity.bias is None:
        return quantity
    span = quantity.about.span
    option = m.Option(STATED, quantity.body, span, error=quantity.error, bias=quantity.bias, reference=True)
    return replace(quantity, body=m.Choice("programme", (option,), span))


def _choosing(point: BranchPoint, graph: DecisionGraph) -> Choosing:
    options = point.body.options if isinstance(point.body, (m.Choice, m.Follows)) else ()
    left = list(range(len(options)))
    order: list[int] = []
    while left:
        best = preferred(options, left)
        order.append(best)
        left.remove(best)
    leader: tuple[int, ...] = ()
    if point.leader:
        names = graph.branch_points[point.leader].branches
        leader = tuple(point.branches.index(name) if name in point.branches else -1 for name in names)
    insides = tuple(f"{point.id}/{option.name}" for option in options)
    nested = tuple(
        tuple(id for id in graph.branch_points if id == inside or id.startswith(inside + "/")) for inside in insides
    )
    stated = tuple(option.error is not None or option.bias is not None for option in options)
    return Choosing(point, stated, tuple(order), leader, nested)


def _plain(expression: m.Expression) -> Any:
    """A constant's own number, where it is written as one."""
    match expression:
        case m.Number(value=value):
            return value
        case m.Negation(operand=operand):
            return -_plain(operand)
        case m.Scaled(operand=operand, factor=factor):
            return _plain(operand) * factor
        case _:
            raise plan.Unplannable("a constant that is not in the reference is written as a plain number")


def _live(nodes: Sequence[plan.Node], ends: Iterable[int]) -> tuple[int, ...]:
    wanted: set[int] = set()
    stack = list(ends)
    while stack:
        number = stack.pop()
        if number not in wanted:
            wanted.add(number)
            stack += nodes[number].args
    return tuple(sorted(wanted))


def _lookup(node: plan.Node, model: m.Model) -> Lookup:
    table = next(each for each in model.tables if each.name == node.name)
    tests = []
    for row in table.rows:
        test: list[int | tuple[float, float]] = []
        for key, label in zip(table.keys, row.labels, strict=True):
            if isinstance(label, m.Band):
                low = float(label.low) if label.low is not None else -np.inf
                test.append((low, float(label.high) if label.high is not None else np.inf))
            else:
                test.append(key.values.index(label) if label in key.values else -1)
        tests.append(tuple(test))
    return Lookup(tuple(float(row.value) for row in table.rows), tuple(tests))


# --- working out -------------------------------------------------------------------------------


def evaluate(
    program: Program,
    inputs: Mapping[str, Array],
    world: World,
    base: Sequence[Any] | None = None,
    numbers: Sequence[int] | None = None,
) -> list[Any]:
    """The value of every node: an array over the projects, or one number where all have the same.

    With ``base`` (the values of another world) only ``numbers`` are worked out anew: ``program.after`` the branch
    points and inputs in which the two worlds differ. What has no value is not finite. A point's value is the pair of the
    branch taken and the reference's branch (−1 where none is open).
    """
    values: list[Any] = [None] * len(program.nodes) if base is None else list(base)
    with np.errstate(all="ignore"):
        for number in program.live if numbers is None else numbers:
            values[number] = _value(program, number, values, inputs, world)
    return values


def _value(
    program: Program, number: int, values: list[Any], inputs: Mapping[str, Array], world: World
) -> Any:
    node = program.nodes[number]
    if node.kind == "linear":
        return _linear(node, values)
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


def _linear(node: plan.Node, values: list[Any]) -> Any:
    total: Any = None
    ours = False  # whether ``total`` is an array of our own, which may be added to in place
    for arg, weight in zip(node.args, node.weights, strict=True):
        term = values[arg]
        if weight != 1:
            term = -term if weight == -1 else term * float(weight)
        if total is None:
            total, ours = term, weight != 1
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
            if isinstance(test, tuple):
                held = held & ((arg > test[0]) & (arg <= test[1]))
            else:
                held = held & (arg == test)
        found = np.where(held, value, found)
    return found


def _point(program: Program, node: plan.Node, values: list[Any], world: World) -> tuple[Branch, Branch]:
    choosing = program.choosing.get(node.name)
    wanted = world.branches.get(node.name)
    if choosing is None:
        return _cases(program, node, values, wanted)
    if choosing.leader:
        taken, reference = values[node.args[-1]]
        return _mapped(choosing.leader, taken), _mapped(choosing.leader, reference)
    free = [program.nodes[arg].kind == "true" for arg in node.args]
    reference: Branch = -1
    for number in reversed(choosing.order):
        reference = number if free[number] else _where(values[node.args[number]], number, reference)
    if wanted is None:
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
    return np.where(held, yes, no).astype(np.int8)


def _mapped(onto: tuple[int, ...], taken: Branch) -> Branch:
    if isinstance(taken, np.ndarray):
        return np.asarray((*onto, -1), dtype=np.int8)[taken]
    return onto[taken] if taken >= 0 else -1


def picked(which: Branch, among: Sequence[Any]) -> Any:
    """For each project the value of its own branch; not finite where it has none."""
    if not isinstance(which, np.ndarray):
        return among[which] if which >= 0 else np.nan
    found: Any = np.nan
    for number, value in enumerate(among):
        found = np.where(which == number, value, found)
    return found


def _selected(program: Program, node: plan.Node, values: list[Any], inputs: Mapping[str, Array], world: World) -> Any:
    taken, reference = values[node.args[0]]
    bodies = [values[arg] for arg in node.args[1:]]
    choosing = program.choosing.get(node.name)
    if choosing is None:
        return picked(taken, bodies)
    if not any(choosing.stated):
        chosen = picked(taken, bodies)
    else:
        clean = [
            _as_reference(program, node.args[1 + number], nested, values, inputs, world) if nested else bodies[number]
            for number, nested in enumerate(choosing.nested)
        ]
        truth = picked(reference, clean)
        offered = list(bodies)
        for number, stated in enumerate(choosing.stated):
            if not stated or not _any(taken, number):
                continue
            error = world.errors.get((node.name, number))
            estimate = truth if error is None else truth * (1.0 + error)
            if choosing.nested[number]:
                # What is chosen inside an option errs on top of what the option says of itself.
                ratio = bodies[number] / clean[number]
                estimate = np.where(np.equal(clean[number], 0.0), estimate, estimate * ratio)
            offered[number] = estimate
        chosen = picked(taken, offered)
    factor = world.factors.get(choosing.point.general_id)
    return chosen if factor is None else chosen * factor


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
    needed = set(_live(program.nodes, (body,)))
    for number in program.after(nested):
        if number in needed:
            inner[number] = _value(program, number, inner, inputs, quiet)
    return inner[body]
