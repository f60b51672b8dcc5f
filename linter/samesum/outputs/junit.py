"""Findings as JUnit XML, for dashboards: one suite a file, one test a rule.

The format has no standard of its own; what is written here is the part that all readers agree on.
"""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from xml.etree import ElementTree as xml

from samesum.judging.findings import Finding, at_or_above
from samesum.judging.rules import Rule, Severity
from samesum.outputs.checks import Checked, spoken_decision
from samesum.outputs.page import clean
from samesum.outputs.projects import project
from samesum.problems import Problem

_ILLEGAL = re.compile("[^\t\n\r\u0020-\ud7ff\ue000-\ufffd\U00010000-\U0010ffff]")  # Char of XML 1.0


def junit(
    checked: Sequence[Checked],
    rules: Mapping[str, Sequence[Rule]],
    problems: Sequence[Problem],
    limits: Mapping[str, Severity],
) -> str:
    """One document. A test fails when a finding at or above the file's limit (``limits``) stands; what is below it,
    or accepted, stands in the test's output. A file that could not be checked is a suite with an error."""
    root = xml.Element("testsuites", name="samesum")
    failures = errors = tests = 0
    for each in checked:
        suite = xml.SubElement(root, "testsuite", name=_text(each.file))
        failed = _file(suite, each, rules.get(each.file, ()), limits[each.file])
        failures += failed
        tests += len(suite)
        _totals(suite, len(suite), failed, 0)
    by_file: dict[str, list[Problem]] = {}
    for problem in problems:
        by_file.setdefault(problem.file, []).append(problem)
    for file, found in by_file.items():
        suite = xml.SubElement(root, "testsuite", name=_text(file))
        case = xml.SubElement(suite, "testcase", classname=_text(file), name="reading", time="0")
        lines = [
            f"{file}:{each.span.line}:{each.span.column}: {each.says}; {each.remedy}".rstrip("; ") for each in found
        ]
        error = xml.SubElement(case, "error", message=_text(lines[0]), type="unusable")
        error.text = "\n".join(_text(line) for line in lines)
        errors += 1
        tests += 1
        _totals(suite, 1, 0, 1)
    _totals(root, tests, failures, errors)
    xml.indent(root)
    return '<?xml version="1.0" encoding="UTF-8"?>\n' + xml.tostring(root, encoding="unicode") + "\n"


def _totals(element: xml.Element, tests: int, failures: int, errors: int) -> None:
    for name, number in (("tests", tests), ("failures", failures), ("errors", errors), ("time", 0)):
        element.set(name, str(number))


def _file(suite: xml.Element, checked: Checked, rules: Sequence[Rule], limit: Severity) -> int:
    found: dict[str, list[Finding]] = {}
    for finding in checked.judged.findings:
        found.setdefault(finding.rule, []).append(finding)
    failed = 0
    for name in sorted({rule.name for rule in rules} | set(found)):
        case = xml.SubElement(suite, "testcase", classname=_text(checked.file), name=_text(name), time="0")
        standing: list[Finding] = []
        others: list[Finding] = []
        for finding in found.get(name, ()):
            counts = finding.id not in checked.accepted and at_or_above(finding.severity, limit)
            (standing if counts else others).append(finding)
        if standing:
            failed += 1
            message = standing[0].says if len(standing) == 1 else f"{len(standing)} findings"
            failure = xml.SubElement(case, "failure", message=_text(message), type=standing[0].severity)
            failure.text = "\n".join(_line(checked, finding) for finding in standing)
        if others:
            xml.SubElement(case, "system-out").text = "\n".join(_line(checked, finding) for finding in others)
    return failed


def _line(checked: Checked, finding: Finding) -> str:
    clause = f" [clause {finding.clause}]" if finding.clause else ""
    shown = f" Shown by {project(finding.witness, checked.words)}." if finding.witness is not None else ""
    accepted = checked.accepted.get(finding.id)
    tail = f" Accepted {spoken_decision(accepted.decision)}" if accepted is not None else ""
    place = f"{finding.file}:{finding.span.line}:{finding.span.column}"
    return _text(f"{place}: {finding.severity}: {finding.says}{shown} Write instead: {finding.remedy}{tail}{clause}")


def _text(text: str) -> str:
    return _ILLEGAL.sub("�", clean(text))
