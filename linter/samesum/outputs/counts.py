"""What ``samesum count`` answers, as JSON and for people."""

from __future__ import annotations

from collections.abc import Callable, Hashable, Iterable, Iterator
from typing import Any, Protocol, TypeVar

from samesum.evidence.evidence import Evidence
from samesum.evidence.routes.counting import Counts
from samesum.evidence.routes.witness import Witness
from samesum.outputs.page import CAUTION, Page, Paper
from samesum.outputs.projects import Words, as_values, general_id, project, shown, words_for
from samesum.reading.model import Model
from samesum.reading.words import listing
from samesum.written import whole

FIGURES = (
    ("on_paper", "On paper", "routes when no condition is asked or obeyed"),
    ("reachable", "Over all projects", "different routes that some project can take"),
    ("per_project_most", "One project, at most", "routes open to one project; 1 is what repeatability needs"),
    ("per_project_least", "One project, at least", "routes open to the project that has the fewest"),
    ("developer_most", "By the developer alone", "the most for one project when what the verifier or the programme "
     "decides is taken as given"),
    ("over_periods_most", "Over the periods", "the most for one project"),
)  # fmt: skip


def paths_json(counts: Counts) -> dict[str, Any]:
    """The figures under ``paths``; ``at_least`` and the reasons stand there when they are upper bounds."""
    found: dict[str, Any] = {name: getattr(counts, name) for name, _, _ in FIGURES}
    found["exact"] = counts.exact
    if not counts.exact:
        found["at_least"] = {name: counts.at_least[name] for name, _, _ in FIGURES}
        found["why_not_exact"] = list(counts.why_inexact)
    return found


def shown_by(witness: Witness | None) -> dict[str, Any]:
    """A witness and its route for JSON; ``witness`` is null when the project could not be written down."""
    if witness is None:
        return {"witness": None}
    return {"witness": as_values(witness), **({"route": dict(witness.route)} if witness.route else {})}


def count_json(evidence: Evidence) -> dict[str, Any]:
    """The whole answer of ``samesum count --json``."""
    conditions = evidence.conditions
    counts = evidence.counts
    answer: dict[str, Any] = {
        "rulebook": evidence.model.title,
        "draft": evidence.model.draft,
        "file": evidence.model.file,
        "paths": paths_json(counts),
        "periods": counts.periods,
        "free_values": list(counts.free_values),
        "overlaps": [
            {"branch_point": each.branch_point, "branches": list(each.branches), **shown_by(each.witness)}
            for each in conditions.overlaps
        ],
        "gaps": [
            {
                "branch_point": each.branch_point,
                "missing": each.kind,
                **({"tables": list(each.names)} if each.kind == "row" else {}),
                **shown_by(each.witness),
            }
            for each in conditions.gaps
        ],
        "dead_branches": [
            {"branch_point": each.branch_point, "branch": each.branch} for each in conditions.dead_branches
        ],
        "cannot_tell": [
            {"branch_point": each.branch_point, "asks": each.asks, "branches": list(each.branches)}
            for each in conditions.undecided
        ],
    }
    if counts.most_at is not None:
        answer["most_at"] = shown_by(counts.most_at)
    if counts.least_at is not None:
        answer["least_at"] = {"witness": as_values(counts.least_at)}
    return answer


def figure(counts: Counts, name: str) -> str:
    """One figure for people: ``4``, or ``between 2 and 4`` when it is not exact."""
    most = getattr(counts, name)
    least = counts.at_least.get(name, most)
    return whole(most) if most == least else f"between {whole(least)} and {whole(most)}"


