"""Findings as SARIF 2.1.0 (OASIS Standard, 27 March 2020), for services that show them beside the text."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import PurePath
from typing import Any
from urllib.parse import quote

from samesum import __version__
from samesum.judging.findings import Doubt, Finding
from samesum.judging.rules import FIELD, Rule
from samesum.outputs.checks import Checked, spoken_decision
from samesum.outputs.harmless import markdown
from samesum.outputs.page import clean
from samesum.outputs.projects import as_values, project
from samesum.problems import Problem
from samesum.spans import Span

SCHEMA = "https://docs.oasis-open.org/sarif/sarif/v2.1.0/errata01/os/schemas/sarif-schema-2.1.0.json"
FINGERPRINT = "samesumFinding/v1"


def sarif(
    checked: Sequence[Checked], rules: Mapping[str, Sequence[Rule]], problems: Sequence[Problem]
) -> dict[str, Any]:
    """One run over all files. ``rules`` are those each file was judged by; ``problems`` kept files from being
    checked, or are mistakes in rules and records."""
    known: dict[str, Rule] = {}
    for each in checked:
        for rule in rules.get(each.file, ()):
            known.setdefault(rule.name, rule)
    names = sorted(known)
    place = {name: number for number, name in enumerate(names)}
    notifications = [_problem(problem) for problem in problems]
    notifications += [_doubt(doubt, place) for each in checked for doubt in each.judged.doubts]
    return {
        "$schema": SCHEMA,
        "version": "2.1.0",
        "runs": [
            {
                "tool": {
                    "driver": {
                        "name": "samesum",
                        "version": __version__,
                        "rules": [_rule(known[name]) for name in names],
                    }
                },
                "columnKind": "unicodeCodePoints",
                "invocations": [
                    {"executionSuccessful": not problems, "toolExecutionNotifications": notifications}
                    if notifications
                    else {"executionSuccessful": True}
                ],
                "results": [_result(each, finding, place) for each in checked for finding in each.judged.findings],
            }
        ],
    }


def _rule(rule: Rule) -> dict[str, Any]:
    words = rule.name.replace("-", " ")
    why, remedy, wrong = (_general(text) for text in (rule.why, rule.remedy, rule.wrong_when))
    return {
        "id": rule.name,
        "shortDescription": {"text": words[0].upper() + words[1:]},
        "fullDescription": {"text": why},
        "help": {
            "text": f"{why}\n\nWrite instead: {remedy}\n\nWhen this is no mistake: {wrong}",
            "markdown": f"{markdown(why)}\n\n**Write instead:** {markdown(remedy)}\n\n"
            f"**When this is no mistake:** {markdown(wrong)}",
        },
        "defaultConfiguration": {"level": rule.severity},
        "properties": {"since": clean(rule.since)},
    }


def _general(text: str) -> str:
    """A rule's sentence with the name of what goes there in place of ``{attribute}``."""
    return clean(FIELD.sub(lambda field: f"‹{field[1].replace('_', ' ')}›", " ".join(text.split())))


def _result(checked: Checked, finding: Finding, place: Mapping[str, int]) -> dict[str, Any]:
    accepted = checked.accepted.get(finding.id)
    said = [finding.says]
    if finding.witness is not None:
        said.append(f"Shown by {project(finding.witness, checked.words)}.")
    said.append(f"Write instead: {finding.remedy}")
    said += finding.notes
    return {
        "ruleId": finding.rule,
        "ruleIndex": place[finding.rule],
        "level": finding.severity,
        "message": {"text": "\n".join(clean(" ".join(line.split())) for line in said)},
        "locations": [
            {
                **_location(finding.file, finding.span),
                **(
                    {"logicalLocations": [{"name": clean(finding.branch_point), "kind": "branch point"}]}
                    if finding.branch_point
                    else {}
                ),
            }
        ],
        "partialFingerprints": {FINGERPRINT: finding.id},
        "properties": {
            "clause": clean(finding.clause),
            "branch_point": clean(finding.branch_point),
            **({"witness": _clean_keys(as_values(finding.witness))} if finding.witness is not None else {}),
        },
        **({"suppressions": [_suppression(spoken_decision(accepted.decision))]} if accepted is not None else {}),
    }


def _clean_keys(values: Mapping[str, Any]) -> dict[str, Any]:
    return {clean(name): clean(value) if isinstance(value, str) else value for name, value in values.items()}


def _suppression(why: str) -> dict[str, str]:
    return {"kind": "external", "status": "accepted", "justification": clean(why)}


def _location(file: str, span: Span) -> dict[str, Any]:
    return {
        "physicalLocation": {
            "artifactLocation": {"uri": _uri(file)},
            "region": {
                "startLine": span.line,
                "startColumn": span.column,
                "endLine": max(span.end_line, span.line),
                "endColumn": max(span.end_column, 1),
            },
        }
    }


def _uri(file: str) -> str:
    """A file's name as a URI, relative where the name is relative."""
    path = PurePath(file)
    if path.is_absolute():
        return path.as_uri()
    return quote(path.as_posix().encode("utf-8", "surrogateescape"), safe="/")


def _problem(problem: Problem) -> dict[str, Any]:
    remedy = f"; {problem.remedy}" if problem.remedy else ""
    return {
        "level": "error",
        "message": {"text": clean(f"{problem.says}{remedy}")},
        "locations": [_location(problem.file, problem.span)],
    }


def _doubt(doubt: Doubt, place: Mapping[str, int]) -> dict[str, Any]:
    return {
        "level": "note",
        "message": {"text": clean(f"Not settled in the time given: {doubt.branch_point or 'this place'}.")},
        "associatedRule": {"id": doubt.rule, **({"index": place[doubt.rule]} if doubt.rule in place else {})},
        "locations": [_location(doubt.file, doubt.span)],
    }
