"""What the evidence comes to: a word and a sentence, and who decides the branch points."""

from __future__ import annotations

from dataclasses import dataclass

from samesum.evidence.evidence import Evidence


@dataclass(frozen=True, slots=True)
class Verdict:
    """``word`` for JSON, ``says`` for people, ``style`` the page's style."""

    word: str
    says: str
    style: str


def verdict(evidence: Evidence, mistakes: int = 0) -> Verdict:
    """What counting alone can say; whether several routes give one number is for the trial to find out. ``mistakes``:
    how many stand in the rulebook; with any, nothing is claimed of it."""
    if mistakes:
        return Verdict("cannot tell", waiting(mistakes), "warn")
    counts = evidence.counts
    conditions = evidence.conditions
    if conditions.gaps or (counts.exact and counts.per_project_least == 0):
        return Verdict("gap", "some projects have no result", "bad")
    if not counts.exact or conditions.undecided:
        return Verdict("cannot tell", "not settled in the time given", "warn")
    if counts.per_project_most > 1:
        says = "several routes are open to one project; `samesum trial` tells whether their numbers differ"
        return Verdict("several routes", says, "warn")
    if counts.free_values:
        says = "one route for every project, but somebody sets a number on the way"
        return Verdict("free value", says, "warn")
    return Verdict("single route", "one route for every project: proved", "good")


def waiting(mistakes: int) -> str:
    """``waits until the mistake in the units is mended``."""
    what = "mistake in the units is" if mistakes == 1 else f"{mistakes} mistakes in the units are"
    return f"waits until the {what} mended"


def decided(evidence: Evidence) -> dict[str, int]:
    """Branch points (all elements of an index as one) by who decides them: who picks, else whether somebody can
    move the conditions, else tied to another choice, else facts."""
    written = [point for point in evidence.graph.branch_points.values() if point.is_written]
    kinds = {point.general_id: point.kind for point in reversed(written)}
    found = dict.fromkeys(("total", "developer", "verifier", "programme", "steered", "tied", "facts"), 0)
    for id, kind in kinds.items():
        control = evidence.control.get(id)
        found["total"] += 1
        if control is not None and control.decided_by is not None:
            found[control.decided_by] += 1
        elif kind == "follows":
            found["tied"] += 1
        elif control is not None and control.movers:
            found["steered"] += 1
        else:
            found["facts"] += 1
    return found
