"""200 copies of the samples checked with one process and with two: wall time of each, and their ratio.

    python tests/benchmarks/many_files.py [--most RATIO]

Wall time says something only on a machine that does nothing else, so this is no test of the test run; with
``--most`` the exit status is 1 when no round out of three comes below that ratio and below a minute.
"""

from __future__ import annotations

import argparse
import os
import shutil
import subprocess
import sys
import tempfile
import time
from pathlib import Path

SAMPLES = Path(__file__).parents[2] / "sample_rulebooks"
COPIES = 200
LONGEST = 60.0


def seconds(files: list[str], jobs: int, folder: Path, environment: dict[str, str]) -> float:
    command = [sys.executable, "-m", "samesum", "check", *files, "--jobs", str(jobs), "--json"]
    start = time.monotonic()
    with (folder / f"{jobs}.json").open("wb") as out:
        done = subprocess.run(command, stdout=out, env=environment, cwd=folder, check=False)
    assert done.returncode == 1, done.returncode
    return time.monotonic() - start


def main() -> int:
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--most", type=float, metavar="RATIO")
    arguments = parser.parse_args()
    samples = sorted(SAMPLES.glob("*.rulebook"))
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        files = []
        for number in range(COPIES):
            sample = samples[number % len(samples)]
            files.append(f"{number:03d}_{sample.name}")
            shutil.copy(sample, folder / files[-1])
        environment = {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path), "XDG_CACHE_HOME": str(folder / "cache")}
        for _ in range(3):
            one = seconds(files, 1, folder, environment)
            two = seconds(files, 2, folder, environment)
            assert (folder / "1.json").read_bytes() == (folder / "2.json").read_bytes()
            times = f"{one:.1f} s with --jobs 1, {two:.1f} s with --jobs 2"
            print(f"{COPIES} files: {times}, ratio {two / one:.2f}", flush=True)
            if arguments.most is None or (two / one <= arguments.most and one <= LONGEST):
                return 0
    return 1


if __name__ == "__main__":
    sys.exit(main())
