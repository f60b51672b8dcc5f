"""Sums over projects, and the over-issuance and standard error that follow from them."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

Array = npt.NDArray[Any]
# Slips of floating point are no over-crediting.
_SLIP = 1e-12


@dataclass(frozen=True, slots=True)
class Tally:
    """Over so many projects: true credits T, credits issued beyond them D, and how D differs from what a comparison
    row issues (X), each with the products that its standard error needs."""

    projects: int = 0
    outside: int = 0
    t: float = 0.0
    tt: float = 0.0
    d: float = 0.0
    dd: float = 0.0
    dt: float = 0.0
    x: float = 0.0
    xx: float = 0.0
    xt: float = 0.0
    over: int = 0

    def __add__(self, other: Tally) -> Tally:
        return Tally(*(getattr(self, name) + getattr(other, name) for name in self.__slots__))

    @property
    def over_issuance(self) -> float:
        """Issued over true, less 1, of all projects together; NaN when nothing true stands against it."""
        return self.d / self.t if self.t > 0 else math.nan

    @property
    def standard_error(self) -> float:
        """Of the over-issuance, a ratio of two sums (linearised: Cochran, Sampling Techniques, 1977, chapter 6,
        recalled)."""
        return _ratio_error(self.projects, self.d, self.dd, self.dt, self.t, self.tt)

    @property
    def difference(self) -> float:
        """Over-issuance beyond that of the comparison row, project by project with the same random numbers."""
        return self.x / self.t if self.t > 0 else math.nan

    @property
    def difference_error(self) -> float:
        return _ratio_error(self.projects, self.x, self.xx, self.xt, self.t, self.tt)

    @property
    def over_credited(self) -> float:
        """The share of projects that are issued more than is true."""
        return self.over / self.projects if self.projects else math.nan

    @property
    def share(self) -> float:
        """The share of projects that are in (for enrolment)."""
        everybody = self.projects + self.outside
        return self.projects / everybody if everybody else math.nan


def _ratio_error(n: int, d: float, dd: float, dt: float, t: float, tt: float) -> float:
    if n < 2 or t <= 0:
        return math.nan
    ratio = d / t
    squares = max(0.0, dd - 2 * ratio * dt + ratio * ratio * tt)
    if squares < 1e-12 * dd:
        return 0.0  # every project errs alike; what is left are slips of floating point
    return math.sqrt(squares * n / (n - 1)) / t


def truth_sums(truth: Array) -> tuple[float, float]:
    """The sums that every row of a block shares."""
    return float(np.sum(truth)), _dot(truth, truth)


def tally(
    issued: Array,
    truth: Array,
    comparison: Array | None = None,
    among: Array | None = None,
    sums: tuple[float, float] | None = None,
) -> Tally:
    """The sums of one block. Projects without a number of their own (no result in that world) are left out, as are
    those not ``among``. ``sums``: ``truth_sums``, where they are known already."""
    held = np.isfinite(issued)
    if comparison is not None:
        held &= np.isfinite(comparison)
    if among is not None:
        held &= among
    outside = 0
    if not held.all():
        sums = None
        outside = int(len(issued) - np.count_nonzero(held))
        issued, truth = issued[held], truth[held]
        comparison = comparison[held] if comparison is not None else None
    d = issued - truth
    x = issued - comparison if comparison is not None else np.zeros(0)
    t, tt = truth_sums(truth) if sums is None else sums
    return Tally(
        projects=len(issued),
        outside=outside,
        t=t,
        tt=tt,
        d=float(np.sum(d)),
        dd=_dot(d, d),
        dt=_dot(d, truth),
        x=float(np.sum(x)),
        xx=_dot(x, x),
        xt=_dot(x, truth) if comparison is not None else 0.0,
        over=int(np.count_nonzero(d > _SLIP * np.abs(truth))),
    )


def _dot(a: Array, b: Array) -> float:
    # Not np.dot: a sum whose order does not depend on how many threads a linear-algebra library takes.
    return float(np.sum(a * b))


# --- issued/true as a histogram ------------------------------------------------------------------

BINS = 40
WIDTH = 0.05


def histogram(issued: Array, truth: Array) -> Array:
    """How many projects have issued/true in each bin of 0.05 from 0 to 2; the first and last hold what lies beyond."""
    held = np.isfinite(issued) & (truth > 0)
    ratio = issued[held] / truth[held]
    # A project that is issued exactly what is true belongs to the bin that begins at 1.
    bins = np.clip(np.floor((ratio + 1e-9) / WIDTH), 0, BINS - 1).astype(np.int64)
    return np.bincount(bins, minlength=BINS)
