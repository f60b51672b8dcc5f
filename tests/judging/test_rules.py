"""Rules as data: what is loaded, every mistake in them, severities, and three-valued conditions."""

from __future__ import annotations

from functools import cache
from pathlib import Path

import pytest

from samesum.evidence.subjects.kinds import CANNOT_TELL, KINDS, AttributeValue, Subject
from samesum.judging.asking import holds
from samesum.judging.findings import Finding, at_or_above, identity
from samesum.judging.judge import judge
from samesum.judging.rules import RuleSet, load_rules
from samesum.judging.settings import read_settings, settings_file_for, unknown_rules
from samesum.reading.read import Reader, make_reader
from samesum.reading.where import WhereMistake, parse_where
from samesum.shipped import shipped_folder
from samesum.spans import Span

GOOD = """name: {name}
severity: warning
looks_at: setting
where: free_value
says: The {{decider}} sets `{{name}}`.
why: It moves the number.
remedy: Write one number.
wrong_when: Never.
since: 1
"""


@cache
def reader() -> Reader:
    return make_reader(None)


def written(folder: Path, name: str, text: str | None = None) -> Path:
    (folder / name).mkdir(parents=True)
    (folder / name / "rule.yaml").write_text(text or GOOD.format(name=name), encoding="utf-8")
    return folder


def load(folder: Path) -> tuple[RuleSet, list[str]]:
    found, problems = load_rules([folder], reader())
    return found, [f"{problem.span.line}: {problem.says}; {problem.remedy}" for problem in problems]


def test_rules_come_in_sorted_order(tmp_path: Path) -> None:
    for name in ("b-rule", "a-rule"):
        written(tmp_path, name)
    (tmp_path / "rule_set.yaml").write_text("name: ours\nversion: 4\n")
    found, problems = load(tmp_path)
    assert not problems
    assert [rule.name for rule in found.rules] == ["a-rule", "b-rule"]
    assert found.version == "ours 4"


@pytest.mark.parametrize(
    ("change", "said"),
    [
        (("severity: warning", "severity: waring"), "2: `waring` is no severity; did you mean `warning`?"),
        (("looks_at: setting", "looks_at: settings"), "3: nothing is called `settings`; did you mean `setting`?"),
        (
            ("where: free_value", "where: free_vaule"),
            "4: there is no attribute `free_vaule`; did you mean `free_value`?",
        ),
        (("where: free_value", "where: decider is develper"), "4: `develper` is no value of `decider`; did you mean"),
        (("where: free_value", "where: free_value > 2"), "4: `free_value` cannot be asked like this"),
        (("where: free_value", "where: free_value and"), "4: "),
        (("{decider}", "{decidr}"), "5: there is no attribute `decidr`; did you mean `decider`?"),
        (("wrong_when:", "wrong_wen:"), "8: `wrong_wen` is no key here; did you mean `wrong_when`?"),
        (("since: 1\n", ""), "1: `since` is missing"),
        (("name: own-rule", "name: other-rule"), "1: the rule is called `other-rule` and its folder `own-rule`"),
        (("name: own-rule", "name: ABC123"), "1: `ABC123` is no name for a rule"),
        (("says: The", "says: [The"), "5: "),
    ],
)
def test_every_mistake_is_said_with_the_nearest_name(tmp_path: Path, change: tuple[str, str], said: str) -> None:
    text = GOOD.format(name="own-rule")
    assert change[0] in text
    found, problems = load(written(tmp_path, "own-rule", text.replace(*change)))
    assert found.rules == ()
    assert any(problem.startswith(said) for problem in problems), problems


def test_a_mistake_in_one_rule_hides_nothing_in_the_others(tmp_path: Path) -> None:
    written(tmp_path, "first", GOOD.format(name="first").replace("severity: warning", "severity: bad"))
    written(tmp_path, "second", GOOD.format(name="second").replace("since: 1", "sinc: 1"))
    written(tmp_path, "third")
    found, problems = load(tmp_path)
    assert [rule.name for rule in found.rules] == ["third"]
    assert len(problems) == 3  # one severity, one key unknown, one key missing


def test_the_same_name_twice_is_refused(tmp_path: Path) -> None:
    one, other = written(tmp_path / "one", "same"), written(tmp_path / "other", "same")
    _, problems = load_rules([one, other], reader())
    assert [problem.says for problem in problems] == [
        f"there is a rule `same` already, in {one / 'same' / 'rule.yaml'}"
    ]


def test_a_folder_without_rules_is_said(tmp_path: Path) -> None:
    assert "no rule in this folder" in load(tmp_path)[1][0]
    assert "no such folder" in load(tmp_path / "nowhere")[1][0]


def test_the_hash_changes_with_any_rule_and_severity(tmp_path: Path) -> None:
    written(tmp_path, "own-rule")
    first, _ = load(tmp_path)
    (tmp_path / "own-rule" / "rule.yaml").write_text(GOOD.format(name="own-rule").replace("one number", "a number"))
    second, _ = load(tmp_path)
    assert first.hash != second.hash
    assert second.hash != second.with_severities([("own-rule", "note")]).hash
    assert second.with_severities([("own-rule", "off")]).rules == ()
    assert second.with_severities([("own-rule", "error")]).rules[0].severity == "error"


