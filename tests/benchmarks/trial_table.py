"""100,000 projects from Parquet through the largest sample, as a whole process, for people and as JSON.

Run: python tests/benchmarks/trial_table.py [PROJECTS]
"""

from __future__ import annotations

import os
import resource
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np
import pyarrow as pa
import pyarrow.parquet as parquet

from samesum.reading import model as m
from samesum.reading.read import read_file

TOP = Path(__file__).parents[2]
SAMPLE = TOP / "sample_rulebooks" / "coastal_wetland.rulebook"


def projects(count: int, seed: int = 3) -> pa.Table:
    """Projects drawn evenly from the domains, with one to four strata. A canopy never below its start, and little
    displacement, so that most of them are inside the rulebook."""
    model = read_file(SAMPLE).model
    assert model is not None
    draw = np.random.default_rng(seed)
    sizes = {index.name: draw.integers(1, index.most + 1, count) for index in model.indices}
    columns: dict[str, pa.Array] = {"name": pa.array([f"project {number}" for number in range(count)])}
    for fact in model.facts:
        most = next((index.most for index in model.indices if index.name == fact.index), 1)
        for element in range(1, most + 1):
            if isinstance(fact.domain, m.OneOf):
                values = np.array(fact.domain.values, dtype=object)[draw.integers(0, len(fact.domain.values), count)]
            elif isinstance(fact.domain, m.YesNo):
                values = draw.integers(0, 2, count).astype(bool)
            else:
                assert fact.domain.low is not None and fact.domain.high is not None
                low, high = float(fact.domain.low), float(fact.domain.high)
                if fact.name in ("start_height", "displaced_share"):
                    high = low + (high - low) / 4
                if fact.name == "canopy_height":
                    low = low + (high - low) / 4
                values = np.round(low + (high - low) * draw.random(count), 3).clip(low, high)
            name = f"{fact.name}@{element}" if fact.index else fact.name
            missing = element > sizes[fact.index] if fact.index else np.zeros(count, dtype=bool)
            columns[name] = pa.array(values, mask=missing)
    return pa.table(columns)


def main() -> None:
    count = int(sys.argv[1]) if len(sys.argv) > 1 else 100_000
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "projects.parquet"
        parquet.write_table(projects(count), path)
        environment = {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)}
        for form in ([], ["--json"]):
            command = [sys.executable, "-m", "samesum", "trial", str(SAMPLE), "--inputs", str(path), *form]
            start = time.perf_counter()
            done = subprocess.run(command, stdout=subprocess.PIPE, env=environment, check=True)
            took = time.perf_counter() - start
            peak = resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss / 1024
            print(
                f"{count:,} projects, {'JSON' if form else 'text'}: {took:.1f} s (under 30 wanted), "
                f"peak {peak:.0f} MiB (under 2048), {len(done.stdout) / 1e6:.1f} MB written"
            )
            if not form:
                print(done.stdout.decode())


if __name__ == "__main__":
    main()
