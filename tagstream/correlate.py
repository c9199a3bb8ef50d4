"""The cross-correlation of two arrays of times, with the kernel that runs use."""

from __future__ import annotations

import os
from concurrent.futures import ThreadPoolExecutor

import numpy as np
from numpy.typing import ArrayLike, NDArray

from tagstream.tallies.bins import exact_division, lag_axis
from tagstream.tallies.kernels import fill_pairs

STARTS_A_THREAD = 100_000  # fewer are counted sooner than a thread is started


def cross_correlation(
    start_ps: ArrayLike, stop_ps: ArrayLike, max_lag_ps: int, bin_ps: int
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Histogram of lag = stop - start over all pairs of a start and a stop.

    start_ps, stop_ps: whole numbers of picoseconds, 1-D, non-decreasing. The same array given
        twice is one channel: ordered pairs of distinct tags count, no tag with itself.
    max_lag_ps: centre of the outermost bin, a multiple of `bin_ps`.

    Returns (lag_ps, counts), int64, 2 max_lag / bin + 1 each: bin k holds the lags with
    floor((2 lag + bin) / (2 bin)) = k; it is half-open, centred on k bin.
    Raises TypeError for times that are not whole numbers, ValueError for times out of order or a
    `max_lag_ps` that is no multiple of `bin_ps`.
    """
    if bin_ps <= 0 or max_lag_ps <= 0 or max_lag_ps % bin_ps:
        raise ValueError(
            f"max_lag_ps = {max_lag_ps} must be a positive multiple of bin_ps = {bin_ps}"
        )
    starts = _times("start_ps", start_ps)
    stops = starts if stop_ps is start_ps else _times("stop_ps", stop_ps)
    _check_span(starts, stops)
    bins_each_side, width = int(max_lag_ps) // int(bin_ps), int(bin_ps)
    counts = _counted(starts, stops, bins_each_side, width)
    if stops is starts:
        counts[bins_each_side] -= starts.size  # each tag met itself
    return lag_axis(bins_each_side, width), counts


def _counted(
    starts: NDArray[np.int64], stops: NDArray[np.int64], bins_each_side: int, bin_ps: int
) -> NDArray[np.int64]:
    """All pairs, the starts shared out among threads: each has counts of its own, added after."""
    division = exact_division(bins_each_side, bin_ps)
    workers = max(1, min(os.cpu_count() or 1, starts.size // STARTS_A_THREAD))
    bounds = [starts.size * i // workers for i in range(workers + 1)]
    partial = np.zeros((workers, 2 * bins_each_side + 2), np.int64)

    def fill(i: int) -> None:
        mine = starts[bounds[i] : bounds[i + 1]]
        if mine.size:
            reach = bins_each_side * bin_ps + bin_ps
            earliest, latest = int(mine[0]) - reach, int(mine[-1]) + reach
            low = np.searchsorted(stops, np.int64(max(earliest, -(2**63))), side="left")
            high = np.searchsorted(stops, np.int64(min(latest, 2**63 - 1)), side="right")
            fill_pairs(mine, stops[low:high], division, partial[i])

    with ThreadPoolExecutor(workers) as pool:
        list(pool.map(fill, range(workers)))
    return np.asarray(partial[:, :-1].sum(axis=0))


def _check_span(starts: NDArray[np.int64], stops: NDArray[np.int64]) -> None:
    both = [array for array in (starts, stops) if array.size]
    if both:
        first, last = min(int(a[0]) for a in both), max(int(a[-1]) for a in both)
        if last - first >= 2**63:
            raise ValueError(f"times from {first} to {last} ps are further apart than 2^63 ps")


def _times(name: str, values: ArrayLike) -> NDArray[np.int64]:
    array = np.asarray(values)
    if array.ndim != 1:
        raise ValueError(f"{name} has {array.ndim} dimensions; one is right")
    if array.dtype.kind not in "iu" and array.size:
        raise TypeError(f"{name} has dtype {array.dtype}; whole picoseconds (int64) are right")
    if array.dtype.kind == "u" and array.size and int(array.max()) > np.iinfo(np.int64).max:
        raise ValueError(f"{name} holds {int(array.max())}, beyond the 63 bits of a time")
    times = np.ascontiguousarray(array, np.int64)
    wrong = np.flatnonzero(times[1:] < times[:-1])
    if wrong.size:
        i = int(wrong[0]) + 1
        raise ValueError(f"{name}[{i}] = {times[i]} is before {name}[{i - 1}] = {times[i - 1]}")
    return times
