"""What choosing does to an average, where a formula gives it exactly.

Everything is relative to a truth of 1: an option's estimate is 1 + e with e normal, mean ``bias``, standard
deviation ``error``; a cost is in units of true credits; an over-issuance of 0.12 is 12 % too many. Plain
``math`` and Gauss–Legendre quadrature, no randomness.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import lru_cache
from itertools import pairwise

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]

# Beyond this many standard deviations a normal's tail is below 1e-33: nothing is left to integrate.
_TAIL = 12.0
# Above this the errors are nearly one and the same, and what is integrated over their shared part has corners
# that quadrature resolves only slowly.
_SHARED_MOST = 0.95


@dataclass(frozen=True, slots=True)
class Noise:
    """How an option errs: mean relative error, relative standard error (0 or more), cost in true credits."""

    bias: float
    error: float
    cost: float = 0.0


@dataclass(frozen=True, slots=True)
class Outcome:
    """``over_issuance`` (issued/true − 1) and, where it is asked for, the ``share`` it comes from."""

    over_issuance: float
    share: float


# --- the standard normal -----------------------------------------------------------------------


def density(x: float) -> float:
    """φ(x), the standard normal density."""
    return math.exp(-0.5 * x * x) / math.sqrt(2.0 * math.pi)


def below(x: float) -> float:
    """Φ(x), the share of a standard normal below x; accurate in the lower tail (by ``erfc``)."""
    return 0.5 * math.erfc(-x / math.sqrt(2.0))


def hazard(x: float) -> float:
    """λ(x) = φ(x) / (1 − Φ(x)), the mean of a standard normal above x (inverse Mills ratio)."""
    if x > 25.0:
        # 1 − Φ leaves the range of floating point; the continued fraction of Laplace takes over.
        value = x
        for step in range(60, 0, -1):
            value = x + step / value
        return value
    return density(x) / below(-x)


@lru_cache(maxsize=8)
def _nodes(count: int) -> tuple[Floats, Floats]:
    points, weights = np.polynomial.legendre.leggauss(count)
    return points, weights


def _grid(breaks: Sequence[float], count: int = 48) -> tuple[Floats, Floats]:
    """Gauss–Legendre points and weights over the panels between ``breaks``."""
    points, weights = _nodes(count)
    edges = sorted(set(breaks))
    xs = [0.5 * (b - a) * points + 0.5 * (b + a) for a, b in pairwise(edges)]
    ws = [0.5 * (b - a) * weights for a, b in pairwise(edges)]
    return np.concatenate(xs), np.concatenate(ws)


_erfc: Callable[[Floats], Floats] = np.frompyfunc(math.erfc, 1, 1)


def below_all(x: Floats) -> Floats:
    """Φ of every element."""
    return np.asarray(0.5 * np.asarray(_erfc(-x / math.sqrt(2.0)), dtype=np.float64), dtype=np.float64)


def density_all(x: Floats) -> Floats:
    """φ of every element."""
    return np.asarray(np.exp(-0.5 * x * x) / math.sqrt(2.0 * math.pi), dtype=np.float64)


# --- the largest of several --------------------------------------------------------------------


@lru_cache(maxsize=256)
def expected_maximum(n: int) -> float:
    """Mean of the largest of n independent standard normals: ∫ n x φ(x) Φ(x)^(n−1) dx.

    Teichroew 1956, Annals of Mathematical Statistics 27:410; Harter 1961, Biometrika 48:151. Raises
    ValueError when n < 1.
    """
    if n < 1:
        raise ValueError("the largest of no values is not defined")
    xs, ws = _grid([-_TAIL, -6.0, -3.0, 0.0, 3.0, 6.0, _TAIL])
    return float(np.sum(ws * n * xs * density_all(xs) * below_all(xs) ** (n - 1)))


def largest_of_equals(n: int, error: float, correlation: float = 0.0) -> float:
    """Over-issuance of picking freely among n equally noisy unbiased options: s √(1−ρ) E[max of n].

    With one common correlation the shared part of the errors cancels out of the comparison (Teichroew
    1956 for the rest). Raises ValueError for a correlation that n errors cannot have in common.
    """
    check_correlation(n, correlation)
    return error * math.sqrt(1.0 - correlation) * expected_maximum(n)


def check_correlation(n: int, correlation: float) -> None:
    """Raises ValueError unless n errors can all have this correlation with each other: −1/(n−1) to 1."""
    lowest = -1.0 / (n - 1) if n > 1 else -1.0
    if not lowest - 1e-12 <= correlation <= 1.0:
        raise ValueError(
            f"{n} errors cannot all be correlated by {correlation:g}: it must be between {lowest:.6g} and 1"
        )


def larger_of_two(m1: float, s1: float, m2: float, s2: float, correlation: float) -> tuple[float, float]:
    """Mean and variance of the larger of two correlated normals.

    Clark 1961, Operations Research 9:145: a² = s1²+s2²−2ρ s1 s2, α = (m1−m2)/a,
    E[max] = m1 Φ(α) + m2 Φ(−α) + a φ(α); E[max²] likewise with m²+s² and (m1+m2) a φ(α).
    """
    a = _difference(s1, s2, correlation)
    if a == 0.0:
        return (m1, s1 * s1) if m1 >= m2 else (m2, s2 * s2)
    alpha = (m1 - m2) / a
    up, down, at = below(alpha), below(-alpha), density(alpha)
    mean = m1 * up + m2 * down + a * at
    square = (m1 * m1 + s1 * s1) * up + (m2 * m2 + s2 * s2) * down + (m1 + m2) * a * at
    return mean, square - mean * mean


def _difference(s1: float, s2: float, correlation: float) -> float:
    """Standard deviation of the difference of two correlated errors."""
    return math.sqrt(max(0.0, s1 * s1 + s2 * s2 - 2.0 * correlation * s1 * s2))


# --- behaviours --------------------------------------------------------------------------------


def half_normal(error: float) -> float:
    """Over-issuance of a second look that is free, exact and unbiased: s/√(2π), half the mean of a half-normal."""
    return error / math.sqrt(2.0 * math.pi)


def pick_of_two(default: Noise, measured: Noise, correlation: float = 0.0) -> Outcome:
    """Works out both options, keeps the one that is worth more after its cost.

    δ = b_m−b_d, θ² = s_d²+s_m²−2ρ s_d s_m, c = c_m−c_d: OI = b_d + δ Φ((δ−c)/θ) + θ φ((δ−c)/θ), after Clark
    1961. ``share``: of projects that keep the measured one.
    """
    gain = measured.bias - default.bias
    cost = measured.cost - default.cost
    theta = _difference(default.error, measured.error, correlation)
    if theta == 0.0:
        return Outcome(default.bias + max(gain, 0.0), 1.0) if gain > cost else Outcome(default.bias, 0.0)
    at = (gain - cost) / theta
    return Outcome(default.bias + gain * below(at) + theta * density(at), below(at))


def second_look(default: Noise, measured: Noise, correlation: float = 0.0) -> Outcome:
    """Knows the truth and the default; pays for the measured value when the default falls short by more than it costs.

    t = (−c−b_d)/s_d: OI = b_d Φ(−t) + b_m Φ(t) + (s_d − ρ s_m) φ(t), the mean of a normal cut off at t and what
    regression on it leaves for the other. ``share``: of projects that switch, Φ(t).
    """
    short = -measured.cost - default.bias
    if default.error == 0.0:
        return Outcome(measured.bias, 1.0) if short > 0.0 else Outcome(default.bias, 0.0)
    t = short / default.error
    mean = (
        default.bias * below(-t)
        + measured.bias * below(t)
        + (default.error - correlation * measured.error) * density(t)
    )
    return Outcome(mean, below(t))


def pick_of_two_each(default: Noise, measured: Noise, correlation: float, cost: Floats) -> Floats:
    """``pick_of_two``'s over-issuance for each of many costs of the measured option over the default."""
    gain = measured.bias - default.bias
    theta = _difference(default.error, measured.error, correlation)
    if theta == 0.0:
        return np.where(gain > cost, measured.bias, default.bias)
    at = (gain - cost) / theta
    return default.bias + gain * below_all(at) + theta * density_all(at)


