"""Whether the result is linear in what a choice gives, so that a closed form for one choice holds exactly."""

from __future__ import annotations

from collections.abc import Collection

from samesum.evidence.choosing.programs import Program


def linear_in(program: Program, points: Collection[str]) -> bool:
    """Whether the result, with everything else on the reference, is a constant plus a sum of parts that are each
    proportional to the value of one of these choices; and nothing asks which option was taken.

    Structural: a maximum, a condition or a quotient that uses the value says no, even where it would not bite.
    """
    key = frozenset(points)
    if key not in program.known_linear:
        program.known_linear[key] = _linear_in(program, key)
    return program.known_linear[key]


def _linear_in(program: Program, points: Collection[str]) -> bool:
    degrees: dict[int, int | None] = {}
    marked = {program.selects[id] for id in points} | {program.points[id] for id in points}
    for number in program.live:
        node = program.nodes[number]
        inner = [degrees[arg] for arg in node.args]
        if number in marked:
            # What is chosen here counts as the variable; its own parts must not depend on the others.
            degrees[number] = 1 if all(each == 0 for each in inner) or node.kind == "select" else None
            if node.kind == "select" and any(each != 0 for each in inner[1:]):
                degrees[number] = None
        elif node.kind == "select":
            asked, *bodies = inner
            degrees[number] = None if asked != 0 or None in bodies else max(each or 0 for each in bodies)
        elif None in inner:
            degrees[number] = None
        elif node.kind == "linear":
            degrees[number] = max((each or 0 for each in inner), default=0)
        elif node.kind == "product":
            total = sum(each or 0 for each in inner)
            degrees[number] = total if total <= 1 else None
        elif node.kind == "divide":
            degrees[number] = inner[0] if inner[1] == 0 else None
        else:
            degrees[number] = 0 if all(each == 0 for each in inner) else None
    return degrees[program.result] is not None
