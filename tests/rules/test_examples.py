"""Every rule is run on its own examples: it fires on each line marked ``# fires`` and nowhere else."""

from __future__ import annotations

from collections import Counter
from functools import cache
from pathlib import Path

import pytest

from samesum.examine import Examined, examine
from samesum.judging.rules import RuleSet, load_rules
from samesum.reading.read import Reader, make_reader

TOP = Path(__file__).parents[2]
RULES = TOP / "rules"
NAMES = sorted(folder.name for folder in RULES.iterdir() if folder.is_dir())
MARK = "# fires"


@cache
def reader() -> Reader:
    return make_reader(None)


@cache
def rules() -> RuleSet:
    found, problems = load_rules([RULES], reader())
    assert not problems, problems
    return found


def examples(kind: str) -> list[Path]:
    found: list[Path] = []
    for name in NAMES:
        found += sorted((RULES / name / kind).glob("*.rulebook"))
    return found


def examined(path: Path) -> Examined:
    cases = path.with_suffix(".cases.yaml")
    found = examine(path, 20, rules(), reader(), cases if cases.exists() else None)
    assert found.judged is not None, found.problems
    return found


def fires_on(path: Path) -> Counter[int]:
    found = examined(path)
    assert found.judged is not None
    name = path.parents[1].name
    assert not [doubt for doubt in found.judged.doubts if doubt.rule == name]
    return Counter(finding.span.line for finding in found.judged.findings if finding.rule == name)


def test_every_folder_is_a_rule_with_examples_of_both_kinds() -> None:
    assert [rule.name for rule in rules().rules] == NAMES
    for name in NAMES:
        inside = {each.name for each in (RULES / name).iterdir()}
        assert inside == {"rule.yaml", "fires", "quiet"}, name
        for kind in ("fires", "quiet"):
            files = sorted((RULES / name / kind).iterdir())
            examples = [each for each in files if each.suffix == ".rulebook"]
            cases = [each.with_suffix(".cases.yaml") for each in examples]
            assert examples and set(files) <= {*examples, *cases}, (name, kind)


@pytest.mark.parametrize("path", examples("fires"), ids=lambda path: f"{path.parents[1].name}/{path.stem}")
def test_fires_exactly_where_marked(path: Path) -> None:
    lines = path.read_text(encoding="utf-8").splitlines()
    marked = Counter(number for number, line in enumerate(lines, start=1) if MARK in line)
    assert marked, "an example under fires/ marks the line with `# fires`"
    assert fires_on(path) == marked


@pytest.mark.parametrize("path", examples("quiet"), ids=lambda path: f"{path.parents[1].name}/{path.stem}")
def test_stays_quiet(path: Path) -> None:
    assert MARK not in path.read_text(encoding="utf-8")
    assert fires_on(path) == Counter()


def test_every_rule_fires_on_the_bad_sample() -> None:
    found = examined(TOP / "sample_rulebooks" / "every_fault.rulebook").judged
    assert found is not None
    assert sorted({finding.rule for finding in found.findings}) == NAMES


@pytest.mark.parametrize(
    "path", sorted((TOP / "sample_rulebooks").glob("*_repaired.rulebook")), ids=lambda path: path.stem
)
def test_repaired_samples_have_one_route_and_no_error_or_warning(path: Path) -> None:
    found = examined(path)
    assert found.judged is not None and found.evidence is not None
    assert [finding for finding in found.judged.findings if finding.severity != "note"] == []
    assert found.judged.doubts == ()
    counts = found.evidence.counts
    assert (counts.exact, counts.per_project_most, counts.per_project_least) == (True, 1, 1)


def test_the_worked_example_of_the_language() -> None:
    found = examined(TOP / "sample_rulebooks" / "marsh_example.rulebook").judged
    assert found is not None
    names = {(finding.rule, finding.branch_point) for finding in found.findings}
    assert {
        ("missing-condition", "methane"),
        ("free-choice-of-method", "soil_carbon"),
        ("free-value", "discount"),
        ("never-used", "access"),
    } <= names
    gap = next(finding for finding in found.findings if finding.rule == "missing-condition")
    assert gap.witness is not None
    given = dict(gap.witness.facts)
    assert given["soil"] == "mineral" and given["salinity"] < 18
