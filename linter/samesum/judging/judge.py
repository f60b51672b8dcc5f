"""Rules × subjects → findings."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from fractions import Fraction

from samesum.evidence.subjects.kinds import CANNOT_TELL, AttributeValue, Subject
from samesum.judging.asking import holds
from samesum.judging.findings import Doubt, Finding, identity
from samesum.judging.rules import FIELD, Rule, RuleSet
from samesum.written import plain


@dataclass(frozen=True, slots=True)
class Judged:
    """Findings in order, and the rules that could not tell, in order."""

    findings: tuple[Finding, ...]
    doubts: tuple[Doubt, ...]


def judge(file: str, subjects: Iterable[Subject], rules: RuleSet) -> Judged:
    """Every rule asked of every subject of its kind. The same input gives the same findings in the same order."""
    by_kind: dict[str, list[Subject]] = {}
    for subject in subjects:
        by_kind.setdefault(subject.kind, []).append(subject)
    findings: list[Finding] = []
    doubts: list[Doubt] = []
    for rule in rules.rules:
        repeats: dict[tuple[str, str], int] = {}
        for subject in by_kind.get(rule.looks_at, ()):
            answer = holds(rule.where, subject.attributes) if rule.where is not None else True
            if answer is CANNOT_TELL:
                doubts.append(Doubt(rule.name, rule.severity, file, subject.span, subject.clause, subject.branch_point))
            elif answer is True:
                repeat = repeats.get((subject.branch_point, subject.key), 0)
                repeats[(subject.branch_point, subject.key)] = repeat + 1
                findings.append(_finding(file, rule, subject, repeat))
    unique = {doubt.sort_key(): doubt for doubt in doubts}
    return Judged(tuple(sorted(findings, key=Finding.sort_key)), tuple(unique[key] for key in sorted(unique)))


def _finding(file: str, rule: Rule, subject: Subject, repeat: int) -> Finding:
    return Finding(
        rule.name,
        rule.severity,
        file,
        subject.span,
        subject.clause,
        subject.branch_point,
        filled(rule.says, subject),
        filled(rule.why, subject),
        filled(rule.remedy, subject),
        identity(rule.name, subject.branch_point, subject.key, repeat),
        subject.witness,
        subject.notes,
    )


def filled(template: str, subject: Subject) -> str:
    """The text with the subject's attributes in place of ``{attribute}``."""
    return FIELD.sub(lambda field: written(subject.attributes[field[1]]), template)


def written(value: AttributeValue) -> str:
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, int | Fraction):
        return plain(Fraction(value))
    return value if isinstance(value, str) else "cannot tell"
