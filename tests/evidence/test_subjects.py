"""Subjects: every attribute that rules may ask is there, and nothing depends on the order of writing."""

from __future__ import annotations

from collections import Counter
from pathlib import Path

import pytest

from samesum.evidence.gather import gather
from samesum.evidence.subjects.all_subjects import subjects_of
from samesum.evidence.subjects.kinds import CANNOT_TELL, KINDS, Subject
from samesum.evidence.subjects.usage import undated_latest
from samesum.graph import build
from samesum.reading.read import read, read_file
from samesum.reading.words import RESERVED

SAMPLES = Path(__file__).parents[2] / "sample_rulebooks"


def subjects(path: Path) -> tuple[Subject, ...]:
    reading = read_file(path)
    assert reading.model is not None
    return subjects_of(gather(build(reading.model), 30), reading.problems, 30)


@pytest.mark.parametrize("path", sorted(SAMPLES.glob("*.rulebook")), ids=lambda path: path.stem)
def test_every_subject_has_the_attributes_of_its_kind_and_no_others(path: Path) -> None:
    found = subjects(path)
    for subject in found:
        kinds = KINDS[subject.kind]
        assert set(subject.attributes) == set(kinds), subject.kind
        for name, value in subject.attributes.items():
            kind = kinds[name]
            if value is CANNOT_TELL:
                continue
            if kind == "yes or no":
                assert isinstance(value, bool), (subject.kind, name)
            elif kind == "number":
                assert not isinstance(value, bool | str), (subject.kind, name)
            else:
                assert isinstance(value, str), (subject.kind, name)
                assert not kind or value in kind, (subject.kind, name, value)
    repeated = Counter((subject.kind, subject.branch_point, subject.key) for subject in found)
    assert max(repeated.values()) == 1, repeated.most_common(1)


NEED_PROJECTS = {"trial", "worked_example"}  # seen by ``tests/rules`` on the projects beside the bad sample


def test_every_kind_is_seen_in_the_bad_sample() -> None:
    found = {subject.kind for subject in subjects(SAMPLES / "every_fault.rulebook")}
    assert found == set(KINDS) - NEED_PROJECTS


def test_attributes_can_be_asked_by_name() -> None:
    """A word of the language cannot start a condition of a rule without being taken for something else."""
    names = {name for kinds in KINDS.values() for name in kinds}
    assert names.isdisjoint(RESERVED)


def test_the_order_of_declarations_changes_no_subject_but_its_place() -> None:
    text = (SAMPLES / "every_fault.rulebook").read_text(encoding="utf-8")
    head, *blocks = [block for block in text.split("\n\n") if block.strip()]
    both = []
    for ordered in (blocks, list(reversed(blocks))):
        reading = read("\n\n".join([head, *ordered]) + "\n", "every_fault.rulebook")
        assert reading.model is not None
        found = subjects_of(gather(build(reading.model), 30), reading.problems, 30)
        both.append({(each.kind, each.branch_point, each.key, tuple(sorted(each.attributes))) for each in found})
    same_but_for_pairs = [{each for each in found if each[0] != "untied_choices"} for found in both]
    assert same_but_for_pairs[0] == same_but_for_pairs[1]


def test_a_gap_names_the_table_that_lacks_the_row() -> None:
    reading = read(
        """rulebook "Rows", draft "1"
result credits [t CO2e], rounded down to 1
fact soil, one of sand or clay
fact slope, 0 % to 50 %
table stock [t CO2e] by soil
    sand = 40
    clay = 65
table factor by steepness
    up to 10 % = 1
    above 20 % = 0.7
quantity credits [t CO2e]
    = stock(soil) * factor(slope)
""",
        "rows.rulebook",
    )
    assert reading.model is not None and not reading.problems
    (gap,) = [each for each in subjects_of(gather(build(reading.model))) if each.kind == "gap"]
    assert gap.attributes["tables"] == "`factor`"


@pytest.mark.parametrize(
    ("low", "high", "says"),
    [
        (", error 20 %", ", error 10 %, cost 0", "no cost"),
        (", cost 0", ", error 10 %, cost 5 [USD]", "no error"),
        ("", ", error 10 %, cost 5 [USD]", "neither an error nor a cost"),
        (", error 20 %", ", error 10 %", ""),
    ],
)
def test_an_option_says_which_figure_it_lacks(low: str, high: str, says: str) -> None:
    reading = read(
        f"""rulebook "Figures", draft "1"
result credits [t CO2e], rounded down to 1
quantity credits [t CO2e]
    choice by developer
        option low{low}
            = 2 [t CO2e]
        option high{high}
            = 3 [t CO2e]
""",
        "figures.rulebook",
    )
    assert reading.model is not None and not reading.problems
    found = {each.key: each.attributes for each in subjects_of(gather(build(reading.model))) if each.kind == "branch"}
    assert (found["low"]["lacking"], found["high"]["lacking"]) == (says, "")


@pytest.mark.parametrize(
    ("source", "answer"),
    [
        ("latest IPCC assessment report", True),
        ("the most recent national inventory", True),
        ("current edition of Annex B", True),
        ("up-to-date register of grid factors", True),
        ("IPCC Fifth Assessment Report, 2013, the latest at the time", False),
        ("2006 IPCC Guidelines, Volume 4, Table 4.3", False),
        ("Ocean currents atlas", False),
        ("", False),
    ],
)
def test_undated_latest(source: str, answer: bool) -> None:
    assert undated_latest(source) is answer
