"""How long ``samesum bias`` takes, and how that grows with the number of projects.

Run by hand: ``python tests/benchmarks/bias_projects.py`` prints the table of ``README.md``. Whole processes, on as many
cores as there are; processor time (user and system, children included) and the largest memory of any process.
"""

from __future__ import annotations

import os
import subprocess
import sys
import time
from pathlib import Path

SAMPLES = Path(__file__).parents[2] / "sample_rulebooks"
SIZES = (100_000, 300_000, 1_000_000, 3_000_000)


def measured(name: str, projects: int) -> tuple[float, float, float]:
    """Seconds on the clock, seconds of the processor, MiB."""
    words = [sys.executable, "-m", "samesum", "bias", str(SAMPLES / f"{name}.rulebook"), "--json"]
    start = time.monotonic()
    process = subprocess.Popen([*words, "--projects", str(projects)], stdout=subprocess.DEVNULL)
    _, status, used = os.wait4(process.pid, 0)
    assert status == 0
    return time.monotonic() - start, used.ru_utime + used.ru_stime, used.ru_maxrss / 1024


def main() -> None:
    print("| sample | projects | clock | processor | per project | memory of the largest process |")
    print("|---|---|---|---|---|---|")
    for name in ("waste_heat", "woodland", "coastal_wetland"):
        for projects in SIZES:
            clock, processor, memory = measured(name, projects)
            print(
                f"| {name} | {projects:,} | {clock:.1f} s | {processor:.1f} s | {1e6 * processor / projects:.1f} µs "
                f"| {memory:.0f} MiB |",
                flush=True,
            )


if __name__ == "__main__":
    main()