def second_look_each(default: Noise, measured: Noise, correlation: float, cost: Floats) -> Floats:
    """``second_look``'s over-issuance for each of many costs of the measured option."""
    short = -cost - default.bias
    if default.error == 0.0:
        return np.where(short > 0.0, measured.bias, default.bias)
    t = short / default.error
    left = (default.error - correlation * measured.error) * density_all(t)
    return default.bias * below_all(-t) + measured.bias * below_all(t) + left


def looks_in_order(options: Sequence[Noise], correlation: float = 0.0) -> float:
    """Over-issuance of a second look, a third, … through options in order of cost, keeping the last one tried.

    Two options: ``second_look``. More of them, independent: the sum over k of Π_{j<k} Φ(t_j) times the mean of what
    is kept at k, with t_k = (−c_{k+1}−b_k)/s_k; with a common correlation above 0 the same given the part that all
    errors share, which is then integrated out. Raises ValueError for three or more options correlated below 0.
    """
    if not options:
        raise ValueError("no option to look at")
    if len(options) == 2:
        return second_look(options[0], options[1], correlation).over_issuance
    check_correlation(len(options), correlation)
    if correlation < 0.0:
        raise ValueError("no closed form for three or more options whose errors are correlated below 0")
    return _given_shared(tuple(options), correlation, _looks)


def _looks(means: Sequence[float], errors: Sequence[float], costs: Sequence[float]) -> float:
    total, reached = 0.0, 1.0
    last = len(means) - 1
    for k, (mean, error) in enumerate(zip(means, errors, strict=True)):
        if k == last:
            return total + reached * mean
        short = -costs[k + 1] - mean
        if error == 0.0:
            if short <= 0.0:
                return total + reached * mean
            continue
        t = short / error
        total += reached * (mean * below(-t) + error * density(t))
        reached *= below(t)
    return total


