"""What trial and bias say, reduced to what the report draws. Plain values only."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class CaseSpread:
    """One case: lowest, reference and highest result, as numbers to draw and as texts to read. ``note`` says what
    keeps the case from having them."""

    name: str
    routes: str
    low: float | None
    reference: float | None
    high: float | None
    low_text: str
    reference_text: str
    high_text: str
    spread: float | None
    note: str = ""


@dataclass(frozen=True, slots=True)
class ClosingStep:
    """One step of closing: the place that is closed next, and the largest spread that is left then."""

    place: str
    left: float | None


@dataclass(frozen=True, slots=True)
class Histogram:
    """Shares of projects by issued/true: ``edges`` (one more than shares), when everybody is on one option
    (``mandated``) and when developers pick (``chosen``)."""

    edges: tuple[float, ...]
    mandated: tuple[float, ...]
    chosen: tuple[float, ...]
    mandated_mean: float
    chosen_mean: float
    mandated_name: str
    chosen_name: str
    says: str = ""
    note: str = ""


@dataclass(frozen=True, slots=True)
class Bar:
    """A rectangle of the histogram, in the units of its view box."""

    x: float
    y: float
    width: float
    height: float
    series: str
    says: str


@dataclass(frozen=True, slots=True)
class Marked:
    """Where a line or a label stands."""

    at: float
    text: str


WIDTH, HEIGHT = 720.0, 240.0


def bars(histogram: Histogram) -> tuple[Bar, ...]:
    """Two bars a bin, side by side."""
    most = max((*histogram.mandated, *histogram.chosen), default=0.0) or 1.0
    low, high = histogram.edges[0], histogram.edges[-1]
    found = []
    for number, (left, right) in enumerate(zip(histogram.edges, histogram.edges[1:], strict=False)):
        x = (left - low) / (high - low) * WIDTH
        width = (right - left) / (high - low) * WIDTH
        for place, (series, shares) in enumerate((("mandated", histogram.mandated), ("chosen", histogram.chosen))):
            height = shares[number] / most * (HEIGHT - 12)
            says = f"{left:.2f} to {right:.2f}: {shares[number] * 100:.1f} % of projects, {series}"
            found.append(Bar(x + width * (0.06 + 0.44 * place), HEIGHT - height, width * 0.44, height, series, says))
    return tuple(found)


def ticks(histogram: Histogram) -> tuple[Marked, ...]:
    """Round numbers along the axis."""
    low, high = histogram.edges[0], histogram.edges[-1]
    step = next((each for each in (0.1, 0.2, 0.25, 0.5, 1.0, 2.0, 5.0, 10.0) if (high - low) / each <= 10), high - low)
    found = []
    at = -(-low // step) * step
    while at <= high + 1e-9:
        found.append(Marked((at - low) / (high - low) * WIDTH, f"{at:.2f}".rstrip("0").rstrip(".")))
        at += step
    return tuple(found)


def across(histogram: Histogram, value: float) -> float:
    """Where a value of issued/true stands, kept inside."""
    low, high = histogram.edges[0], histogram.edges[-1]
    return min(max((value - low) / (high - low), 0.0), 1.0) * WIDTH


@dataclass(frozen=True, slots=True)
class SpreadBar:
    """A case with its bar: percentages of the track."""

    case: CaseSpread
    left: float
    width: float
    reference: float


def spread_bars(cases: Sequence[CaseSpread]) -> tuple[SpreadBar, ...]:
    """All cases on one scale: each result as a share of its case's reference."""
    ends: list[float] = [0.9, 1.1]
    for case in cases:
        if case.low is not None and case.high is not None and case.reference:
            ends += [case.low / case.reference, case.high / case.reference]
    low, high = min(ends), max(ends)
    found = []
    for case in cases:
        if case.low is None or case.high is None or not case.reference:
            found.append(SpreadBar(case, 0.0, 0.0, -1.0))
            continue
        sides = sorted((case.low / case.reference, case.high / case.reference))
        left = (sides[0] - low) / (high - low) * 100
        found.append(
            SpreadBar(case, left, max((sides[1] - sides[0]) / (high - low) * 100, 0.6), (1 - low) / (high - low) * 100)
        )
    return tuple(found)
