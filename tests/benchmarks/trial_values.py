"""2^16 routes × 100 projects: samesum against a loop over itertools.product and against numpy written by hand.

Run: python tests/benchmarks/trial_values.py
"""

from __future__ import annotations

import itertools
import random
import time

import numpy as np

from samesum.evidence.choosing.batches import batches_of
from samesum.evidence.trial.values import Evaluator
from samesum.reading.cases import Case
from samesum.reading.read import read
from samesum.spans import START

CHOICES, PROJECTS = 16, 100


def rulebook() -> str:
    """Sixteen two-way choices in four groups; each group is a sum of products, the groups are multiplied and added."""
    lines = ['rulebook "Sixteen choices", draft "1"', "", "result total"]
    lines += [f"fact x{number}, 1 to 100" for number in range(CHOICES)]
    for number in range(CHOICES):
        lines += [
            "",
            f"quantity q{number}",
            "    choice by developer",
            "        option plain",
            f"            = x{number} * 1.1 + 3",
            "        option other",
            f"            = x{number} * 0.9 + 5",
        ]
    for group in range(4):
        a, b, c, d = (f"q{4 * group + place}" for place in range(4))
        lines += ["", f"quantity g{group}", f"    = {a} * {b} + {c} * {d}"]
    lines += ["", "quantity total", "    = g0 * g1 + g2 * g3 + max(g0, g2) - min(g1, g3)"]
    return "\n".join(lines) + "\n"


def by_samesum(cases: list[dict[str, float]]) -> tuple[float, np.ndarray]:
    model = read(rulebook(), "bench").model
    assert model is not None
    from fractions import Fraction

    made = [Case("", {name: Fraction(value) for name, value in case.items()}, None, START) for case in cases]
    [batch] = batches_of(model, made)
    times = []
    for _ in range(5):
        start = time.perf_counter()
        table = Evaluator(batch.plan, batch.rows).number(batch.plan.root)
        times.append(time.perf_counter() - start)
    order = np.argsort(table.axes)
    return min(times), table.data.transpose(*order, len(order)).reshape(-1, PROJECTS)


def by_hand(cases: list[dict[str, float]]) -> tuple[float, np.ndarray]:
    x = [np.array([case[f"x{number}"] for case in cases]) for number in range(CHOICES)]

    def axis(array: np.ndarray, place: int) -> np.ndarray:
        return array.reshape(*(2 if place == number else 1 for number in range(CHOICES)), PROJECTS)

    times = []
    for _ in range(5):
        start = time.perf_counter()
        q = [axis(np.stack([x[k] * 1.1 + 3, x[k] * 0.9 + 5]), k) for k in range(CHOICES)]
        g = [q[4 * k] * q[4 * k + 1] + q[4 * k + 2] * q[4 * k + 3] for k in range(4)]
        total = g[0] * g[1] + g[2] * g[3] + np.maximum(g[0], g[2]) - np.minimum(g[1], g[3])
        times.append(time.perf_counter() - start)
    return min(times), total.reshape(-1, PROJECTS)


def by_loop(cases: list[dict[str, float]], some: int) -> tuple[float, list[list[float]]]:
    """Plain Python over all routes of the first projects; the time is scaled up to all of them."""
    start = time.perf_counter()
    found = []
    for case in cases[:some]:
        x = [case[f"x{k}"] for k in range(CHOICES)]
        results = []
        for route in itertools.product(("plain", "other"), repeat=CHOICES):
            q = [each * 1.1 + 3 if option == "plain" else each * 0.9 + 5 for each, option in zip(x, route, strict=True)]
            g = [q[4 * k] * q[4 * k + 1] + q[4 * k + 2] * q[4 * k + 3] for k in range(4)]
            results.append(g[0] * g[1] + g[2] * g[3] + max(g[0], g[2]) - min(g[1], g[3]))
        found.append(results)
    return (time.perf_counter() - start) * len(cases) / some, found


def main() -> None:
    draw = random.Random(1)
    cases = [{f"x{number}": float(draw.randrange(1, 100)) for number in range(CHOICES)} for _ in range(PROJECTS)]
    loop, plain = by_loop(cases, 5)
    hand, hand_values = by_hand(cases)
    ours, values = by_samesum(cases)
    for project, results in enumerate(plain):
        assert np.allclose(sorted(results), np.sort(values[:, project]), rtol=1e-9)
    assert np.allclose(np.sort(values, axis=0), np.sort(hand_values, axis=0), rtol=1e-9)
    print(f"2^{CHOICES} routes x {PROJECTS} projects")
    print(f"  itertools.product, plain Python   {loop:8.2f} s  (5 projects measured, scaled)")
    print(f"  numpy by hand                     {hand:8.4f} s")
    print(f"  samesum                           {ours:8.4f} s")
    print(f"  plain Python / samesum            {loop / ours:8.0f}   (at least 200 wanted)")
    print(f"  samesum / by hand                 {ours / hand:8.2f}   (at most 5 wanted)")


if __name__ == "__main__":
    main()
