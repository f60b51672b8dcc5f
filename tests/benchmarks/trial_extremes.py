"""2^60 routes × 1,000 projects: exact extremes with their routes, against extremes known in closed form.

Run: python tests/benchmarks/trial_extremes.py
"""

from __future__ import annotations

import random
import resource
import time
from fractions import Fraction

import numpy as np

from samesum.evidence.choosing.batches import batches_of
from samesum.evidence.trial.figures import figures_of
from samesum.reading.cases import Case
from samesum.reading.read import read
from samesum.spans import START

GROUPS, EACH, PROJECTS = 12, 5, 1_000


def rulebook() -> str:
    """Sixty independent two-way choices in twelve groups: a product with positive terms, a sum, a minimum, a
    maximum and a difference in each."""
    lines = ['rulebook "Sixty choices", draft "1"', "", "result total"]
    lines += [f"fact x{number}, 1 to 100" for number in range(GROUPS * EACH)]
    for number in range(GROUPS * EACH):
        lines += [
            "",
            f"quantity q{number}",
            "    choice by developer",
            "        option plain",
            f"            = x{number} * 1.1 + 3",
            "        option other",
            f"            = x{number} * 0.9 + 5",
        ]
    for group in range(GROUPS):
        a, b, c, d, e = (f"q{EACH * group + place}" for place in range(EACH))
        lines += ["", f"quantity g{group}", f"    = {a} * {b} + max({c}, {d}) - {e}"]
    total = " + ".join(f"g{group}" for group in range(GROUPS - 2))
    lines += ["", "quantity total", f"    = {total} + min(g{GROUPS - 2}, g{GROUPS - 1})"]
    return "\n".join(lines) + "\n"


def known(x: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """The extremes in closed form: every part is monotone in what it uses."""
    one, two = x * 1.1 + 3, x * 0.9 + 5
    low, high = np.minimum(one, two), np.maximum(one, two)

    def total(a: np.ndarray, b: np.ndarray) -> np.ndarray:
        g = [
            a[EACH * k] * a[EACH * k + 1] + np.maximum(a[EACH * k + 2], a[EACH * k + 3]) - b[EACH * k + 4]
            for k in range(GROUPS)
        ]
        return sum(g[: GROUPS - 2]) + np.minimum(g[GROUPS - 2], g[GROUPS - 1])

    return total(low, high), total(high, low)


def main() -> None:
    draw = random.Random(2)
    x = np.array([[draw.randrange(1, 100) for _ in range(PROJECTS)] for _ in range(GROUPS * EACH)], dtype=float)
    model = read(rulebook(), "bench").model
    assert model is not None
    cases = [
        Case("", {f"x{k}": Fraction(int(x[k, row])) for k in range(GROUPS * EACH)}, None, START)
        for row in range(PROJECTS)
    ]
    start = time.perf_counter()
    [batch] = batches_of(model, cases)
    figures = figures_of(batch, time.monotonic() + 60)
    took = time.perf_counter() - start
    low, high = known(x)
    assert figures.complete.all()
    assert set(figures.routes.tolist()) == {2 ** (GROUPS * EACH)}
    assert np.allclose(figures.lowest.value, low, rtol=1e-12)
    assert np.allclose(figures.highest.value, high, rtol=1e-12)
    assert len(figures.lowest.route) == GROUPS * EACH
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    print(f"2^{GROUPS * EACH} routes x {PROJECTS} projects: {took:.2f} s (under 10 wanted)")
    print(f"peak {peak:.0f} MiB (under 1024 wanted)")


if __name__ == "__main__":
    main()
