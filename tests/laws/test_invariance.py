"""What must not matter does not: order, names, blank lines and comments, the hash seed.

The laws are ``architecture``'s: "declaring in another order, other names, blank lines and PYTHONHASHSEED change
nothing; closing a branch point never adds a route". They are tried on the samples and on rulebooks at random.
"""

from __future__ import annotations

import os
import random
import re
import subprocess
import sys
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, replace
from functools import cache
from pathlib import Path

import pytest

from brute.generate import rulebook as generated
from brute.rulebooks import And, Body, Cases, Choice, Condition, Follows, Not, Or, Rulebook, Takes
from brute.text import render
from samesum.evidence.evidence import Evidence
from samesum.evidence.routes.counting import Counts
from samesum.outputs.counts import count_json
from samesum.outputs.json_text import as_json
from samesum.reading import model as m
from samesum.reading import walk
from samesum.reading.blocks import blocks_of
from support.asking import SAMPLES, SECONDS, evidence_of, model_of

# every_fault has a unit mismatch on purpose, so that nothing can be counted exactly in it for good reason
SAMPLE_TEXTS = {
    path.stem: path.read_text("utf-8") for path in sorted(SAMPLES.glob("*.rulebook")) if path.stem != "every_fault"
}
SEEDS = range(3_000, 3_060)


@dataclass(frozen=True)
class Answer:
    """What a rulebook's evidence says, without the projects that show it."""

    figures: tuple[int, ...]
    exact: bool
    free: frozenset[str]
    overlaps: frozenset[tuple[str, frozenset[str]]]
    gaps: frozenset[str]
    dead: frozenset[tuple[str, str]]


def answer(evidence: Evidence, name: Callable[[str], str] = str) -> Answer:
    """The answer with ``name`` applied to every declared name in it."""
    counts, conditions = evidence.counts, evidence.conditions

    def id(text: str) -> str:
        return "/".join("@".join([name(part.split("@")[0]), *part.split("@")[1:]]) for part in text.split("/"))

    return Answer(
        figures(counts),
        counts.exact,
        frozenset(map(name, counts.free_values)),
        frozenset((id(each.branch_point), frozenset(map(name, each.branches))) for each in conditions.overlaps),
        frozenset(id(each.branch_point) for each in conditions.gaps),
        frozenset((id(each.branch_point), name(each.branch)) for each in conditions.dead_branches),
    )


def figures(counts: Counts) -> tuple[int, ...]:
    return (
        counts.on_paper,
        counts.reachable,
        counts.per_project_most,
        counts.per_project_least,
        counts.developer_most,
        counts.over_periods_most,
    )


@cache
def evidence_for(text: str) -> Evidence:
    found = evidence_of(text, SECONDS)
    assert found.counts.exact
    return found


def texts() -> Iterator[str]:
    yield from SAMPLE_TEXTS.values()
    yield from (render(generated(seed)) for seed in SEEDS)


def test_there_is_something_to_try() -> None:
    assert len(SAMPLE_TEXTS) >= 7
    answers = {answer(evidence_for(text)) for text in texts()}
    assert len(answers) > 30
    assert any(each.gaps for each in answers) and any(each.overlaps for each in answers)


# --- what does not matter --------------------------------------------------------------------


def shuffled(text: str, seed: int) -> str:
    """The blocks of a rulebook in another order; its title stays in front."""
    first, *rest = (block.text.strip("\n") for block in blocks_of(text))
    random.Random(seed).shuffle(rest)
    return "\n\n".join([first, *rest]) + "\n"


def test_declaring_in_another_order_changes_nothing() -> None:
    for text in texts():
        other = shuffled(text, 1)
        assert other != text
        assert answer(evidence_of(other)) == answer(evidence_for(text)), other


def loosened(text: str) -> str:
    """Blank lines and comments wherever they may stand."""
    lines = ["# before everything", ""]
    for line in text.splitlines():
        lines += [line + "   # said: `when x < 3`" if line.strip() and "#" not in line else line]
        lines += ["", "    # indented", ""] if line.startswith("    ") else ["# in column one", ""]
    return "\n".join(lines) + "\n\n\n"


def test_blank_lines_and_comments_change_no_byte() -> None:
    for text in texts():
        plain = as_json(count_json(evidence_for(text)))
        assert as_json(count_json(evidence_of(loosened(text)))) == plain, text


_SKIPPED = r'"[^"\n]*"|\[[^\]\n]*\]|#[^\n]*|clause\s+[^,\n]+|[0-9][\w.]*'


def renamed(text: str, names: Mapping[str, str]) -> str:
    """Every declared name exchanged, but for notes, sources, units, comments, clauses."""

    def new(found: re.Match[str]) -> str:
        return names.get(found[0], found[0])

    return re.sub(rf"{_SKIPPED}|[^\W\d]\w*", new, text)


def declared(model: m.Model) -> set[str]:
    """Every name that a writer made up."""
    kinds = (
        model.indices,
        model.facts,
        model.settings,
        model.judgements,
        model.constants,
        model.tables,
        model.quantities,
    )
    found = {each.name for kind in kinds for each in kind}
    for domain in [each.domain for each in (*model.facts, *model.settings)]:
        found |= set(domain.values) if isinstance(domain, m.OneOf) else set()
    for quantity in model.quantities:
        for body in walk.bodies(quantity.body):
            if isinstance(body, m.Choice | m.Follows):
                found |= {option.name for option in body.options}
    for table in model.tables:
        found |= {key.name for key in table.keys}
    return found


