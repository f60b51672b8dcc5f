"""What ``samesum check`` answers, as JSON and for people."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from samesum import __version__
from samesum.evidence.evidence import Evidence
from samesum.judging.findings import Finding
from samesum.judging.judge import Judged
from samesum.judging.rules import SEVERITIES, RuleSet
from samesum.outputs.counts import figure, paths_json, shown_by, title_of
from samesum.outputs.page import Page, Paper
from samesum.outputs.projects import Words, project, words_for
from samesum.outputs.verdict import decided, verdict

CAUTION = (
    "samesum supports the people who write and review methodologies. It does not replace accredited validation "
    "and verification, nor the programme's own rules."
)
_STYLE = {"error": "bad", "warning": "warn", "note": "link"}


@dataclass(frozen=True, slots=True)
class Checked:
    """One file that could be examined, with the rules that it was judged by."""

    file: str
    evidence: Evidence
    judged: Judged
    rules: RuleSet


# --- JSON --------------------------------------------------------------------------------


def check_json(checked: Sequence[Checked]) -> dict[str, Any]:
    """The whole answer of ``samesum check --json``. ``paths`` holds the figures of the file, or of each file by
    name where there are several."""
    paths: dict[str, Any] = {each.file: paths_json(each.evidence.counts) for each in checked}
    sets = sorted({(each.rules.version, each.rules.hash) for each in checked})
    return {
        "findings": [finding_json(finding) for each in checked for finding in each.judged.findings],
        "paths": next(iter(paths.values())) if len(paths) == 1 else paths,
        "files": [
            {
                "file": each.file,
                "rulebook": each.evidence.model.title,
                "draft": each.evidence.model.draft,
                "verdict": verdict(each.evidence).word,
                "branch_points": decided(each.evidence),
                "free_values": list(each.evidence.counts.free_values),
                "paths": paths[each.file],
            }
            for each in checked
        ],
        "cannot_tell": [
            {
                "rule": doubt.rule,
                "severity": doubt.severity,
                "file": doubt.file,
                "line": doubt.span.line,
                "column": doubt.span.column,
                "clause": doubt.clause,
                "branch_point": doubt.branch_point,
            }
            for each in checked
            for doubt in each.judged.doubts
        ],
        "rule_sets": [{"version": version, "hash": hash} for version, hash in sets],
        "samesum": __version__,
    }


def finding_json(finding: Finding) -> dict[str, Any]:
    """One finding; ``witness`` and ``route`` only where a project shows it."""
    return {
        "rule": finding.rule,
        "severity": finding.severity,
        "file": finding.file,
        "line": finding.span.line,
        "column": finding.span.column,
        "end_line": finding.span.end_line,
        "end_column": finding.span.end_column,
        "clause": finding.clause,
        "branch_point": finding.branch_point,
        "says": finding.says,
        "why": finding.why,
        "remedy": finding.remedy,
        "id": finding.id,
        **(shown_by(finding.witness) if finding.witness is not None else {}),
    }


# --- for people ----------------------------------------------------------------------------


def check_text(checked: Sequence[Checked], paper: Paper) -> str:
    """Findings by clause in reading order, then what it comes to, for each file; the caution at the end."""
    page = Page(paper)
    for each in checked:
        _file(page, each)
    page.blank()
    page.paragraph(CAUTION, style="quiet")
    return page.text


def _file(page: Page, checked: Checked) -> None:
    evidence = checked.evidence
    words = words_for(evidence.model)
    page.heading(title_of(evidence.model))
    for clause, findings in by_clause(checked.judged.findings):
        page.blank()
        page.line(f"Clause {clause}" if clause else "Without a clause", "strong")
        for finding in findings:
            page.blank()
            _finding(page, finding, words)
    _summary(page, checked)


def by_clause(findings: Sequence[Finding]) -> list[tuple[str, list[Finding]]]:
    """Findings by clause; clauses in the order in which the rulebook first comes to them."""
    groups: dict[str, list[Finding]] = {}
    for finding in findings:
        groups.setdefault(finding.clause, []).append(finding)
    return list(groups.items())


def _finding(page: Page, finding: Finding, words: Words) -> None:
    page.line(f"{finding.file}:{finding.span.line}:{finding.span.column}", "link", indent=2)
    label = page.styled(finding.severity, _STYLE[finding.severity])
    page.lines.append(f"  {label} · {page.styled(finding.rule, 'quiet')}")
    page.paragraph(finding.says, indent=4)
    if finding.witness is not None:
        page.entry("shown by", project(finding.witness, words), indent=4, column=10)
    page.entry("why", finding.why, indent=4, column=10)
    page.entry("instead", finding.remedy, indent=4, column=10)
    for note in finding.notes:
        page.entry("note", note, indent=4, column=10)


def _summary(page: Page, checked: Checked) -> None:
    evidence, counts = checked.evidence, checked.evidence.counts
    page.blank()
    page.line("What it comes to", "strong")
    number = {each: sum(finding.severity == each for finding in checked.judged.findings) for each in SEVERITIES}
    listed = [f"{count} {name}{'' if count == 1 else 's'}" for name, count in number.items() if count]
    page.entry("findings", ", ".join(listed) if listed else "none", indent=2, column=16)
    page.entry("branch points", spoken_branch_points(evidence), indent=2, column=16)
    least, most = figure(counts, "per_project_least"), figure(counts, "per_project_most")
    open_routes = most if least == most else f"{least} for some projects, {most} for others"
    page.entry("routes open", f"to one and the same project: {open_routes}; 1 is what repeatability needs", 2, 16)
    free = ", ".join(counts.free_values)
    page.entry("free values", free if free else "none", indent=2, column=16)
    found = verdict(evidence)
    page.entry("verdict so far", found.says, indent=2, column=16, style=found.style)
    if checked.judged.doubts:
        rules: dict[str, dict[str, None]] = {}
        for doubt in checked.judged.doubts:
            rules.setdefault(doubt.rule, {})[doubt.branch_point] = None
        told = "; ".join(f"{rule} at {_some(list(places))}" for rule, places in rules.items())
        page.entry("cannot tell", f"{told}. More time (--seconds) may settle it.", indent=2, column=16)
    if not counts.exact:
        page.entry("not exact", "; ".join(counts.why_inexact), indent=2, column=16)
    page.entry("rules", f"{checked.rules.version}, {checked.rules.hash}", indent=2, column=16)


def _some(places: list[str], most: int = 4) -> str:
    shown = ", ".join(places[:most])
    return shown if len(places) <= most else f"{shown} and {len(places) - most} more"


def spoken_branch_points(evidence: Evidence) -> str:
    """``6: 3 picked by the developer, 1 by the verifier, 2 settled by facts``."""
    found = decided(evidence)
    words = {
        "developer": "picked by the developer",
        "verifier": "picked by the verifier",
        "programme": "picked by the programme",
        "steered": "whose conditions somebody can move",
        "tied": "tied to another choice",
        "facts": "settled by facts",
    }
    parts = [f"{found[key]} {says}" for key, says in words.items() if found[key]]
    return f"{found['total']}: {', '.join(parts)}" if parts else "none"