# --- conditions -----------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("where", "answer"),
    [
        ("yes_one", True),
        ("not yes_one", False),
        ("open_one", CANNOT_TELL),
        ("not open_one", CANNOT_TELL),
        ("open_one and no_one", False),
        ("open_one and yes_one", CANNOT_TELL),
        ("open_one or yes_one", True),
        ("open_one or no_one", CANNOT_TELL),
        ("count >= 2", True),
        ("1 < count < 3", False),
        ("count = 3 and size > 5 %", True),
        ("open_number > 5", CANNOT_TELL),
        ("word is one of choice or tied", True),
        ("word is not choice", False),
        ("open_word is choice", CANNOT_TELL),
    ],
)
def test_three_values(where: str, answer: object) -> None:
    parsed = parse_where(where, reader())
    assert not isinstance(parsed, WhereMistake)
    attributes: dict[str, AttributeValue] = {
        "yes_one": True,
        "no_one": False,
        "open_one": CANNOT_TELL,
        "count": 3,
        "size": 1,
        "open_number": CANNOT_TELL,
        "word": "choice",
        "open_word": CANNOT_TELL,
    }
    assert holds(parsed, attributes) is answer


def subject(name: str, free: AttributeValue, line: int) -> Subject:
    attributes: dict[str, AttributeValue] = {attribute: "" for attribute in KINDS["setting"]}
    attributes |= {"name": name, "decider": "developer", "free_value": free}
    return Subject("setting", name, name, Span(line, 1, line, 5), "3", attributes)


def test_cannot_tell_is_an_outcome_of_its_own(tmp_path: Path) -> None:
    found, _ = load(written(tmp_path, "own-rule"))
    judged = judge("a.rulebook", [subject("x", True, 4), subject("y", CANNOT_TELL, 2), subject("z", False, 3)], found)
    assert [finding.says for finding in judged.findings] == ["The developer sets `x`."]
    assert [(doubt.rule, doubt.branch_point) for doubt in judged.doubts] == [("own-rule", "y")]


def test_an_id_stays_when_lines_move_and_is_unique(tmp_path: Path) -> None:
    found, _ = load(written(tmp_path, "own-rule"))
    before = judge("a.rulebook", [subject("x", True, 4), subject("x", True, 9)], found).findings
    after = judge("b.rulebook", [subject("x", True, 14), subject("x", True, 19)], found).findings
    assert [finding.id for finding in before] == [finding.id for finding in after]
    assert before[0].id != before[1].id
    assert identity("r", "b", "Some  Text") == identity("r", "b", "some text") != identity("r", "b", "other")


def test_findings_have_one_total_order(tmp_path: Path) -> None:
    found, _ = load(written(tmp_path, "own-rule"))
    subjects = [subject("x", True, 4), subject("y", True, 2), subject("z", True, 3)]
    judged = judge("a.rulebook", subjects, found)
    assert judged == judge("a.rulebook", reversed(subjects), found)
    assert list(judged.findings) == sorted(judged.findings, key=Finding.sort_key)


def test_severities_compare() -> None:
    assert at_or_above("error", "warning") and at_or_above("warning", "warning")
    assert not at_or_above("note", "warning")


# --- samesum.yaml ------------------------------------------------------------------------------


def test_settings_are_found_upwards_and_the_nearest_counts(tmp_path: Path) -> None:
    inner = tmp_path / "drafts" / "marsh"
    inner.mkdir(parents=True)
    (tmp_path / "samesum.yaml").write_text("fail_on: note\n")
    assert settings_file_for(inner / "a.rulebook") == tmp_path.resolve() / "samesum.yaml"
    (inner / "samesum.yaml").write_text("fail_on: error\n")
    assert settings_file_for(inner / "a.rulebook") == inner.resolve() / "samesum.yaml"


def test_settings_say_everything(tmp_path: Path) -> None:
    path = tmp_path / "samesum.yaml"
    path.write_text("rules: [own, shared]\nseverities:\n  free-value: off\n  own-rule: error\nfail_on: note\n")
    found, problems = read_settings(path)
    assert not problems
    assert found.rules == (tmp_path / "own", tmp_path / "shared")
    assert [(rule, level) for rule, level, _ in found.severities] == [("free-value", "off"), ("own-rule", "error")]
    assert found.fail_on == "note"


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("rule: [own]\n", "`rule` is no key here; did you mean `rules`?"),
        ("fail_on: warnings\n", "`warnings` is no severity; did you mean `warning`?"),
        ("fail_on: off\n", "`off` is no severity; it can be error, warning or note"),
        ("severities:\n  free-value: eror\n", "`eror` is no severity; did you mean `error`?"),
        ("severities: error\n", "a severity for each rule is expected here"),
        ("- rules\n", "this is no list of `name: value` lines"),
        ("rules: {a: b}\n", "a folder's name is expected here"),
    ],
)
def test_mistakes_in_settings(tmp_path: Path, text: str, said: str) -> None:
    path = tmp_path / "samesum.yaml"
    path.write_text(text)
    _, problems = read_settings(path)
    assert any(f"{problem.says}; {problem.remedy}".startswith(said) for problem in problems), problems


def test_a_rule_that_there_is_not(tmp_path: Path) -> None:
    path = tmp_path / "samesum.yaml"
    path.write_text("severities:\n  own-rul: note\n")
    settings, _ = read_settings(path)
    found, _ = load(written(tmp_path / "rules", "own-rule"))
    (problem,) = unknown_rules(settings, found.rules)
    assert (problem.span.line, problem.says, problem.remedy) == (
        2,
        "there is no rule `own-rul`",
        "did you mean `own-rule`?",
    )


def test_the_rule_on_over_issuance_says_whose_choices_it_counts() -> None:
    rules, problems = load_rules([shipped_folder("rules")], reader())
    assert not problems
    [rule] = [each for each in rules.rules if each.name == "over-issuance-above-limit"]
    assert "drawn from the declared domains" in rule.says  # also where projects are given
    assert "what the developer picks here" in rule.why and "only choices by the developer" in rule.wrong_when
