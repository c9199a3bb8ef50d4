"""Kernels of the tallies: counting loops over integers.

They fill arrays that the caller owns and add to what is there. Each has a slow twin in
tests/naive.py.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tagstream.compiled import kernel


@kernel
def fill_selected(
    times_ps: NDArray[np.int64],
    channels: NDArray[np.uint8],
    channel: int,
    out_times: NDArray[np.int64],
) -> int:
    """Copy the times of one channel; return how many there are.

    times_ps, channels: n. out_times: int64, at least n + 1 long (the copy is written before it
    is known to be wanted, so that the loop has no branch).
    """
    count = 0
    for i in range(times_ps.size):
        out_times[count] = times_ps[i]
        count += channels[i] == channel
    return count


@kernel
def fill_counts(channels: NDArray[np.uint8], counts: NDArray[np.int64]) -> None:
    """Add the number of tags of each channel to `counts` (int64, by channel)."""
    for i in range(channels.size):
        counts[channels[i]] += 1


@kernel
def fill_periods(
    times_ps: NDArray[np.int64], last: NDArray[np.int64], sums: NDArray[np.int64]
) -> None:
    """Sum the intervals between neighbouring tags of one channel.

    times_ps: int64, n, non-decreasing. last: int64 [time of the tag before these, its interval],
    carried from call to call; -1 where there is none. sums: int64 [sum of intervals in ps, their
    number, how many are longer than 1.5 times the one before], added to.
    """
    for i in range(times_ps.size):
        if last[0] >= 0:
            interval = times_ps[i] - last[0]
            sums[0] += interval
            sums[1] += 1
            if last[1] >= 0 and 2 * interval > 3 * last[1]:
                sums[2] += 1
            last[1] = interval
        last[0] = times_ps[i]


@kernel
def fill_pairs(
    starts_ps: NDArray[np.int64],
    stops_ps: NDArray[np.int64],
    bin_ps: int,
    counts: NDArray[np.int64],
) -> None:
    """Add all pairs of a start and a stop to the histogram of their lag, stop - start.

    starts_ps, stops_ps: int64, non-decreasing. counts: int64, 2K + 1 bins; bin k = -K..K is
    counts[k + K] and holds the lags with floor((2 lag + bin) / (2 bin)) = k: half-open, centred
    on k bin. Lags outside all bins are not counted. Doubled times keep everything whole.

    Cost: one pass over both plus one step per pair (two pointers).
    """
    reach = counts.size * bin_ps  # twice the distance from zero to the outer edges
    double_bin = 2 * bin_ps
    low = 0
    for i in range(starts_ps.size):
        start = starts_ps[i]
        while low < stops_ps.size and 2 * (stops_ps[low] - start) < -reach:
            low += 1
        j = low
        while j < stops_ps.size:
            lag = 2 * (stops_ps[j] - start)
            if lag >= reach:
                break
            counts[(lag + reach) // double_bin] += 1
            j += 1
