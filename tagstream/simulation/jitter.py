"""What Gaussian jitter does to lags that follow a two-sided exponential law.

Both the dip of a two-level emitter, exp(-|t|/t0), and the lag of two photons of one decay time
have this shape; folded with a normal law of standard deviation s it stays in closed form.
"""

from __future__ import annotations

from math import log, sqrt

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.special import erfc, erfcx, ndtr

FWHM_PER_SIGMA = 2 * sqrt(2 * log(2))  # 2.354820, of a normal law


def lag_cdf(lags_ps: ArrayLike, scale_ps: float, sigma_ps: float) -> NDArray[np.float64]:
    """Probability that a lag is at most x: two-sided exponential plus normal law, centred on 0.

    With z = (s/b +- x/s) / sqrt(2), b the scale and s the sigma:
    F(x) = Phi(x/s) + exp(-x^2 / 2 s^2) [erfcx(z+) - erfcx(z-)] / 4,
    by integration of the convolution, written so that no factor overflows.
    Either of scale and sigma may be zero.
    """
    x = np.asarray(lags_ps, np.float64)
    if sigma_ps == 0 and scale_ps == 0:
        return np.heaviside(x, 0.5)
    if sigma_ps == 0:
        half = _exp(-np.abs(x) / scale_ps) / 2
        return np.where(x < 0, half, 1 - half)
    normal: NDArray[np.float64] = ndtr(x / sigma_ps)
    if scale_ps == 0:
        return normal
    return normal + (_tail(x, scale_ps, sigma_ps) - _tail(-x, scale_ps, sigma_ps)) / 4


def lag_share(centres_ps: ArrayLike, window_ps: float, *law: float) -> NDArray[np.float64]:
    """Probability of a lag within windows of full width `window_ps`. law: scale, sigma in ps."""
    x = np.asarray(centres_ps, np.float64)
    return lag_cdf(x + window_ps / 2, *law) - lag_cdf(x - window_ps / 2, *law)


def mean_decay(window_ps: float, scale_ps: float, sigma_ps: float) -> float:
    """Mean of exp(-|t|/scale), blurred by jitter, over a centred window of that full width.

    At width zero exp(r^2/2) erfc(r/sqrt 2), r = sigma/scale: the value at zero lag.
    """
    if window_ps == 0:
        return float(erfcx(sigma_ps / scale_ps / sqrt(2)))
    return float(lag_share(0.0, window_ps, scale_ps, sigma_ps)) * 2 * scale_ps / window_ps


def _tail(x: NDArray[np.float64], scale_ps: float, sigma_ps: float) -> NDArray[np.float64]:
    """exp(s^2 / 2 b^2 + x / b) erfc(z+), by whichever of two equal forms does not overflow."""
    ratio = sigma_ps / scale_ps
    z = (ratio + x / sigma_ps) / sqrt(2)
    near = np.exp(-0.5 * (x / sigma_ps) ** 2) * erfcx(np.maximum(z, 0))
    far = _exp(ratio**2 / 2 + x / scale_ps) * erfc(z)
    tail: NDArray[np.float64] = np.where(z >= 0, near, far)
    return tail


def _exp(x: NDArray[np.float64]) -> NDArray[np.float64]:
    values: NDArray[np.float64] = np.exp(np.minimum(x, 0))  # the branch not taken: no overflow
    return values
