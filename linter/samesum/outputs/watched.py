"""What a save changed: findings that are new or gone, figures that moved."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from samesum.judging.findings import Finding
from samesum.outputs.checks import Checked
from samesum.outputs.counts import FIGURES, figure
from samesum.outputs.page import Page, Paper, clean
from samesum.outputs.projects import project
from samesum.problems import Problem
from samesum.written import whole

_STYLE = {"error": "bad", "warning": "warn", "note": "link"}


@dataclass(frozen=True, slots=True)
class Seen:
    """A file as it was found: checked, or with the problems that kept it from being checked."""

    problems: tuple[Problem, ...]
    checked: Checked | None


def first_text(seen: Seen, paper: Paper) -> str:
    """Where things stand when watching begins."""
    page = Page(paper)
    if seen.checked is None:
        _problems(page, seen.problems)
        return page.text
    page.heading(seen.checked.title)
    page.paragraph(_standing(seen.checked))
    return page.text


def change_text(before: Seen, after: Seen, paper: Paper) -> str:
    """What changed. ``before`` is what was last checked, even when a save between could not be read."""
    page = Page(paper)
    page.heading("saved")
    if after.checked is None:
        _problems(page, after.problems)
        return page.text
    if before.checked is None:
        page.paragraph("It can be read again." if before.problems else "It can be read.", style="good")
        page.paragraph(_standing(after.checked))
        return page.text
    old = {finding.id: finding for finding in before.checked.judged.findings}
    new = {finding.id: finding for finding in after.checked.judged.findings}
    moved = False
    for finding in old.values():
        if finding.id not in new:
            _line(page, "−", finding, before.checked)
            moved = True
    for finding in new.values():
        if finding.id not in old:
            _line(page, "+", finding, after.checked)
            moved = True
    for id, finding in new.items():
        was, now = id in before.checked.accepted, id in after.checked.accepted
        if id in old and was != now:
            page.paragraph(f"~ {finding.branch_point}: {finding.rule} {'is accepted' if now else 'is open again'}", 2)
            moved = True
    for name, label, _ in FIGURES:
        was_figure, now_figure = figure(before.checked.counts, name), figure(after.checked.counts, name)
        if was_figure != now_figure:
            page.paragraph(f"{label}: {was_figure} → {now_figure}", indent=2, style="strong", hanging=2)
            moved = True
    free = (before.checked.counts.free_values, after.checked.counts.free_values)
    if free[0] != free[1]:
        page.paragraph(f"Free values: {_listed(free[0])} → {_listed(free[1])}", indent=2, style="strong", hanging=2)
        moved = True
    if not moved:
        page.paragraph("Nothing changed: the same findings, the same figures.", style="quiet")
    page.paragraph(_standing(after.checked), style="quiet")
    return page.text


def _listed(names: Sequence[str]) -> str:
    return ", ".join(names) if names else "none"


def _standing(checked: Checked) -> str:
    standing = [finding for finding in checked.judged.findings if finding.id not in checked.accepted]
    number = {name: sum(each.severity == name for each in standing) for name in ("error", "warning", "note")}
    parts = [f"{whole(count)} {name}{'' if count == 1 else 's'}" for name, count in number.items() if count]
    if checked.accepted:
        parts.append(f"{whole(len(checked.accepted))} accepted")
    most = figure(checked.counts, "per_project_most")
    return f"{', '.join(parts) or 'No findings'}; routes open to one project at most: {most}."


def _line(page: Page, sign: str, finding: Finding, checked: Checked) -> None:
    place = f"{finding.span.line}:{finding.span.column}" if sign == "+" else "gone"
    style = _STYLE[finding.severity] if sign == "+" else "good"
    page.paragraph(f"{sign} {finding.severity} · {finding.rule} · {place}", indent=2, style=style)
    page.paragraph(finding.says, indent=6)
    if sign == "+" and finding.witness is not None:
        page.paragraph(f"shown by {project(finding.witness, checked.words)}", indent=6, style="quiet")


def _problems(page: Page, problems: Sequence[Problem]) -> None:
    page.paragraph("It cannot be checked as it stands:", style="bad")
    for problem in problems:
        remedy = f"; {problem.remedy}" if problem.remedy else ""
        place = f"{problem.file}:{problem.span.line}:{problem.span.column}"
        page.line(clean(place), "link", indent=2)
        page.paragraph(f"{problem.says}{remedy}", indent=4)
