"""What ``samesum bias`` costs grows no faster than the number of projects, and its memory not at all.

Processor time and memory of whole processes, compared in one run.
"""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

SAMPLE = Path(__file__).parents[2] / "sample_rulebooks" / "waste_heat.rulebook"


def measured(projects: int, cache: Path) -> tuple[float, int]:
    environment = {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path), "XDG_CACHE_HOME": str(cache)}
    words = [sys.executable, "-m", "samesum", "bias", str(SAMPLE), "--json", "--jobs", "1", "--projects", str(projects)]
    process = subprocess.Popen(words, stdout=subprocess.DEVNULL, env=environment)
    _, status, used = os.wait4(process.pid, 0)
    assert status == 0
    return used.ru_utime + used.ru_stime, used.ru_maxrss


def test_cost_grows_no_faster_than_projects_and_memory_not_at_all(tmp_path: Path) -> None:
    measured(1000, tmp_path)
    few, little = measured(65_536, tmp_path)
    many, much = measured(4 * 65_536, tmp_path)
    assert many <= 5 * few
    assert much <= 1.25 * little
