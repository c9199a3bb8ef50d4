"""The pairs that independent light of the same rates would have given."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tagstream.settings.measures import CrossCorrelation
from tagstream.tallies import Sums

NO_PAIRS = "no live time, or no slice with counts in both channels"


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
    stops = max(int(sums["stop_counts"]) - (tally.start == tally.stop), 0)
    per_ps = int(sums["start_counts"]) * stops * tally.bin_ps / live_time_ps**2
    return np.asarray(per_ps * sums["pair_time_ps"], np.float64)


def expected_within(expected: NDArray[np.float64], first: int, width: int) -> float:
    """Expected pairs in `width` bins from `first` on; a () array is the same in all bins."""
    if expected.ndim == 0:
        return float(expected) * width
    return float(expected[first : first + width].sum())