def count_text(evidence: Evidence, paper: Paper) -> str:
    """The figures with one sentence each, then what stands in the way of one route."""
    page = Page(paper)
    model = evidence.model
    counts = evidence.counts
    words = words_for(model)
    page.heading(title_of(model))
    for name, label, says in FIGURES:
        if name == "over_periods_most":
            label = f"Over {whole(counts.periods)} period{'s' if counts.periods != 1 else ''}"
            says = (
                f"{says}: sequences of {whole(counts.periods)} routes"
                if counts.periods != 1
                else f"{says}, in one period"
            )
        page.blank()
        page.line(f"{label}: {figure(counts, name)}", "strong")
        page.paragraph(says[0].upper() + says[1:] + ".", indent=4)
        witness = {"per_project_most": counts.most_at, "per_project_least": counts.least_at}.get(name)
        if witness is not None and (name == "per_project_most" or counts.per_project_least != counts.per_project_most):
            page.paragraph(f"For example {project(witness, words)}.", indent=4, style="quiet")
        if name == "per_project_least" and counts.exact and counts.per_project_least == 0:
            page.paragraph("0 means that such a project has no result, whatever is decided.", indent=4)
    page.blank()
    if counts.free_values:
        page.paragraph("Free values: " + ", ".join(counts.free_values), style="strong")
        page.paragraph("Somebody sets these numbers, and they reach the result. They multiply no count.", indent=4)
    else:
        page.paragraph("Free values: none", style="strong")
    _conditions(page, evidence, words)
    if not counts.exact:
        page.blank()
        page.paragraph("These figures are bounds, not exact: " + "; ".join(counts.why_inexact) + ".", style="warn")
        page.paragraph("--seconds gives the counting more time.", style="quiet")
    page.blank()
    page.paragraph(CAUTION, style="quiet")
    return page.text


def _conditions(page: Page, evidence: Evidence, words: Words) -> None:
    conditions = evidence.conditions
    if conditions.gaps:
        page.blank()
        page.line("Without a result", "strong")
        for gap, others in _first_of_each(conditions.gaps, lambda gap: (gap.kind, gap.names)):
            missing = {"row": "no row of a table answers", "value": "a calculation has no value"}
            says = missing.get(gap.kind, "no branch is open")
            page.paragraph(
                f"{gap.branch_point}: {says} for {_shown(gap.witness, words, general_id(gap.branch_point))}{others}.",
                indent=4,
                hanging=2,
            )
    if conditions.overlaps:
        page.blank()
        page.line("Two branches at once", "strong")
        for overlap, others in _first_of_each(conditions.overlaps, lambda overlap: overlap.branches):
            both = " and ".join(overlap.branches)
            project_there = _shown(overlap.witness, words, general_id(overlap.branch_point))
            text = f"{overlap.branch_point}: branches {both} for {project_there}{others}."
            page.paragraph(text, indent=4, hanging=2)
    if conditions.dead_branches:
        page.blank()
        page.line("Never taken", "strong")
        for dead, others in _first_of_each(conditions.dead_branches, lambda dead: dead.branch):
            page.paragraph(f"{dead.branch_point}: branch {dead.branch}{others}.", indent=4, hanging=2)
    if conditions.undecided:
        page.blank()
        page.line("Could not be told in the time given", "strong")
        listed = ", ".join(f"{each.asks} at {each.branch_point}" for each in conditions.undecided[:12])
        more = len(conditions.undecided) - 12
        page.paragraph(listed + (f" and {more} more" if more > 0 else "") + ".", indent=4, hanging=2)


class _AtAPoint(Protocol):
    @property
    def branch_point(self) -> str: ...


_Told = TypeVar("_Told", bound=_AtAPoint)


def _first_of_each(everything: Iterable[_Told], tells: Callable[[_Told], Hashable]) -> Iterator[tuple[_Told, str]]:
    """What stands there for several elements of an index, once: the first, and in words where else it is so."""
    groups: dict[tuple[str, Hashable], list[_Told]] = {}
    for each in everything:
        groups.setdefault((general_id(each.branch_point), tells(each)), []).append(each)
    for first, *others in groups.values():
        elements = sorted(int(other.branch_point.partition("@")[2].partition("/")[0]) for other in others)
        yield first, f" (and the same at {_elements(elements)})" if elements else ""


def _elements(numbers: list[int]) -> str:
    """``@2``, ``@2 to @5``, ``@2, @4 to @6 and @9``."""
    runs: list[list[int]] = []
    for number in numbers:
        if runs and number == runs[-1][-1] + 1:
            runs[-1].append(number)
        else:
            runs.append([number])
    said = []
    for run in runs:
        said += [f"@{run[0]} to @{run[-1]}"] if len(run) > 2 else [f"@{number}" for number in run]
    return listing(said, "and")


def _shown(witness: Witness | None, words: Words, besides: str = "") -> str:
    return "some project" if witness is None else shown(witness, words, besides)


def title_of(model: Model) -> str:
    """``Salt marsh re-flooding, draft 0.3``."""
    return f"{model.title or model.file}" + (f", draft {model.draft}" if model.draft else "")
