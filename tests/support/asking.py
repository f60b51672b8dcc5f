"""From the text of a rulebook to its evidence, as a test needs it: in one call, and loud when the text is wrong."""

from __future__ import annotations

from collections.abc import Sequence
from functools import lru_cache
from pathlib import Path

from samesum.evidence.evidence import Evidence
from samesum.evidence.gather import gather
from samesum.evidence.routes.counting import Counts
from samesum.graph import build
from samesum.reading.model import Model
from samesum.reading.read import Reader, make_reader, read

SECONDS = 60.0
"""Far more than any of these takes, so that a busy machine changes no answer."""

SAMPLES = Path(__file__).parents[2] / "sample_rulebooks"

HEAD = 'rulebook "Test", draft "1"\n\nresult r [t], rounded down to 1, clause 1\n'


@lru_cache(maxsize=1)
def reader() -> Reader:
    """One reader for all tests of a process."""
    return make_reader()


def model_of(text: str) -> Model:
    """The model of a text that must have no problem."""
    found = read(text, "test.rulebook", reader=reader())
    assert not found.problems, [(problem.span.line, problem.says) for problem in found.problems]
    assert found.model is not None
    return found.model


def evidence_of(text: str, seconds: float = SECONDS) -> Evidence:
    """Everything that ``samesum count`` and ``samesum check`` know about a text."""
    return gather(build(model_of(text)), seconds)


def counts_of(text: str, seconds: float = SECONDS) -> Counts:
    """The figures of a text, which must be exact."""
    counts = evidence_of(text, seconds).counts
    assert counts.exact, counts.why_inexact
    return counts


def overlaps_of(evidence: Evidence) -> list[tuple[str, str, str]]:
    """(branch point, branch, branch) of every overlap."""
    return [(each.branch_point, *each.branches) for each in evidence.conditions.overlaps]


def gaps_of(evidence: Evidence) -> list[str]:
    return [each.branch_point for each in evidence.conditions.gaps]


def dead_of(evidence: Evidence) -> list[tuple[str, str]]:
    return [(each.branch_point, each.branch) for each in evidence.conditions.dead_branches]


# --- pieces of text ------------------------------------------------------------------------


def choice(name: str, options: Sequence[str], phrase: str = "by developer") -> str:
    """A quantity that is a free choice among ``options``."""
    lines = [f"quantity {name} [t], clause 2", f"    choice {phrase}"]
    for number, option in enumerate(options):
        lines += [f"        option {option}", f"            = {number + 1} [t]"]
    return "\n".join(lines) + "\n"


def cases(name: str, conditions: Sequence[str], words: str = "cases") -> str:
    """A quantity that is ``cases`` (or ``cases in order``); the condition ``otherwise`` may come last."""
    lines = [f"quantity {name} [t], clause 2", f"    {words}"]
    for number, condition in enumerate(conditions):
        lines += [f"        {'otherwise' if condition == 'otherwise' else f'when {condition}'}"]
        lines += [f"            = {number + 1} [t]"]
    return "\n".join(lines) + "\n"


def rulebook(*blocks: str, result: str = "0 [t]") -> str:
    """A whole rulebook: ``blocks`` and the result ``r``, given as a formula."""
    return "\n".join((HEAD, *blocks, f"quantity r [t], clause 3\n    = {result}\n"))
