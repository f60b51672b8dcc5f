"""What `count` and `check` cost as whole processes, each as a ratio to something measured in the same run.

Run: python tests/benchmarks/whole_process.py [NAME ...]

Writes its rulebooks into a temporary folder, runs every command once to warm up and five times to measure,
and prints the table of README.md. The time is that of the processor (user and system); a busy machine bears
it better than the clock. What a rulebook must answer is checked, so that nothing is fast by being wrong.
"""

from __future__ import annotations

import json
import os
import random
import statistics
import subprocess
import sys
import tempfile
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

TOP = Path(__file__).parents[2]
SAMESUM = [sys.executable, "-m", "samesum"]
LARGEST = TOP / "sample_rulebooks" / "coastal_wetland.rulebook"
LIBRARIES = [sys.executable, "-c", "import lark, yaml, networkx, z3, oxidd, pint, rich"]
ARGPARSE = [sys.executable, "-c", "import argparse"]
RUNS = 5
HEAD = 'rulebook "Benchmark", draft "1"\nresult r [t], rounded down to 1, clause 1\n'


# --- rulebooks -----------------------------------------------------------------------------


def choice(name: str, options: str, phrase: str = "by developer", index: str = "") -> str:
    lines = [f"quantity {name} [t]{index}, clause 2", f"    choice {phrase}"]
    for number, option in enumerate(options):
        lines += [f"        option {option}", f"            = {number + 1} [t]"]
    return "\n".join(lines) + "\n"


def cases(name: str, conditions: list[str]) -> str:
    lines = [f"quantity {name} [t], clause 2", "    cases"]
    for number, condition in enumerate(conditions):
        lines += [f"        when {condition}", f"            = {number + 1} [t]"]
    return "\n".join(lines) + "\n"


def whole(*blocks: str, result: str) -> str:
    return "\n".join((HEAD, *blocks, f"quantity r [t], clause 3\n    = {result}\n"))


def facts(count: int) -> str:
    return "".join(f"fact f{number}, 0 to 100, clause 2\n" for number in range(count))


def added(names: list[str]) -> str:
    return " + ".join(names)


def ten_routes() -> str:
    return whole(choice("q", "abcde"), choice("w", "ab"), result="q + w")


def two_way() -> str:
    names = [f"q{number}" for number in range(200)]
    return whole(*(choice(name, "ab") for name in names), result=added(names))


def tied() -> str:
    blocks, names = [], []
    for number in range(50):
        blocks += [choice(f"q{number}", "abc"), choice(f"w{number}", "abc", f"follows q{number}")]
        names += [f"q{number}", f"w{number}"]
    return whole(*blocks, result=added(names))


def strata() -> str:
    return whole("index stratum, at most 12\n", choice("q", "ab", index=" per stratum"), result="sum(q over stratum)")


def many_cases() -> str:
    """100 branch points on one of ten facts each, with thresholds of their own, and 30 on two facts each, the ten facts
    in five pairs."""
    draw = random.Random(1)
    blocks, names = [facts(10)], []
    for number in range(100):
        fact = f"f{number % 10}"
        low, high = sorted(draw.sample(range(1, 100), 2))
        blocks.append(cases(f"q{number}", [f"{fact} < {low}", f"{low} <= {fact} <= {high}", f"{fact} > {high}"]))
        names.append(f"q{number}")
    for number in range(30):
        pair = number % 5
        a, b = f"f{2 * pair}", f"f{2 * pair + 1}"
        p, q, at = draw.randint(1, 5), draw.randint(1, 5), draw.randint(100, 500)
        blocks.append(cases(f"w{number}", [f"{p} * {a} + {q} * {b} < {at}", f"{p} * {a} + {q} * {b} >= {at}"]))
        names.append(f"w{number}")
    return whole(*blocks, result=added(names))


def hard() -> str:
    """Polynomial conditions over six facts each, every fact in most of them."""
    draw = random.Random(2)
    names = [f"q{number}" for number in range(20)]

    def side() -> str:
        pairs = [draw.sample(range(8), 2) for _ in range(6)]
        return " + ".join(f"{draw.randint(1, 9)} * f{a} * f{b}" for a, b in pairs)

    blocks = [cases(name, [f"{side()} < 30000", f"{side()} >= 30000", "f0 > 45 and f1 > 23"]) for name in names]
    return whole(facts(8), *blocks, result=added(names))


# --- measuring -----------------------------------------------------------------------------


@dataclass(frozen=True)
class Cost:
    """Medians of one command: processor seconds, seconds on the clock, the most memory (MiB), what it last printed."""

    processor: float
    clock: float
    memory: float
    output: bytes


def cost(command: list[str], environment: dict[str, str], runs: int = RUNS) -> Cost:
    import time

    processor, clock, memory, output = [], [], [], b""
    for number in range(runs + 1):
        start = time.monotonic()
        with subprocess.Popen(command, env=environment, stdout=subprocess.PIPE, stderr=subprocess.DEVNULL) as process:
            assert process.stdout is not None
            output = process.stdout.read()
            _, status, used = os.wait4(process.pid, 0)
            process.returncode = os.waitstatus_to_exitcode(status)
        assert process.returncode in (0, 1), command
        if number:  # the first run fills the caches
            clock.append(time.monotonic() - start)
            processor.append(used.ru_utime + used.ru_stime)
            memory.append(used.ru_maxrss / 1024)
    return Cost(statistics.median(processor), statistics.median(clock), max(memory), output)


