"""Intervals for counts: Poisson, binomial, and the ratio of two Poisson means.

Two kinds. "exact" inverts the tail probabilities and never covers less than it says: Garwood,
Biometrika 28, 437 (1936) for a Poisson mean, Clopper and Pearson, Biometrika 26, 404 (1934) for
a binomial probability. At few counts it covers much more. "mid-p" counts the observed value
itself by half in each tail (Lancaster, J. Am. Stat. Assoc. 56, 223 (1961)); its coverage is
right on average. No counts give a one-sided limit, exact in both kinds.

Only scipy.special is used, imported when first needed: it takes a third of a second.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import lru_cache
from math import inf, log
from typing import Literal, NamedTuple

import numpy as np
from numpy.typing import NDArray

Kind = Literal["mid-p", "exact"]


class Bounds(NamedTuple):
    """Lower and upper bound; `upper_limit` when nothing was counted and upper is one-sided."""

    lower: float
    upper: float
    upper_limit: bool = False

    def times(self, factor: float) -> Bounds:
        """The bounds of a quantity `factor` times as large (factor >= 0)."""
        return Bounds(self.lower * factor, self.upper * factor, self.upper_limit)


@lru_cache(maxsize=4096)
def poisson_interval(count: int, level: float, kind: Kind = "mid-p") -> Bounds:
    """Bounds of the mean of a Poisson law that gave `count` >= 0.

    With P(a, x) the regularised incomplete gamma function, P(X >= n) = P(n, mean); the bounds
    solve P(X > n) + w P(X = n) = (1 - level) / 2 and 1 - that, with w = 1/2 for mid-p.
    """
    from scipy.special import gammainc, gammaincinv

    if count == 0:
        return Bounds(0.0, -log(1 - level), upper_limit=True)
    tail = (1 - level) / 2
    if kind == "exact":
        upper = float(gammaincinv(count + 1, 1 - tail))
        return Bounds(float(gammaincinv(count, tail)), upper)

    def above(mean: float) -> float:
        return float(gammainc(count, mean) + gammainc(count + 1, mean)) / 2

    def bound(q: float) -> float:
        low, high = float(gammaincinv(count, q)), float(gammaincinv(count + 1, q))
        return _root(lambda mean: above(mean) - q, low, high)

    return Bounds(bound(tail), bound(1 - tail))


@lru_cache(maxsize=4096)
def binomial_interval(hits: int, trials: int, level: float, kind: Kind = "mid-p") -> Bounds:
    """Bounds of the probability behind `hits` of `trials` > 0.

    P(X >= k) = I_p(k, n - k + 1), the regularised incomplete beta function; otherwise as
    `poisson_interval`. No hits give a one-sided upper limit, hits only the range up to 1.
    """
    from scipy.special import betainc, betaincinv

    if hits == 0:
        return Bounds(0.0, 1 - (1 - level) ** (1 / trials), upper_limit=True)
    misses, tail = trials - hits, (1 - level) / 2
    if kind == "exact":
        upper = float(betaincinv(hits + 1, misses, 1 - tail)) if misses else 1.0
        return Bounds(float(betaincinv(hits, misses + 1, tail)), upper)

    def above(p: float) -> float:
        more = float(betainc(hits + 1, misses, p)) if misses else 0.0
        return (float(betainc(hits, misses + 1, p)) + more) / 2

    def bound(q: float) -> float:
        low = float(betaincinv(hits, misses + 1, q))
        high = float(betaincinv(hits + 1, misses, q)) if misses else 1.0
        return _root(lambda p: above(p) - q, low, high)

    return Bounds(bound(tail), bound(1 - tail) if misses else 1.0)


def ratio_interval(
    count: int, reference: int, exposure_ratio: float, level: float, kind: Kind = "mid-p"
) -> Bounds:
    """Bounds of (mean of `count`) / (mean of `reference`) times `exposure_ratio`.

    exposure_ratio: exposure of the reference over that of the count. Given their sum, the count
    is binomial with p / (1 - p) = ratio of the means (Przyborowski and Wilenski, Biometrika 31,
    313 (1940)). Both counts zero: nothing is known, (0, inf).
    """
    if count + reference == 0:
        return Bounds(0.0, inf, upper_limit=True)
    p = binomial_interval(count, count + reference, level, kind)
    upper = p.upper / (1 - p.upper) if p.upper < 1 else inf
    return Bounds(p.lower / (1 - p.lower), upper, p.upper_limit).times(exposure_ratio)


def ratio_p_value(count: int, reference: int, exposure_ratio: float) -> float:
    """Two-sided p-value (twice the smaller tail) of equal rates behind two counts."""
    from scipy.special import betainc

    total = count + reference
    p = 1 / (1 + exposure_ratio)
    at_least = float(betainc(count, reference + 1, p)) if count else 1.0
    more = float(betainc(count + 1, reference, p)) if reference else 0.0
    return min(1.0, 2 * min(at_least, 1 - more)) if total else 1.0


def garwood(
    counts: NDArray[np.int64], level: float
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Exact two-sided bounds of many Poisson means, also at zero counts.

    counts: int64, n. Returns (lower, upper), float64, n. Histograms repeat few values, so each
    value is worked out once.
    """
    from scipy.special import gammaincinv

    tail = (1 - level) / 2
    values, where = np.unique(counts, return_inverse=True)
    lower = np.where(values > 0, gammaincinv(np.maximum(values, 1), tail), 0.0)
    upper = gammaincinv(values + 1, 1 - tail)
    return lower[where], upper[where]


def _root(rising: Callable[[float], float], low: float, high: float) -> float:
    """Where a rising function crosses zero in [low, high], to the last digits (Illinois rule)."""
    at_low, at_high = rising(low), rising(high)
    if at_low >= 0 or at_high <= 0:  # the bracket is as narrow as the functions are exact
        return (low + high) / 2
    for _ in range(100):
        middle = (low * at_high - high * at_low) / (at_high - at_low)
        at_middle = rising(middle)
        if at_middle == 0 or high - low <= 4e-16 * high or not low < middle < high:
            return middle
        if at_middle < 0:
            low, at_low, at_high = middle, at_middle, at_high / 2
        else:
            high, at_high, at_low = middle, at_middle, at_low / 2
    return middle
