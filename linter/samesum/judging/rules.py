"""Lint rules as data: folders with a ``rule.yaml`` each, loaded in sorted order.

Nothing here knows a rule by name. A rule looks at one kind of subject, asks a condition over its
attributes in the rulebook language's own syntax, and says what it found.
"""

from __future__ import annotations

import hashlib
import re
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Literal, cast

from samesum.evidence.subjects.kinds import KINDS, AttributeKind
from samesum.problems import Problem, in_order
from samesum.reading.read import Reader
from samesum.reading.where import WhereCondition, WhereMistake, parse_where, unfit_names
from samesum.reading.words import listing, nearest
from samesum.reading.yaml_text import Fields, Node, Scalar, read_yaml
from samesum.spans import START, Span

Severity = Literal["error", "warning", "note"]
SEVERITIES: tuple[Severity, ...] = ("error", "warning", "note")

REQUIRED = ("name", "severity", "looks_at", "says", "why", "remedy", "wrong_when", "since")
OPTIONAL = ("where",)
NAME = re.compile(r"[a-z][a-z0-9]*(-[a-z0-9]+)*")
FIELD = re.compile(r"\{([^{}]*)\}")
SET_FILE = "rule_set.yaml"


@dataclass(frozen=True, slots=True)
class Rule:
    """One lint rule. ``where`` is None when every subject of the kind is a finding. ``says``, ``why`` and ``remedy``
    hold ``{attribute}`` where an attribute's value goes. ``since`` is the rule-set version it came with."""

    name: str
    severity: Severity
    looks_at: str
    where: WhereCondition | None
    where_text: str
    says: str
    why: str
    remedy: str
    wrong_when: str
    since: str
    file: str


@dataclass(frozen=True, slots=True)
class RuleSet:
    """Rules by name in sorted order. ``version`` names the rule sets loaded, ``hash`` changes with anything in
    any rule that is on."""

    rules: tuple[Rule, ...]
    version: str

    @property
    def hash(self) -> str:
        digest = hashlib.sha256()
        for rule in self.rules:
            parts = (rule.name, rule.severity, rule.looks_at, rule.where_text, rule.says, rule.why, rule.remedy)
            digest.update("\x1f".join(parts).encode() + b"\x1e")
        return digest.hexdigest()[:12]

    def with_severities(self, severities: Iterable[tuple[str, str]]) -> RuleSet:
        """The same rules with other severities; ``off`` takes a rule out. Names must be known."""
        wanted = dict(severities)
        kept = [
            replace(rule, severity=cast(Severity, wanted.get(rule.name, rule.severity)))
            for rule in self.rules
            if wanted.get(rule.name) != "off"
        ]
        return RuleSet(tuple(kept), self.version)


def load_rules(folders: Sequence[Path], reader: Reader) -> tuple[RuleSet, tuple[Problem, ...]]:
    """All rules of the folders, each folder's sub-folders in sorted order. A mistake in one rule hides nothing in
    the others: every one is reported, and the rule is left out."""
    found: dict[str, Rule] = {}
    problems: list[Problem] = []
    versions: list[str] = []
    for folder in folders:
        if not folder.is_dir():
            says = (
                "there is no such folder of rules" if not folder.exists() else "this is a file, not a folder of rules"
            )
            problems.append(Problem(str(folder), START, says, "name a folder that holds one folder a rule", "file"))
            continue
        version, mistakes = _version(folder)
        versions += [version] if version else []
        problems += mistakes
        inside = [each for each in sorted(folder.iterdir()) if (each / "rule.yaml").is_file()]
        if not inside:
            remedy = "put each rule into a folder of its own, as rule.yaml"
            problems.append(Problem(str(folder), START, "there is no rule in this folder", remedy, "file"))
        for each in inside:
            rule, mistakes = _load(each, reader)
            problems += mistakes
            if rule is None:
                continue
            if rule.name in found:
                says = f"there is a rule `{rule.name}` already, in {found[rule.name].file}"
                problems.append(Problem(rule.file, START, says, "give one of the two another name", "name"))
                continue
            found[rule.name] = rule
    return RuleSet(tuple(found[name] for name in sorted(found)), " + ".join(versions)), in_order(problems)


def _version(folder: Path) -> tuple[str, list[Problem]]:
    """The rule set's own name and version from ``rule_set.yaml``; the folder's name where there is none."""
    path = folder / SET_FILE
    if not path.is_file():
        return folder.resolve().name, []
    node, problems = read_yaml(path)
    fields, more = as_fields(node, str(path), ("name", "version"), ())
    mistakes = [*problems, *more]
    return ("" if mistakes else f"{fields['name'].text} {fields['version'].text}"), mistakes