def figures(found: Cost) -> dict[str, Any]:
    sys.set_int_max_str_digits(0)
    answer: dict[str, Any] = json.loads(found.output)["paths"]
    return answer


@dataclass(frozen=True)
class Line:
    """A row of the table: what is measured, against what, and what is promised."""

    name: str
    what: str
    found: Cost
    against: Cost | None
    promise: str
    kept: bool
    answers: str = ""


def counted(name: str, text: Callable[[], str], folder: Path, environment: dict[str, str], runs: int = RUNS) -> Cost:
    file = folder / f"{name}.rulebook"
    file.write_text(text(), "utf-8")
    return cost([*SAMESUM, "count", str(file), "--json"], environment, runs)


def lines(folder: Path, environment: dict[str, str], wanted: set[str]) -> list[Line]:
    """Every row asked for. Rulebooks whose time is a ratio are measured beside the one of ten routes."""
    found: list[Line] = []
    ten = counted("ten", ten_routes, folder, environment)
    assert figures(ten)["reachable"] == 10
    found.append(Line("ten", "`count`, ten routes", ten, None, "", True, "10"))
    for name, text, what, routes, shown in (
        ("two-way", two_way, "`count`, 200 two-way choices", 2**200, "2^200"),
        ("tied", tied, "`count`, 100 three-way choices tied in pairs", 3**50, "3^50"),
        ("strata", strata, "`count`, a choice of two in each of 12 strata", 2**12, "2^12"),
    ):
        if not wanted or name in wanted:
            here = counted(name, text, folder, environment)
            assert figures(here)["reachable"] == figures(here)["per_project_most"] == routes
            kept = here.processor <= 3 * ten.processor
            found.append(Line(name, what, here, ten, "at most 3 × ten routes", kept, shown))
    if not wanted or "many" in wanted:
        here = counted("many", many_cases, folder, environment, 1)
        paths = figures(here)
        kept = here.clock < 20 and here.memory < 1024 and paths["exact"]
        what = "`count`, 130 `cases` over ten facts"
        answer = f"{paths['reachable']:.3e} over all projects, {'exact' if paths['exact'] else 'not exact'}"
        found.append(Line("many", what, here, None, "under 20 s and 1 GiB, exact", kept, answer))
    if not wanted or "hard" in wanted:
        here = counted("hard", hard, folder, environment, 1)
        paths = figures(here)
        low, high = paths.get("at_least", paths)["reachable"], paths["reachable"]
        kept = here.clock < 15 and here.memory < 1024 and low <= high and not paths["exact"]
        what = "`count`, 20 `cases` of polynomials over six facts each"
        found.append(Line("hard", what, here, None, "10 s and little more, a bracket", kept, f"{low} to {high:.3e}"))
    if not wanted or "check" in wanted:
        libraries = cost(LIBRARIES, environment)
        here = cost([*SAMESUM, "check", str(LARGEST)], environment)
        kept = here.processor <= 2 * libraries.processor
        found.append(Line("libraries", "its libraries imported", libraries, None, "", True))
        found.append(
            Line("check", "`check`, the largest sample", here, libraries, "at most 2 × importing its libraries", kept)
        )
    if not wanted or "help" in wanted:
        bare = cost(ARGPARSE, environment)
        here = cost([*SAMESUM, "--help"], environment)
        kept = here.processor <= 1.3 * bare.processor + 0.05
        found.append(Line("argparse", "argparse imported", bare, None, "", True))
        found.append(Line("help", "`--help`", here, bare, "at most 1.3 × importing argparse + 0.05 s", kept))
    return found


def table(rows: list[Line]) -> str:
    """The rows as Markdown."""
    made = ["| what | answer | processor | clock | memory | ratio | promised |", "|---|---|---|---|---|---|---|"]
    for row in rows:
        ratio = "" if row.against is None else f"{row.found.processor / row.against.processor:.2f}"
        promise = row.promise and f"{row.promise}: {'kept' if row.kept else 'BROKEN'}"
        made.append(
            f"| {row.what} | {row.answers} | {row.found.processor:.2f} s | {row.found.clock:.2f} s "
            f"| {row.found.memory:.0f} MiB | {ratio} | {promise} |"
        )
    return "\n".join(made)


def main(words: list[str]) -> int:
    """Measures and prints; 1 when something promised is not kept."""
    with tempfile.TemporaryDirectory() as folder:
        environment = {
            **os.environ,
            "PYTHONPATH": os.pathsep.join([str(TOP / "linter"), os.environ.get("PYTHONPATH", "")]),
            "PYTHONPYCACHEPREFIX": str(Path(folder) / "compiled"),
            "XDG_CACHE_HOME": str(Path(folder) / "cache"),
        }
        environment.pop("PYTHONDONTWRITEBYTECODE", None)  # an installed package is compiled, and so are the libraries
        rows = lines(Path(folder), environment, set(words))
    print(table(rows))
    return 0 if all(row.kept for row in rows) else 1


if __name__ == "__main__":
    raise SystemExit(main(sys.argv[1:]))
