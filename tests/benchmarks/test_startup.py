"""What a command costs before it does anything, against what its libraries cost in the same run.

Times are of the processor (user and system) of the whole process, medians; they bear a busy machine better
than the clock does.
"""

from __future__ import annotations

import os
import statistics
import subprocess
import sys
from pathlib import Path

import pytest

SAMPLES = Path(__file__).parents[2] / "sample_rulebooks"
SAMESUM = [sys.executable, "-m", "samesum"]


@pytest.fixture(scope="module")
def environment(tmp_path_factory: pytest.TempPathFactory) -> dict[str, str]:
    cache = tmp_path_factory.mktemp("cache")
    found = {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path), "XDG_CACHE_HOME": str(cache)}
    # compiled once, as an installed package is; the libraries are
    found.pop("PYTHONDONTWRITEBYTECODE", None)
    return {**found, "PYTHONPYCACHEPREFIX": str(cache / "compiled")}


def processor_seconds(command: list[str], environment: dict[str, str], runs: int = 5) -> float:
    found = []
    for number in range(runs + 1):
        quiet = subprocess.DEVNULL
        process = subprocess.Popen(command, env=environment, stdout=quiet, stderr=quiet)
        _, _, used = os.wait4(process.pid, 0)
        if number:  # the first run fills the caches
            found.append(used.ru_utime + used.ru_stime)
    return statistics.median(found)


def test_help_is_hardly_more_than_argparse(environment: dict[str, str]) -> None:
    bare = processor_seconds([sys.executable, "-c", "import argparse"], environment)
    assert processor_seconds([*SAMESUM, "--help"], environment) <= 1.3 * bare + 0.05


def test_check_of_the_largest_sample_is_at_most_twice_its_libraries(environment: dict[str, str]) -> None:
    code = "import lark, yaml, networkx, z3, oxidd, pint, rich"
    libraries = processor_seconds([sys.executable, "-c", code], environment)
    largest = str(SAMPLES / "coastal_wetland.rulebook")
    assert processor_seconds([*SAMESUM, "check", largest], environment) <= 2 * libraries
