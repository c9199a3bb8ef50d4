"""Bins of a lag: centred, half-open, in whole picoseconds."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray


def lag_axis(bins_each_side: int, bin_ps: int) -> NDArray[np.int64]:
    """Centres of the 2 K + 1 bins in ps, int64."""
    return np.arange(-bins_each_side, bins_each_side + 1, dtype=np.int64) * bin_ps


def lag_edges(bins_each_side: int, bin_ps: int) -> NDArray[np.float64]:
    """Edges of the bins in ps, float64, one more than bins; halves are exact."""
    twice = np.arange(-2 * bins_each_side - 1, 2 * bins_each_side + 2, 2, dtype=np.int64) * bin_ps
    return np.asarray(twice / 2.0)


def exact_division(bins_each_side: int, bin_ps: int) -> NDArray[np.int64]:
    """[divisor, multiplier, shift] that finds the bin of a doubled lag; see kernels.bin_of.

    The divisor is 2 bin. For x below 2^31, x // d = x m >> s with s = 31 + ceil(log2 d) and
    m = floor(2^s / d) + 1: then 0 < m d - 2^s <= d <= 2^(s - 31), which is exact (Granlund and
    Montgomery, PLDI 1994, theorem 4.2), and x m stays below 2^63. Where doubled lags reach
    further the multiplier is 0: divide.
    """
    divisor = 2 * bin_ps
    furthest = 2 * (2 * bins_each_side + 1) * bin_ps
    if furthest >= 2**31:
        return np.array([divisor, 0, 0], np.int64)
    shift = 31 + (divisor - 1).bit_length()
    return np.array([divisor, (1 << shift) // divisor + 1, shift], np.int64)
