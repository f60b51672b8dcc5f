"""``samesum.yaml``: what a repository says about how its rulebooks are checked.

Found upwards from the rulebook; the nearest one counts. Keys: ``rules`` (folders of further rules, from where
the file stands), ``severities`` (a severity, or ``off``, by rule), ``fail_on`` (a severity).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import cast

from samesum.judging.rules import SEVERITIES, Rule, Severity
from samesum.problems import Problem
from samesum.reading.words import listing, nearest
from samesum.reading.yaml_text import Entry, Fields, Listing, Node, Scalar, read_yaml
from samesum.spans import Span

FILE_NAME = "samesum.yaml"
KEYS = ("rules", "severities", "fail_on")
LEVELS = (*SEVERITIES, "off")


@dataclass(frozen=True, slots=True)
class Settings:
    """``severities`` are (rule, severity or off) with where they stand; ``fail_on`` is None when not said."""

    file: str = ""
    rules: tuple[Path, ...] = ()
    severities: tuple[tuple[str, str, Span], ...] = ()
    fail_on: Severity | None = None


def settings_file_for(rulebook: Path) -> Path | None:
    """The nearest ``samesum.yaml`` in the rulebook's folder or above it."""
    try:
        folder = rulebook.resolve().parent
    except OSError:
        return None
    for each in (folder, *folder.parents):
        candidate = each / FILE_NAME
        if candidate.is_file():
            return candidate
    return None


def read_settings(path: Path) -> tuple[Settings, tuple[Problem, ...]]:
    """The settings in a file and every mistake in them (rule names are checked once the rules are known)."""
    file = _shown(path)
    node, broken = read_yaml(path, file)
    problems = list(broken)
    if node is None:
        return Settings(file), tuple(problems)
    if not isinstance(node, Fields):
        problems.append(Problem(file, node.span, "this is no list of `name: value` lines", _keys(), "shape"))
        return Settings(file), tuple(problems)
    folders: tuple[Path, ...] = ()
    severities: list[tuple[str, str, Span]] = []
    fail_on: Severity | None = None
    for entry in node:
        match entry.key.text:
            case "rules":
                folders = tuple(path.parent / text for text in _texts(entry.value, file, problems))
            case "severities":
                severities += _severities(entry.value, file, problems)
            case "fail_on":
                level = _level(entry, SEVERITIES, file, problems)
                fail_on = cast(Severity, level) if level else None
            case key:
                close = nearest(key, KEYS)
                remedy = f"did you mean `{close}`?" if close else _keys()
                problems.append(Problem(file, entry.key.span, f"`{key}` is no key here", remedy, "name"))
    return Settings(file, folders, tuple(severities), fail_on), tuple(problems)


def _shown(path: Path) -> str:
    """The path as short as it can be said from here."""
    try:
        return str(path.relative_to(Path.cwd()))
    except (ValueError, OSError):
        return str(path)


def _keys() -> str:
    return f"the keys are {listing(KEYS, 'and')}"


def _texts(node: Node, file: str, problems: list[Problem]) -> list[str]:
    items = node.items if isinstance(node, Listing) else (node,)
    found = []
    for item in items:
        if isinstance(item, Scalar) and item.text.strip():
            found.append(item.text.strip())
        else:
            problems.append(
                Problem(file, item.span, "a folder's name is expected here", "write `rules: [my-rules]`", "shape")
            )
    return found


def _severities(node: Node, file: str, problems: list[Problem]) -> list[tuple[str, str, Span]]:
    if not isinstance(node, Fields):
        remedy = "write a line `rule-name: note` for each"
        problems.append(Problem(file, node.span, "a severity for each rule is expected here", remedy, "shape"))
        return []
    found = []
    for entry in node:
        level = _level(entry, LEVELS, file, problems)
        if level:
            found.append((entry.key.text, level, entry.key.span))
    return found


def _level(entry: Entry, levels: Sequence[str], file: str, problems: list[Problem]) -> str:
    text = entry.value.text.strip() if isinstance(entry.value, Scalar) else ""
    if text in levels:
        return text
    close = nearest(text, levels)
    remedy = f"did you mean `{close}`?" if close else f"it can be {listing(levels)}"
    problems.append(Problem(file, entry.value.span, f"`{text}` is no severity", remedy, "value"))
    return ""


def unknown_rules(settings: Settings, rules: Sequence[Rule]) -> tuple[Problem, ...]:
    """A problem for each rule named in the settings that there is not."""
    names = [rule.name for rule in rules]
    problems = []
    for name, _, span in settings.severities:
        if name not in names:
            close = nearest(name, names)
            remedy = f"did you mean `{close}`?" if close else f"the rules are {listing(names, 'and')}"
            problems.append(Problem(settings.file, span, f"there is no rule `{name}`", remedy, "name"))
    return tuple(problems)
