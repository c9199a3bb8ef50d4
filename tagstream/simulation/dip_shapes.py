"""Shapes of a two-photon dip against the position of a stage, 1 at the centre.

width is the full width at half depth of each. Which light gives which: a Gaussian spectrum the
Gaussian, pairs of a continuous pump at a phase-matching sinc the triangle, a rectangular filter
the sinc, two photons that decay exponentially the exponential.
"""

from __future__ import annotations

from collections.abc import Callable
from math import log

import numpy as np
from numpy.typing import NDArray

_HALF_SINC = 1.8954942670339809  # where sin(x) / x is one half

Shape = Callable[[NDArray[np.float64]], NDArray[np.float64]]


def gaussian(widths: NDArray[np.float64]) -> NDArray[np.float64]:
    """exp(-4 ln 2 x^2); widths: distance from the centre in full widths, for all shapes."""
    shape: NDArray[np.float64] = np.exp(-4 * log(2) * widths**2)
    return shape


def triangular(widths: NDArray[np.float64]) -> NDArray[np.float64]:
    """1 - |x|, not below zero."""
    shape: NDArray[np.float64] = np.maximum(1 - np.abs(widths), 0.0)
    return shape


def sinc(widths: NDArray[np.float64]) -> NDArray[np.float64]:
    """sin(u) / u, one half at half a width; negative lobes raise the coincidences."""
    shape: NDArray[np.float64] = np.sinc(2 * _HALF_SINC / np.pi * widths)
    return shape


def exponential(widths: NDArray[np.float64]) -> NDArray[np.float64]:
    """exp(-2 ln 2 |x|)."""
    shape: NDArray[np.float64] = np.exp(-2 * log(2) * np.abs(widths))
    return shape


SHAPES: dict[str, Shape] = {
    "gaussian": gaussian,
    "triangular": triangular,
    "sinc": sinc,
    "exponential": exponential,
}
