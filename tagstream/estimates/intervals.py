"""Intervals for counts: Poisson, binomial, and the ratio of two Poisson means.

Two kinds. "exact" inverts the tail probabilities: Garwood, Biometrika 28, 437 (1936) for a
Poisson mean, Clopper and Pearson, Biometrika 26, 404 (1934) for a binomial probability. At few
counts it covers much more than it says. "mid-p" counts the observed value itself by half in each
tail (Lancaster, J. Am. Stat. Assoc. 56, 223 (1961)); its coverage is right on average.

No counts give a one-sided limit at the full level, in both kinds (the mid-p equation gives the
same number). As a limit it is exact. But one that turns two-sided with the first count has a
price (Feldman and Cousins, Phys. Rev. D 57, 3873 (1998)): "exact" never covers less than it says
except where the mean lies between -ln(1 - level) and -ln((1 - level) / 2). At 68.27 % these are
1.15 and 1.84, and the least is 0.57; at 95 % they are 3.00 and 3.69, and the least is 0.938.
`garwood`, two-sided at zero counts too, has no such place.

Only scipy.special is used, imported when first needed: it takes a third of a second. Upper
bounds are solved from the upper tail, so that nothing is lost where 1 - level is tiny.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import lru_cache
from math import exp, expm1, inf, log, log1p
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
    solve P(X > n) + w P(X = n) = (1 - level) / 2 and 1 - that, with w = 1 ("exact") or 1/2.
    """
    from scipy.special import gammainc, gammaincc, gammainccinv, gammaincinv

    if count == 0:
        return Bounds(0.0, -log1p(-level), upper_limit=True)
    tail = (1 - level) / 2
    lower, upper = float(gammaincinv(count, tail)), float(gammainccinv(count + 1, tail))
    if kind == "exact":
        return Bounds(lower, upper)

    def above(mean: float) -> float:
        return float(gammainc(count, mean) + gammainc(count + 1, mean)) / 2 - tail

    def below(mean: float) -> float:
        return tail - float(gammaincc(count, mean) + gammaincc(count + 1, mean)) / 2

    lower = _root(above, lower, float(gammaincinv(count + 1, tail)))
    return Bounds(lower, _root(below, float(gammainccinv(count, tail)), upper))


@lru_cache(maxsize=4096)
def binomial_interval(hits: int, trials: int, level: float, kind: Kind = "mid-p") -> Bounds:
    """Bounds of the probability behind `hits` of `trials`.

    P(X >= k) = I_p(k, n - k + 1), the regularised incomplete beta function; otherwise as
    `poisson_interval`. No hits give a one-sided upper limit, hits only the range up to 1, and no
    trials (0, 1): nothing is known.
    """
    from scipy.special import betainc, betaincc, betainccinv, betaincinv

    if trials == 0:
        return Bounds(0.0, 1.0, upper_limit=True)
    misses, tail = trials - hits, (1 - level) / 2
    if hits == 0:
        return Bounds(0.0, -expm1(log1p(-level) / trials), upper_limit=True)
    if misses == 0:
        return Bounds(exp(log(tail if kind == "exact" else 2 * tail) / trials), 1.0)
    lower = float(betaincinv(hits, misses + 1, tail))
    upper = float(betainccinv(hits + 1, misses, tail))
    if kind == "exact":
        return Bounds(lower, upper)

    def above(p: float) -> float:
        return float(betainc(hits, misses + 1, p) + betainc(hits + 1, misses, p)) / 2 - tail

    def below(p: float) -> float:
        return tail - float(betaincc(hits, misses + 1, p) + betaincc(hits + 1, misses, p)) / 2

    lower = _root(above, lower, float(betaincinv(hits + 1, misses, tail)))
    return Bounds(lower, _root(below, float(betainccinv(hits, misses + 1, tail)), upper))


def ratio_interval(
    count: int, reference: int, exposure_ratio: float, level: float, kind: Kind = "mid-p"
) -> Bounds:
    """Bounds of (mean of `count`) / (mean of `reference`) times `exposure_ratio`.

    exposure_ratio: exposure of the reference over that of the count. Given their sum, the count
    is binomial with p / (1 - p) = ratio of the means (Przyborowski and Wilenski, Biometrika 31,
    313 (1940)). Both counts zero: nothing is known, (0, inf).
    """
    if count > reference > 0:  # turned over, so that 1 - p is never a small difference
        lower, upper, _ = ratio_interval(reference, count, 1 / exposure_ratio, level, kind)
        return Bounds(1 / upper, 1 / lower)
    p = binomial_interval(count, count + reference, level, kind)
    upper = p.upper / (1 - p.upper) if p.upper < 1 else inf
    return Bounds(p.lower / (1 - p.lower), upper, p.upper_limit).times(exposure_ratio)


def ratio_p_value(count: int, reference: int, exposure_ratio: float) -> float:
    """Two-sided p-value (twice the smaller tail) of equal rates behind two counts."""
    from scipy.special import betainc, betaincc

    p = 1 / (1 + exposure_ratio)
    at_least = float(betainc(count, reference + 1, p)) if count else 1.0
    at_most = float(betaincc(count + 1, reference, p)) if reference else 1.0
    return min(1.0, 2 * min(at_least, at_most))


def garwood(
    counts: NDArray[np.int64], level: float
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Exact two-sided bounds of many Poisson means, also at zero counts.

    counts: int64, n. Returns (lower, upper), float64, n. Histograms repeat few values, so each
    value is worked out once.
    """
    from scipy.special import gammainccinv, gammaincinv

    tail = (1 - level) / 2
    values, where = np.unique(counts, return_inverse=True)
    lower = np.where(values > 0, gammaincinv(np.maximum(values, 1), tail), 0.0)
    upper = gammainccinv(values + 1, tail)
    return lower[where], upper[where]


def _root(rising: Callable[[float], float], low: float, high: float) -> float:
    """Where a rising function crosses zero in [low, high] (regula falsi, Illinois rule).

    Ends when a step no longer moves by 1e-11 of the value; the error is then far smaller.
    """
    at_low, at_high = rising(low), rising(high)
    if at_low >= 0 or at_high <= 0:  # the bracket is as narrow as the functions are exact
        return (low + high) / 2
    middle, before, side = low, high, 0
    while abs(middle - before) > 1e-11 * middle:
        before, middle = middle, (low * at_high - high * at_low) / (at_high - at_low)
        at_middle = rising(middle)
        if at_middle < 0:
            low, at_low = middle, at_middle
            at_high, side = at_high / 2 if side < 0 else at_high, -1
        else:
            high, at_high = middle, at_middle
            at_low, side = at_low / 2 if side > 0 else at_low, 1
    return middle
