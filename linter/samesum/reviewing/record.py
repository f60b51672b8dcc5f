"""The review record: what a review body decided about each place of a rulebook.

It stands beside the rulebook as ``NAME.review.yaml``, keyed by the place's id, and is written to be
read and edited by people. A decision remembers a fingerprint of what the place said; when the place is
gone or says something else, the decision is stale: reported, never dropped, and no longer in force.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Literal

from samesum.problems import Problem, in_order
from samesum.reading.words import nearest
from samesum.reading.yaml_text import Fields, Node, Scalar, parse_yaml, read_yaml
from samesum.spans import Span

Verdict = Literal["open", "accepted", "to be closed"]
VERDICTS: tuple[Verdict, ...] = ("open", "accepted", "to be closed")
FIELDS = ("decision", "reason", "by", "when", "says")
DECISIONS = "decisions"
_DAY = re.compile(r"\d{4}-\d\d-\d\d")


@dataclass(frozen=True, slots=True)
class Decision:
    """``says`` is the fingerprint of what the place said when it was decided ("" when nobody noted it)."""

    place: str
    verdict: Verdict
    reason: str
    by: str
    when: str
    says: str
    span: Span


@dataclass(frozen=True, slots=True)
class Record:
    """``file`` is the record's own name; decisions stand in the order written."""

    file: str
    decisions: tuple[Decision, ...] = ()


@dataclass(frozen=True, slots=True)
class Standing:
    """A decision held against the rulebook as it is now. ``stale`` is "", ``gone`` or ``changed``."""

    decision: Decision
    stale: Literal["", "gone", "changed"]

    @property
    def accepted(self) -> bool:
        """Whether the place is accepted as it stands now."""
        return self.decision.verdict == "accepted" and not self.stale


def record_path(rulebook: Path) -> Path:
    """``tide.rulebook`` → ``tide.review.yaml``."""
    return rulebook.with_name(f"{rulebook.stem}.review.yaml")


def read_record(rulebook: Path) -> tuple[Record, tuple[Problem, ...]]:
    """The record beside a rulebook; an empty one when there is none."""
    path = record_path(rulebook)
    if not path.exists():
        return Record(str(path)), ()
    node, problems = read_yaml(path)
    return _record(node, problems, str(path))


def parse_record(text: str, file: str) -> tuple[Record, tuple[Problem, ...]]:
    """The record in a YAML text and everything that is wrong with it."""
    node, problems = parse_yaml(text, file)
    return _record(node, problems, file)


def _record(node: Node | None, problems: tuple[Problem, ...], file: str) -> tuple[Record, tuple[Problem, ...]]:
    if problems or node is None or _is_empty(node):
        return Record(file), problems
    found: list[Problem] = []

    def report(span: Span, says: str, remedy: str) -> None:
        found.append(Problem(file, span, says, remedy, "shape"))

    if not isinstance(node, Fields):
        report(node.span, "this is no review record", f"begin it with `{DECISIONS}:`")
        return Record(file), in_order(found)
    for entry in node:
        if entry.key.text != DECISIONS:
            close = f"`{DECISIONS}:` is the only part of a review record"
            report(entry.key.span, f"`{entry.key.text}` is not known here", close)
    held = node.get(DECISIONS)
    decisions: list[Decision] = []
    if isinstance(held, Fields):
        for entry in held:
            decision = _decision(entry.key, entry.value, report)
            if decision is not None:
                decisions.append(decision)
    elif held is not None and not _is_empty(held):
        says = f"under `{DECISIONS}` the id of a branch point is expected"
        report(held.span, says, "write `ID:` and below it the decision")
    return Record(file, tuple(decisions)), in_order(found)


def _is_empty(node: Node) -> bool:
    return isinstance(node, Scalar) and not node.text and not node.quoted


def _decision(key: Scalar, value: Node, report: Callable[[Span, str, str], None]) -> Decision | None:
    if not isinstance(value, Fields):
        report(
            value.span,
            f"the decision on `{key.text}` has no fields",
            "write `decision: open`, accepted or to be closed",
        )
        return None
    texts: dict[str, Scalar] = {}
    misspelled = False
    for entry in value:
        if entry.key.text not in FIELDS:
            close = nearest(entry.key.text, FIELDS)
            misspelled = misspelled or close == "decision"
            remedy = f"did you mean `{close}`?" if close else f"the fields are {', '.join(FIELDS)}"
            report(entry.key.span, f"`{entry.key.text}` is no field of a decision", remedy)
        elif not isinstance(entry.value, Scalar):
            report(entry.value.span, f"`{entry.key.text}` is a text, not a list or a mapping", "write it on one line")
        else:
            texts[entry.key.text] = entry.value
    verdict = texts.get("decision")
    if verdict is None and misspelled:
        return None
    if verdict is None:
        report(key.span, f"the decision on `{key.text}` is missing", "write `decision: open`, accepted or to be closed")
        return None
    if verdict.text not in VERDICTS:
        close = nearest(verdict.text, VERDICTS)
        remedy = f"did you mean `{close}`?" if close else "write open, accepted or to be closed"
        report(verdict.span, f"`{verdict.text}` is no decision", remedy)
        return None
    when = texts.get("when")
    if when is not None and when.text and not _DAY.fullmatch(when.text):
        report(when.span, f"`{when.text}` is no date", "write it as 2026-05-31")
    text = {name: scalar.text for name, scalar in texts.items()}
    return Decision(
        key.text,
        verdict.text,
        text.get("reason", ""),
        text.get("by", ""),
        text.get("when", ""),
        text.get("says", ""),
        key.span,
    )


def standings(record: Record, fingerprints: Mapping[str, str]) -> dict[str, Standing]:
    """Each decision held against the fingerprints of the rulebook as it is now, by id."""
    found: dict[str, Standing] = {}
    for decision in record.decisions:
        now = fingerprints.get(decision.place)
        stale: Literal["", "gone", "changed"] = ""
        if now is None:
            stale = "gone"
        elif decision.says and decision.says != now:
            stale = "changed"
        found[decision.place] = Standing(decision, stale)
    return found
