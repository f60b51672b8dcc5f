"""What a place says is the same whatever the layout, and another as soon as anything in it changes."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest

from samesum.graph import build
from samesum.reading.read import read
from samesum.reviewing.places import Place, changes, fingerprints, places_of
from samesum.reviewing.places import Source as Text
from support.asking import reader

SAMPLES = Path(__file__).parents[2] / "sample_rulebooks"

TEXT = """\
rulebook "Two ways", draft "1"
result credits [t], rounded down to 1, clause 1
index stand, at most 3
fact area [ha] per stand, 1 to 1_000, clause 2
fact wet, yes or no, clause 2
setting margin, 5 % to 20 %, by developer, clause 3
judgement close, "close to the site", by verifier, clause 3
quantity stock [t] per stand, clause 4
    "By table or by plots."
    choice by developer, open each period
        option table_value, error 30 %, cost 0 [USD]
            = 2 [t/ha] * area
        option plots, error 8 %, cost 1_000 [USD], reference, only when close
            = 3 [t/ha] * area
quantity credits [t], clause 5
    cases
        when wet
            = sum(stock over stand) * (1 - margin)
        otherwise
            = 0 [t]
"""


def marks(text: str) -> dict[str, str]:
    found = read(text, "a.rulebook", reader=reader())
    assert found.model is not None and not found.problems
    return fingerprints(build(found.model), found.text)


def differing(text: str) -> set[str]:
    before, after = marks(TEXT), marks(text)
    return {id for id in before.keys() | after.keys() if before.get(id) != after.get(id)}


def test_every_place_is_there_once() -> None:
    ids = set(marks(TEXT))
    assert {"stock", "credits", "margin", "close", "area", "wet", "stand"} == ids


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ("    choice by developer, open each period", "    choice by developer, open each period  # as ever"),
        ("            = 3 [t/ha] * area", "            =   3 [t/ha]\n                * area"),
        ("error 30 %, cost 0 [USD]", "cost 0 [USD], error 30%"),
        ("1_000 [USD]", "1000 [USD]"),
        (", reference, only when close", ", only when close, reference"),
        ('    "By table or by plots."', '    "By table or"\n    "by plots."'),
        ("fact wet, yes or no, clause 2\n", "\n\n# a remark\nfact wet, yes or no, clause 2\n\n"),
        ("clause 4", "clause 4.1"),
    ],
    ids=lambda text: text.strip()[:24],
)
def test_layout_order_and_renumbering_change_nothing(old: str, new: str) -> None:
    assert TEXT.count(old) == 1
    assert differing(TEXT.replace(old, new)) == set()


def test_the_order_of_declarations_and_options_changes_nothing() -> None:
    head, *blocks = TEXT.split("\nquantity ")
    swapped = "\nquantity ".join([head, *reversed([block.rstrip("\n") for block in blocks])]) + "\n"
    assert differing(swapped) == set()
    first = "        option table_value, error 30 %, cost 0 [USD]\n            = 2 [t/ha] * area\n"
    assert TEXT.count(first) == 1
    without = TEXT.replace(first, "")
    last = "            = 3 [t/ha] * area\n"
    assert differing(without.replace(last, last + first)) == set()


@pytest.mark.parametrize(
    ("old", "new", "place"),
    [
        ("error 30 %", "error 31 %", "stock"),
        ("error 30 %", "error 30 %, bias 1 %", "stock"),
        ("= 2 [t/ha]", "= 2.1 [t/ha]", "stock"),
        ("by developer, open each period", "by verifier, open each period", "stock"),
        ("open each period", "fixed at validation", "stock"),
        (", only when close", "", "stock"),
        ("By table or by plots.", "By table or by field plots.", "stock"),
        ("option plots", "option field_plots", "stock"),
        ("        when wet", "        when not wet", "credits"),
        ("5 % to 20 %", "5 % to 25 %", "margin"),
        ("20 %, by developer", "20 %, by programme", "margin"),
        ('"close to the site"', '"near the site"', "close"),
        ("1 to 1_000", "1 to 2_000", "area"),
    ],
)
def test_every_change_of_substance_shows_at_its_place_alone(old: str, new: str, place: str) -> None:
    assert TEXT.count(old) == 1
    assert differing(TEXT.replace(old, new)) == {place}


def test_what_differs_is_named() -> None:
    def places(text: str) -> dict[str, Place]:
        found = read(text, "a.rulebook", reader=reader())
        assert found.model is not None
        return places_of(build(found.model), Text.of(found.text))

    before, after = places(TEXT), places(TEXT.replace("error 30 %", "error 31 %").replace("clause 4", "clause 4.1"))
    found = changes(before["stock"], after["stock"])
    assert [name for name, _, _ in found] == ["option table_value", "clause"]
    assert found[1][1:] == ("4", "4.1")


def test_no_two_places_of_the_samples_share_a_fingerprint_by_accident() -> None:
    found = marks((SAMPLES / "coastal_wetland.rulebook").read_text(encoding="utf-8"))
    branch_points = [mark for id, mark in found.items()]
    assert len(set(branch_points)) == len(branch_points)


def test_the_commas_that_are_for_people_are_no_part_of_what_was_decided() -> None:
    wide = TEXT.replace("setting margin, 5 % to 20 %", "setting margin [t], 1_000 to 25_000")
    text = wide.replace("(1 - margin)", "2")
    found = read(text, "a.rulebook", reader=reader())
    assert found.model is not None and not found.problems
    place = places_of(build(found.model), Text.of(found.text))["margin"]
    assert place.aspects["values"] == "1,000 to 25,000 t"
    bare = replace(place, aspects={**place.aspects, "values": "1000 to 25000 t"})
    other = replace(place, aspects={**place.aspects, "values": "1000 to 25001 t"})
    assert place.fingerprint == bare.fingerprint != other.fingerprint
