"""Cycles: names that need each other to be worked out."""

from __future__ import annotations

from collections.abc import Mapping


def cycles(needs: Mapping[str, tuple[str, ...]], knots: list[set[str]]) -> list[tuple[str, ...]]:
    """One chain for each of the ``knots`` of ``needs``, ``(a, b, c)`` for a → b → c → a.

    Starts each chain at the name that comes first in ``needs`` and takes the shortest way round.
    """
    found: list[tuple[str, ...]] = []
    order = {name: at for at, name in enumerate(needs)}
    for knot in sorted(knots, key=lambda names: min(order[name] for name in names)):
        start = min(knot, key=order.__getitem__)
        found.append(_shortest_round(start, knot, needs))
    return found


def knots_in(needs: Mapping[str, tuple[str, ...]]) -> list[set[str]]:
    """The knots: sets of names that all need each other, or one name that needs itself.

    Strongly connected parts with a cycle (Tarjan 1972, without recursion).
    """
    number: dict[str, int] = {}
    low: dict[str, int] = {}
    stack: list[str] = []
    on_stack: set[str] = set()
    knots: list[set[str]] = []
    for root in needs:
        if root in number:
            continue
        work = [(root, iter(needs[root]))]
        number[root] = low[root] = len(number)
        stack.append(root)
        on_stack.add(root)
        while work:
            name, others = work[-1]
            for other in others:
                if other not in needs:
                    continue
                if other not in number:
                    number[other] = low[other] = len(number)
                    stack.append(other)
                    on_stack.add(other)
                    work.append((other, iter(needs[other])))
                    break
                if other in on_stack:
                    low[name] = min(low[name], number[other])
            else:
                work.pop()
                if work:
                    low[work[-1][0]] = min(low[work[-1][0]], low[name])
                if low[name] == number[name]:
                    knot: set[str] = set()
                    while name not in knot:
                        member = stack.pop()
                        on_stack.discard(member)
                        knot.add(member)
                    if len(knot) > 1 or name in needs[name]:
                        knots.append(knot)
    return knots


def _shortest_round(start: str, knot: set[str], needs: Mapping[str, tuple[str, ...]]) -> tuple[str, ...]:
    came: dict[str, str] = {}
    waiting = [start]
    for name in waiting:
        for other in needs[name]:
            if other == start:
                chain = [name]
                while chain[-1] != start:
                    chain.append(came[chain[-1]])
                return tuple(reversed(chain))
            if other in knot and other not in came:
                came[other] = name
                waiting.append(other)
    return (start,)