def as_fields(
    node: Node | None, file: str, required: Sequence[str], optional: Sequence[str]
) -> tuple[dict[str, Scalar], list[Problem]]:
    """A mapping of texts with known keys; a problem for each key that is unknown, missing or no text."""
    problems: list[Problem] = []
    if not isinstance(node, Fields):
        span = node.span if node is not None else START
        return {}, [
            Problem(
                file, span, "this is no list of `name: value` lines", f"it needs {listing(required, 'and')}", "shape"
            )
        ]
    found: dict[str, Scalar] = {}
    known = (*required, *optional)
    for entry in node:
        key = entry.key.text
        if key not in known:
            close = nearest(key, known)
            remedy = f"did you mean `{close}`?" if close else f"the keys are {listing(known, 'and')}"
            problems.append(Problem(file, entry.key.span, f"`{key}` is no key here", remedy, "name"))
        elif not isinstance(entry.value, Scalar) or not entry.value.text.strip():
            problems.append(
                Problem(file, entry.value.span, f"`{key}` takes one text", "write it behind the colon", "shape")
            )
        else:
            found[key] = entry.value
    present = {entry.key.text for entry in node}
    for key in required:
        if key not in present:
            problems.append(Problem(file, node.span, f"`{key}` is missing", f"write `{key}: …`", "shape"))
    return found, problems


def _load(folder: Path, reader: Reader) -> tuple[Rule | None, list[Problem]]:
    path = folder / "rule.yaml"
    file = str(path)
    node, broken = read_yaml(path)
    fields, mistakes = as_fields(node, file, REQUIRED, OPTIONAL) if not broken or node is not None else ({}, [])
    problems = [*broken, *mistakes]
    texts = {key: " ".join(value.text.split()) for key, value in fields.items()}

    def report(key: str, says: str, remedy: str, span: Span | None = None) -> None:
        problems.append(Problem(file, span or fields[key].span, says, remedy, "value"))

    if "name" in texts:
        if not NAME.fullmatch(texts["name"]):
            report(
                "name",
                f"`{texts['name']}` is no name for a rule",
                "write small letters and hyphens, as in `free-value`",
            )
        elif texts["name"] != folder.name:
            report("name", f"the rule is called `{texts['name']}` and its folder `{folder.name}`", "call both the same")
    if "severity" in texts and texts["severity"] not in SEVERITIES:
        close = nearest(texts["severity"], SEVERITIES)
        remedy = f"did you mean `{close}`?" if close else f"it can be {listing(SEVERITIES)}"
        report("severity", f"`{texts['severity']}` is no severity", remedy)
    attributes = KINDS.get(texts.get("looks_at", ""))
    if "looks_at" in texts and attributes is None:
        close = nearest(texts["looks_at"], KINDS)
        remedy = f"did you mean `{close}`?" if close else f"rules can look at {listing(sorted(KINDS))}"
        report("looks_at", f"nothing is called `{texts['looks_at']}`", remedy)
    where: WhereCondition | None = None
    if attributes is not None:
        for key in ("says", "why", "remedy"):
            for field in FIELD.findall(texts.get(key, "")):
                if field not in attributes:
                    close = nearest(field, attributes)
                    remedy = f"did you mean `{close}`?" if close else f"there are {listing(sorted(attributes), 'and')}"
                    report(key, f"there is no attribute `{field}`", remedy)
        if "where" in fields:
            parsed, found = _where(fields["where"], attributes, reader)
            where = parsed
            for mistake in found:
                report("where", mistake.says, mistake.remedy, _inside(fields["where"], mistake.span))
    if problems:
        return None, problems
    severity = cast(Severity, texts["severity"])
    return (
        Rule(
            texts["name"],
            severity,
            texts["looks_at"],
            where,
            texts.get("where", ""),
            texts["says"],
            texts["why"],
            texts["remedy"],
            texts["wrong_when"],
            texts["since"],
            file,
        ),
        [],
    )


def _where(
    scalar: Scalar, attributes: dict[str, AttributeKind] | object, reader: Reader
) -> tuple[WhereCondition | None, tuple[WhereMistake, ...]]:
    parsed = parse_where(scalar.text.strip(), reader)
    if isinstance(parsed, WhereMistake):
        return None, (parsed,)
    return parsed, unfit_names(parsed, cast("dict[str, AttributeKind]", attributes))


def _inside(scalar: Scalar, span: Span) -> Span:
    """Where a mistake in a condition stands in the file; the condition's start when it runs over lines."""
    if scalar.span.line != scalar.span.end_line or scalar.quoted:
        return scalar.span
    offset = scalar.span.column - 1
    return Span(scalar.span.line, span.column + offset, scalar.span.line, span.end_column + offset)
