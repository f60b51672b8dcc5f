"""What rules found, as values with one total order."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass

from samesum.evidence.routes.witness import Witness
from samesum.judging.rules import SEVERITIES, Severity
from samesum.spans import Span


@dataclass(frozen=True, slots=True)
class Finding:
    """One thing that a rule found. ``id`` is rule + branch point + what it is about, never a line: it stays when
    unrelated lines move. ``witness`` is a project that shows it."""

    rule: str
    severity: Severity
    file: str
    span: Span
    clause: str
    branch_point: str
    says: str
    why: str
    remedy: str
    id: str
    witness: Witness | None = None
    notes: tuple[str, ...] = ()

    def sort_key(self) -> tuple[str, Span, int, str, str, str]:
        """The one total order in which findings are reported."""
        return (self.file, self.span, SEVERITIES.index(self.severity), self.rule, self.branch_point, self.id)


@dataclass(frozen=True, slots=True)
class Doubt:
    """A rule that could not tell: neither a finding nor none."""

    rule: str
    severity: Severity
    file: str
    span: Span
    clause: str
    branch_point: str

    def sort_key(self) -> tuple[str, Span, str, str]:
        return (self.file, self.span, self.rule, self.branch_point)


def identity(rule: str, branch_point: str, key: str, repeat: int = 0) -> str:
    """The id of a finding: 16 hexadecimal digits of a hash. ``repeat`` tells apart what is otherwise the same."""
    plain = " ".join(key.casefold().split())
    text = "\x1f".join((rule, branch_point, plain, str(repeat)))
    return hashlib.sha256(text.encode()).hexdigest()[:16]


def at_or_above(severity: Severity, limit: Severity) -> bool:
    """Whether a severity is as bad as ``limit``, or worse."""
    return SEVERITIES.index(severity) <= SEVERITIES.index(limit)