def exchanged(names: Mapping[str, str]) -> Callable[[str], str]:
    return lambda name: names.get(name, name)


def test_other_names_change_nothing_but_the_names() -> None:
    for text in texts():
        names = sorted(declared(model_of(text)))
        # the order of the alphabet is turned round, so that whatever sorts by name sorts otherwise
        new = {name: f"ß{len(names) - place}_{name[::-1]}" for place, name in enumerate(names)}
        other = renamed(text, new)
        back = {after: before for before, after in new.items()}
        found = answer(evidence_of(other), exchanged(back))
        assert found == answer(evidence_for(text)), other


def test_the_hash_seed_changes_no_byte(tmp_path: Path) -> None:
    files = [str(SAMPLES / f"{name}.rulebook") for name in SAMPLE_TEXTS]
    for seed in SEEDS[:12]:
        file = tmp_path / f"generated_{seed}.rulebook"
        file.write_text(render(generated(seed)), "utf-8")
        files.append(str(file))
    script = (
        "import sys; from samesum.cli.main import main\n"
        "for file in sys.argv[1:]: main(['count', file, '--json', '--seconds', '60'])\n"
        "main(['check', *sys.argv[1:], '--json', '--seconds', '60'])\n"
    )
    outputs = set()
    for hash_seed in ("0", "1", "4711"):
        environment = {**os.environ, "PYTHONHASHSEED": hash_seed}
        done = subprocess.run(
            [sys.executable, "-c", script, *files], env=environment, capture_output=True, check=True, timeout=300
        )
        assert done.stdout.count(b'"per_project_most"') >= len(files)
        outputs.add(done.stdout)
    assert len(outputs) == 1


# --- closing a branch point ------------------------------------------------------------------


def choices(made: Rulebook) -> list[tuple[str, tuple[str, ...], tuple[str, ...]]]:
    """Quantity, path and options of every choice."""
    found = []

    def look(quantity: str, body: Body, path: tuple[str, ...]) -> None:
        if isinstance(body, Choice):
            found.append((quantity, path, tuple(option.name for option in body.options)))
        if isinstance(body, Cases):
            for number, when in enumerate(body.branches, start=1):
                look(quantity, when.body, (*path, str(number)))
        if isinstance(body, Choice | Follows):
            for option in body.options:
                look(quantity, option.body, (*path, option.name))

    for quantity in made.quantities:
        look(quantity.name, quantity.body, ())
    return found


def closed(made: Rulebook, quantity: str, path: tuple[str, ...], option: str) -> Rulebook:
    """One choice left with one option; whoever follows it, or asks what it took, is told so."""
    own = not path

    def body(here: Body, name: str, at: tuple[str, ...]) -> Body:
        if isinstance(here, Cases):
            return replace(
                here,
                branches=tuple(
                    replace(when, body=body(when.body, name, (*at, str(number))),
                            condition=when.condition and condition(when.condition))
                    for number, when in enumerate(here.branches, start=1)
                ),
            )  # fmt: skip
        if isinstance(here, Choice | Follows):
            options = tuple(
                replace(each, body=body(each.body, name, (*at, each.name)),
                        only_when=each.only_when and condition(each.only_when))
                for each in here.options
            )  # fmt: skip
            this = isinstance(here, Choice) and name == quantity and at == path
            tied = isinstance(here, Follows) and own and here.quantity == quantity
            kept = tuple(each for each in options if each.name == option) if this or tied else options
            return replace(here, options=kept)
        return here

    def condition(here: Condition) -> Condition:
        if isinstance(here, And | Or):
            return replace(here, parts=tuple(map(condition, here.parts)))
        if isinstance(here, Not):
            return Not(condition(here.part))
        if own and isinstance(here, Takes) and here.quantity == quantity and here.option != option:
            return Not(Takes(quantity, option))
        return here

    return replace(
        made,
        quantities=tuple(replace(each, body=body(each.body, each.name, ())) for each in made.quantities),
        applies=tuple(map(condition, made.applies)),
    )


def chains(made: Rulebook, quantity: str) -> bool:
    """Whether somebody follows a follower of this quantity: closing it would need closing those as well."""
    followers = {
        each.name for each in made.quantities if isinstance(each.body, Follows) and each.body.quantity == quantity
    }
    return any(name in repr(made.quantities) and f"quantity='{name}'" in repr(made) for name in followers)


@pytest.mark.parametrize("first", range(3_000, 3_120, 20))
def test_closing_a_branch_point_never_adds_a_route(first: int) -> None:
    tried = fewer = 0
    for seed in range(first, first + 20):
        made = generated(seed)
        before = evidence_for(render(made)).counts
        for quantity, path, options in choices(made)[:3]:
            if len(options) < 2 or chains(made, quantity):
                continue
            tried += 1
            text = render(closed(made, quantity, path, options[seed % len(options)]))
            after = evidence_of(text).counts
            assert after.exact
            for name in ("on_paper", "reachable", "per_project_most", "developer_most", "over_periods_most"):
                assert getattr(after, name) <= getattr(before, name), (name, quantity, path, text)
            if not made.applies:  # else fewer projects may be left, and the fewest routes among those are more
                assert after.per_project_least <= before.per_project_least, (quantity, path, text)
            fewer += figures(after) != figures(before)
    assert tried > 5 and fewer > 2
