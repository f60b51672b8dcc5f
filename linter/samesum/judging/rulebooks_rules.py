"""Which rules a rulebook is judged by: those shipped, those of the call, those its ``samesum.yaml`` names."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from pathlib import Path

from samesum.judging.rules import RuleSet, Severity, load_rules
from samesum.judging.settings import Settings, read_settings, settings_file_for, unknown_rules
from samesum.problems import Problem, in_order
from samesum.reading.read import Reader
from samesum.shipped import shipped_folder


@dataclass(frozen=True, slots=True)
class Chosen:
    """The rules for one rulebook, the severity its settings fail on, and what is wrong with either."""

    rules: RuleSet
    fail_on: Severity | None
    problems: tuple[Problem, ...]


@dataclass(slots=True)
class RulesFor:
    """Chooses rules for many rulebooks and loads each folder once."""

    reader: Reader
    extra: Sequence[Path] = ()
    _by_settings: dict[Path | None, Chosen] = field(default_factory=dict)

    def rulebook(self, path: Path) -> Chosen:
        """The rules for the rulebook at ``path``."""
        place = settings_file_for(path)
        found = self._by_settings.get(place)
        if found is None:
            found = self._choose(place)
            self._by_settings[place] = found
        return found

    def _choose(self, place: Path | None) -> Chosen:
        settings, problems = read_settings(place) if place is not None else (Settings(), ())
        folders = [shipped_folder("rules"), *self.extra, *settings.rules]
        rules, more = load_rules(folders, self.reader)
        wrong = unknown_rules(settings, rules.rules)
        known = {rule.name for rule in rules.rules}
        severities = [(name, level) for name, level, _ in settings.severities if name in known]
        return Chosen(rules.with_severities(severities), settings.fail_on, in_order([*problems, *more, *wrong]))
