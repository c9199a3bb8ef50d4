"""The pairs that independent light of the same rates would have given."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tagstream.settings.measures import CrossCorrelation
from tagstream.tallies import Sums

NO_PAIRS = "no live time, or no slice with counts in both channels"
ONE_CHANNEL_NOTE = "one channel with itself: its dead time hides pairs near zero lag"


def expected_pairs(sums: Sums, tally: CrossCorrelation) -> NDArray[np.float64]:
    """Expected pairs per bin of a cross-correlation, float64, () if the same for all bins.

    normalisation = "slices": sum over slices of N_start N_stop P bin / T^2, so that drifting
    rates do not bias g2. "global": the same from the totals of the span; drift biases it upwards
    (+41 % for a tenfold scan of power). P is the pair time, T the live time. Where start and
    stop are one channel, N (N - 1) stands for N_start N_stop.
    """
    if tally.normalisation == "slices":
        return np.asarray(sums["expected_pairs"], np.float64)
    live_time_ps = int(sums["live_time_ps"])
    if live_time_ps == 0:
        return np.zeros(np.shape(sums["pair_time_ps"]))
    stops = max(int(sums["stop_counts"]) - is_one_channel(tally), 0)
    per_ps = int(sums["start_counts"]) * stops * tally.bin_ps / live_time_ps**2
    return np.asarray(per_ps * sums["pair_time_ps"], np.float64)


def is_one_channel(tally: CrossCorrelation) -> bool:
    """Whether the lags are those of one channel with itself."""
    return tally.start == tally.stop


def distinct_pairs(counts: int, expected: float) -> tuple[int, float]:
    """Pairs of one channel, found and expected, in a window around zero lag.

    The window holds each pair in both orders, so its counts scatter like twice a Poisson number.
    An odd count, from a lag on the edge of the window, is rounded up.
    """
    return (counts + 1) // 2, expected / 2


def expected_within(expected: NDArray[np.float64], first: int, width: int) -> float:
    """Expected pairs in `width` bins from `first` on; a () array is the same in all bins."""
    if expected.ndim == 0:
        return float(expected) * width
    return float(expected[first : first + width].sum())