def pick_of_all(options: Sequence[Noise], correlation: float = 0.0) -> float:
    """Over-issuance of working out all options and keeping the one that is worth most after its cost.

    Equal options without cost: ``largest_of_equals``. Two: ``pick_of_two``. Else Σ_i ∫ x f_i(x) Π_{j≠i}
    F_j(x−c_i+c_j) dx, given the shared part of the errors, by quadrature. Raises ValueError where that needs a
    correlation below 0 among three or more.
    """
    if not options:
        raise ValueError("no option to pick from")
    first = options[0]
    if all(option == first for option in options):
        return first.bias + largest_of_equals(len(options), first.error, correlation)
    if len(options) == 2:
        return pick_of_two(options[0], options[1], correlation).over_issuance
    check_correlation(len(options), correlation)
    if correlation < 0.0:
        raise ValueError("no closed form for three or more unequal options whose errors are correlated below 0")
    return _given_shared(tuple(options), correlation, _picked)


def _picked(means: Sequence[float], errors: Sequence[float], costs: Sequence[float]) -> float:
    """Mean of the value with the largest value − cost, all independent."""
    worth = [mean - cost for mean, cost in zip(means, costs, strict=True)]
    still = [k for k, error in enumerate(errors) if error == 0.0]
    moving = [k for k, error in enumerate(errors) if error > 0.0]
    floor = max((worth[k] for k in still), default=-math.inf)
    total = 0.0
    if still:
        kept = max(still, key=lambda k: worth[k])
        total += means[kept] * math.prod(below((floor - worth[k]) / errors[k]) for k in moving)
    for k in moving:
        # Panels break wherever one of the distribution functions bends, so that every panel is smooth.
        low, high = worth[k] - _TAIL * errors[k], worth[k] + _TAIL * errors[k]
        start = max(low, floor)
        if start >= high:
            continue
        steps = [worth[j] + step * errors[j] for j in moving for step in (-6.0, -3.0, -1.0, 0.0, 1.0, 3.0, 6.0)]
        xs, ws = _grid([start, high, *(x for x in steps if start < x < high)])
        weight = density_all((xs - worth[k]) / errors[k]) / errors[k]
        for j in moving:
            if j != k:
                weight = weight * below_all((xs - worth[j]) / errors[j])
        total += float(np.sum(ws * (xs + costs[k]) * weight))
    return total


Given = Callable[[Sequence[float], Sequence[float], Sequence[float]], float]


@lru_cache(maxsize=512)
def _given_shared(options: tuple[Noise, ...], correlation: float, given: Given) -> float:
    """The mean of ``given`` over the part of the errors that all share (e_i = b_i + s_i(√ρ z + √(1−ρ) x_i))."""
    costs = [option.cost for option in options]
    if correlation > _SHARED_MOST:
        raise ValueError(f"no closed form for three or more options whose errors are correlated above {_SHARED_MOST:g}")
    if correlation == 0.0:
        return given([option.bias for option in options], [option.error for option in options], costs)
    shared, own = math.sqrt(correlation), math.sqrt(1.0 - correlation)
    errors = [option.error * own for option in options]
    zs, ws = _grid([-9.0, -6.0, -4.0, -2.0, 0.0, 2.0, 4.0, 6.0, 9.0], 24)
    total = 0.0
    for z, w in zip(zs, ws, strict=True):
        means = [option.bias + option.error * shared * float(z) for option in options]
        total += float(w) * density(float(z)) * given(means, errors, costs)
    return total


def lowest_of_all(options: Sequence[Noise], correlation: float = 0.0) -> float:
    """Over-issuance when the rule itself takes the lowest of all options: ``pick_of_all`` in a mirror, no costs."""
    return -pick_of_all([Noise(-option.bias, option.error) for option in options], correlation)


def indifferent(options: Sequence[Noise]) -> float:
    """Over-issuance when any option is taken with equal chance: the mean of the biases."""
    return sum(option.bias for option in options) / len(options)


# --- enrolment ---------------------------------------------------------------------------------


def enrolment_by_estimate(error: float, k: float, bias: float = 0.0) -> Outcome:
    """Projects join when what they are credited exceeds k × the truth; the credited amount errs around the truth.

    OI = s λ((k−1)/s) with λ the hazard of a standard normal; ``share`` that joins 1−Φ((k−1)/s). With a bias b, what
    is credited lies around 1+b: b + s λ((k−1−b)/s).
    """
    if error == 0.0:
        return Outcome(bias, 1.0 if k < 1.0 + bias else 0.0)
    c = (k - 1.0 - bias) / error
    return Outcome(bias + error * hazard(c), below(-c))


def enrolment_by_truth(error: float, k: float, bias: float = 0.0) -> Outcome:
    """Projects join when a fixed regional average exceeds k × their truth; the truth scatters around the average.

    q = (1/k−1)/s: OI = 1/(1 − s φ(q)/Φ(q)) − 1; ``share`` that joins Φ(q). With a bias b, the fixed amount is 1+b and
    q = ((1+b)/k−1)/s.
    """
    if error == 0.0:
        return Outcome(bias, 1.0 if k < 1.0 + bias else 0.0)
    q = ((1.0 + bias) / k - 1.0) / error
    return Outcome((1.0 + bias) / (1.0 - error * hazard(-q)) - 1.0, below(q))
