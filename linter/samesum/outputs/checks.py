"""What ``samesum check`` answers, as JSON and for people."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from samesum import __version__
from samesum.evidence.evidence import Evidence
from samesum.evidence.routes.counting import Counts
from samesum.judging.findings import Finding, at_or_above
from samesum.judging.judge import Judged
from samesum.judging.rules import SEVERITIES, RuleSet, Severity
from samesum.outputs.counts import figure, paths_json, shown_by, title_of
from samesum.outputs.page import CAUTION, Page, Paper
from samesum.outputs.projects import Words, shown, words_for
from samesum.outputs.verdict import Verdict, verdict
from samesum.outputs.verdict import decided as decided_by
from samesum.reviewing.record import Decision, Standing
from samesum.written import whole

_STYLE = {"error": "bad", "warning": "warn", "note": "link"}


@dataclass(frozen=True, slots=True)
class Checked:
    """One file that was examined and judged, without the evidence itself, so that it can be handed from one
    process to another. ``accepted``: what the review accepted, by the finding's id; ``stale``: decisions that no
    longer fit the rulebook."""

    file: str
    title: str
    model_title: str
    draft: str
    counts: Counts
    verdict: Verdict
    branch_points: Mapping[str, int]
    words: Words
    judged: Judged
    rules_version: str
    rules_hash: str
    accepted: Mapping[str, Standing]
    stale: tuple[Standing, ...]

    @staticmethod
    def of(
        file: str,
        evidence: Evidence,
        judged: Judged,
        rules: RuleSet,
        decided: Mapping[str, Standing] | None = None,
        mistakes: int = 0,
    ) -> Checked:
        """``decided``: the review's decisions by place, held against the rulebook as it is now. ``mistakes``: how many
        stand in the rulebook and let it be examined all the same."""
        standing = decided or {}
        model = evidence.model
        return Checked(
            file,
            title_of(model),
            model.title,
            model.draft,
            evidence.counts,
            verdict(evidence, mistakes),
            decided_by(evidence),
            words_for(model),
            judged,
            rules.version,
            rules.hash,
            {
                finding.id: standing[finding.branch_point]
                for finding in judged.findings
                if finding.branch_point in standing and standing[finding.branch_point].accepted
            },
            tuple(each for each in standing.values() if each.stale),
        )

    def fails(self, limit: Severity) -> bool:
        """Whether a finding at or above ``limit`` stands that the review did not accept."""
        return any(
            at_or_above(finding.severity, limit) and finding.id not in self.accepted for finding in self.judged.findings
        )


# --- JSON --------------------------------------------------------------------------------


def check_json(checked: Sequence[Checked]) -> dict[str, Any]:
    """The whole answer of ``samesum check --json``. ``paths`` holds the figures of the file, or of each file by
    name where there are several."""
    paths: dict[str, Any] = {each.file: paths_json(each.counts) for each in checked}
    sets = sorted({(each.rules_version, each.rules_hash) for each in checked})
    return {
        "findings": [
            {**finding_json(finding), **_acceptance(each.accepted.get(finding.id))}
            for each in checked
            for finding in each.judged.findings
        ],
        "paths": next(iter(paths.values())) if len(paths) == 1 else paths,
        "files": [
            {
                "file": each.file,
                "rulebook": each.model_title,
                "draft": each.draft,
                "verdict": each.verdict.word,
                "branch_points": dict(each.branch_points),
                "free_values": list(each.counts.free_values),
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
        "stale_decisions": [
            {"file": each.file, "branch_point": standing.decision.place, "why": standing.stale}
            for each in checked
            for standing in each.stale
        ],
        "rule_sets": [{"version": version, "hash": hash} for version, hash in sets],
        "samesum": __version__,
    }


def _acceptance(standing: Standing | None) -> dict[str, Any]:
    if standing is None:
        return {}
    decision = standing.decision
    return {"accepted": {"reason": decision.reason, "by": decision.by, "when": decision.when}}


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
    page.heading(checked.title)
    for clause, findings in by_clause(checked.judged.findings):
        page.blank()
        page.line(f"Clause {clause}" if clause else "Without a clause", "strong")
        for finding in findings:
            page.blank()
            _finding(page, finding, checked.words, checked.accepted.get(finding.id))
    _summary(page, checked)


def by_clause(findings: Sequence[Finding]) -> list[tuple[str, list[Finding]]]:
    """Findings by clause; clauses in the order in which the rulebook first comes to them."""
    groups: dict[str, list[Finding]] = {}
    for finding in findings:
        groups.setdefault(finding.clause, []).append(finding)
    return list(groups.items())


def _finding(page: Page, finding: Finding, words: Words, accepted: Standing | None) -> None:
    page.line(f"{finding.file}:{finding.span.line}:{finding.span.column}", "link", indent=2)
    label = page.styled(finding.severity, _STYLE[finding.severity] if accepted is None else "quiet")
    tail = "" if accepted is None else " · accepted"
    rule = page.styled(finding.rule, "quiet") + tail
    if len(f"  {finding.severity} · {finding.rule}{tail}") <= page.paper.width:
        page.lines.append(f"  {label} · {rule}")
    else:
        page.lines += [f"  {label}", f"  {rule}"]
    page.paragraph(finding.says, indent=4)
    if finding.witness is not None:
        page.entry("shown by", shown(finding.witness, words, finding.branch_point), indent=4, column=10)
    if accepted is not None:
        page.entry("accepted", spoken_decision(accepted.decision), indent=4, column=10)
        return
    page.entry("why", finding.why, indent=4, column=10)
    page.entry("instead", finding.remedy, indent=4, column=10)
    for note in finding.notes:
        page.entry("note", note, indent=4, column=10)


def spoken_decision(decision: Decision) -> str:
    """``by A. Okafor on 2026-05-02: both options are unbiased``."""
    by = f"by {decision.by}" if decision.by else "by the review"
    when = f" on {decision.when}" if decision.when else ""
    return f"{by}{when}: {decision.reason}" if decision.reason else f"{by}{when}"


def _summary(page: Page, checked: Checked) -> None:
    counts = checked.counts
    page.blank()
    page.line("What it comes to", "strong")
    standing = [finding for finding in checked.judged.findings if finding.id not in checked.accepted]
    number = {each: sum(finding.severity == each for finding in standing) for each in SEVERITIES}
    listed = [f"{whole(count)} {name}{'' if count == 1 else 's'}" for name, count in number.items() if count]
    if checked.accepted:
        listed.append(f"{whole(len(checked.accepted))} accepted by the review")
    page.entry("findings", ", ".join(listed) if listed else "none", indent=2, column=16)
    page.entry("branch points", spoken_branch_points(checked.branch_points), indent=2, column=16)
    least, most = figure(counts, "per_project_least"), figure(counts, "per_project_most")
    open_routes = most if least == most else f"{least} for some projects, {most} for others"
    page.entry("routes open", f"to one and the same project: {open_routes}; 1 is what repeatability needs", 2, 16)
    free = ", ".join(counts.free_values)
    page.entry("free values", free if free else "none", indent=2, column=16)
    page.entry("verdict so far", checked.verdict.says, indent=2, column=16, style=checked.verdict.style)
    for stale in checked.stale:
        what = "is no longer there" if stale.stale == "gone" else "says something else since"
        text = f"the decision on {stale.decision.place} (`{stale.decision.verdict}`): the place {what}"
        page.entry("stale", text, indent=2, column=16, style="warn")
    if checked.judged.doubts:
        rules: dict[str, dict[str, None]] = {}
        for doubt in checked.judged.doubts:
            rules.setdefault(doubt.rule, {})[doubt.branch_point] = None
        told = "; ".join(f"{rule} at {_some(list(places))}" for rule, places in rules.items())
        page.entry("cannot tell", f"{told}. More time (--seconds) may settle it.", indent=2, column=16)
    if not counts.exact:
        page.entry("not exact", "; ".join(counts.why_inexact), indent=2, column=16)
    page.entry("rules", f"{checked.rules_version}, {checked.rules_hash}", indent=2, column=16)


def _some(places: list[str], most: int = 4) -> str:
    shown = ", ".join(places[:most])
    return shown if len(places) <= most else f"{shown} and {whole(len(places) - most)} more"


def spoken_branch_points(found: Mapping[str, int]) -> str:
    """``6: 3 picked by the developer, 1 by the verifier, 2 settled by facts``."""
    words = {
        "developer": "picked by the developer",
        "verifier": "picked by the verifier",
        "programme": "picked by the programme",
        "steered": "whose conditions somebody can move",
        "tied": "tied to another choice",
        "facts": "settled by facts",
    }
    parts = [f"{whole(found[key])} {says}" for key, says in words.items() if found[key]]
    return f"{whole(found['total'])}: {', '.join(parts)}" if parts else "none"
