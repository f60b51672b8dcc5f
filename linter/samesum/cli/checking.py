"""Checking many rulebooks, one after another or side by side."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from samesum.judging.rulebooks_rules import RulesFor
    from samesum.judging.rules import Severity
    from samesum.outputs.checks import Checked
    from samesum.problems import Problem
    from samesum.reading.read import Reader


@dataclass(frozen=True, slots=True)
class Task:
    """What is asked of each file. ``fail_on`` is None when the file's own settings say it."""

    seconds: float
    rules: tuple[Path, ...]
    fail_on: Severity | None
    inputs: Path | None = None


@dataclass(frozen=True, slots=True)
class Outcome:
    """What became of one file. ``checked`` is None when problems kept it from being checked."""

    path: Path
    problems: tuple[Problem, ...]
    checked: Checked | None
    fails: bool
    fail_on: Severity


def check_all(paths: Sequence[Path], task: Task, jobs: int) -> list[Outcome]:
    """Every file checked, in the order given, by ``jobs`` processes. The answers do not depend on ``jobs``.

    Raises ``BrokenProcessPool`` when a process ended before its time.
    """
    if min(jobs, len(paths)) < 2:
        reader, chooser = _prepared(task.rules)
        return [check_one(path, task, reader, chooser) for path in paths]
    from concurrent.futures import ProcessPoolExecutor
    from multiprocessing import get_all_start_methods, get_context

    # a server process that has imported everything once and does nothing else is safe to fork from
    served = "forkserver" in get_all_start_methods()
    context = get_context("forkserver" if served else "spawn")
    if served:
        context.set_forkserver_preload(list(_PRELOADED))
    with ProcessPoolExecutor(min(jobs, len(paths)), mp_context=context) as pool:
        tasks = [pool.submit(_check_by_itself, path, task) for path in paths]
        return [each.result() for each in tasks]


_PRELOADED = (
    "samesum.cli.checking",
    "samesum.evidence.gather",
    "samesum.evidence.subjects.all_subjects",
    "samesum.judging.judge",
    "samesum.judging.rulebooks_rules",
    "samesum.outputs.checks",
    "samesum.reading.read",
    "lark",
    "pint",
    "yaml",
    "z3",
)


def _prepared(rules: tuple[Path, ...]) -> tuple[Reader, RulesFor]:
    """What reading and judging need."""
    from samesum.judging.rulebooks_rules import RulesFor
    from samesum.reading.read import default_cache_folder, make_reader

    reader = make_reader(default_cache_folder())
    return reader, RulesFor(reader, rules)


_prepared_once = lru_cache(maxsize=1)(_prepared)


def _check_by_itself(path: Path, task: Task) -> Outcome:
    """One file, in a process of the pool, which prepares once and ends with the check."""
    return check_one(path, task, *_prepared_once(task.rules))


def check_one(path: Path, task: Task, reader: Reader, chooser: RulesFor) -> Outcome:
    """One file checked, with what the review decided about it."""
    from samesum.examine import examine
    from samesum.outputs.checks import Checked
    from samesum.reviewing.places import fingerprints
    from samesum.reviewing.record import read_record, standings

    chosen = chooser.rulebook(path)
    limit = task.fail_on or chosen.fail_on or "warning"
    if chosen.problems:
        return Outcome(path, chosen.problems, None, False, limit)
    examined = examine(path, task.seconds, chosen.rules, reader, task.inputs)
    if examined.evidence is None or examined.judged is None:
        return Outcome(path, examined.problems, None, False, limit)
    record, problems = read_record(path)
    if problems:
        return Outcome(path, problems, None, False, limit)
    standing = {}
    if record.decisions:
        standing = standings(record, fingerprints(examined.evidence.graph, examined.reading.text))
    mistakes = len(examined.problems)
    checked = Checked.of(str(path), examined.evidence, examined.judged, chosen.rules, standing, mistakes)
    return Outcome(path, (), checked, checked.fails(limit), limit)
