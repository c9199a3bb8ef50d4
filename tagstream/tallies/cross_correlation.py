"""Histogram of the lags between two channels, or of one channel with itself."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tagstream.block import Block
from tagstream.settings.measures import CrossCorrelation as CrossCorrelationSettings
from tagstream.tallies.kernels import fill_pairs, fill_selected
from tagstream.tallies.pair_time import PairTime


def lag_axis(bins_each_side: int, bin_ps: int) -> NDArray[np.int64]:
    """Centres of the 2 K + 1 bins in ps, int64."""
    return np.arange(-bins_each_side, bins_each_side + 1, dtype=np.int64) * bin_ps


def expected_pairs(
    start_counts: int, stop_counts: int, live_time_ps: int, pair_time_ps: NDArray[Any], bin_ps: int
) -> NDArray[np.float64]:
    """Pairs per bin that independent light would have given in one slice, float64.

    N_start N_stop P bin / T^2, with P the pair time: (rate of starts) (rate of stops) (bin)
    (time). The caller gives N - 1 for stop_counts where start and stop are one channel.
    """
    if live_time_ps == 0:
        return np.asarray(np.zeros(pair_time_ps.shape))
    per_ps = start_counts * stop_counts * bin_ps / live_time_ps**2  # Python integers: exact
    return np.asarray(per_ps * pair_time_ps.astype(np.float64))


class CrossCorrelation:
    """Pairs (start, stop) by lag = t_stop - t_start, in the slice of their later tag.

    Bin k = -K..K holds the lags with floor((2 lag + bin) / (2 bin)) = k. Where start and stop
    are one channel, ordered pairs of distinct tags count. Nothing is correlated across a gap.

    Sums: counts (2K + 1), start_counts, stop_counts, live_time_ps (), pair_time_ps (() or
    2K + 1), int64; expected_pairs (() or 2K + 1), float64.
    """

    def __init__(self, settings: CrossCorrelationSettings, channels: Mapping[str, int]) -> None:
        self._start, self._stop = channels[settings.start], channels[settings.stop]
        self._bin_ps = settings.bin_ps
        self._zero_bin = settings.bins_each_side
        self._lags = lag_axis(settings.bins_each_side, settings.bin_ps)
        self._counts = np.zeros(self._lags.size, np.int64)
        self._pair_time = PairTime(self._lags)
        self._start_counts = self._stop_counts = self._live_time_ps = 0
        self._starts: NDArray[np.int64] = np.empty(0, np.int64)
        self._stops: NDArray[np.int64] = np.empty(0, np.int64)

    @property
    def axes(self) -> Mapping[str, NDArray[Any]]:
        edges = np.append(2 * self._lags - self._bin_ps, 2 * self._lags[-1] + self._bin_ps)
        return {"lag": self._lags.astype(np.float64), "lag_edges": edges / 2.0}

    def add(self, piece: Block) -> None:
        if piece.opens:
            self._forget()
        self._pair_time.add(piece)
        self._live_time_ps += piece.end_ps - piece.begin_ps
        starts = self._select(piece, self._start)
        self._start_counts += _counted(starts, piece.begin_ps)
        if self._start == self._stop:
            self._stop_counts = self._start_counts
            self._count(starts, starts)
            self._counts[self._zero_bin] -= starts.size  # each tag met itself
        else:
            stops = self._select(piece, self._stop)
            self._stop_counts += _counted(stops, piece.begin_ps)
            self._count(starts, stops)
        self._keep_since(piece.end_ps - (self._counts.size * self._bin_ps + 1) // 2)

    def take(self) -> dict[str, NDArray[Any]]:
        pair_time = self._pair_time.take()
        others = self._stop_counts - (self._start == self._stop)
        sums = {
            "counts": self._counts.copy(),
            "start_counts": np.array(self._start_counts, np.int64),
            "stop_counts": np.array(self._stop_counts, np.int64),
            "live_time_ps": np.array(self._live_time_ps, np.int64),
            "pair_time_ps": pair_time,
            "expected_pairs": expected_pairs(
                self._start_counts, max(others, 0), self._live_time_ps, pair_time, self._bin_ps
            ),
        }
        self._counts[:] = 0
        self._start_counts = self._stop_counts = self._live_time_ps = 0
        return sums

    def _select(self, piece: Block, channel: int) -> NDArray[np.int64]:
        out = np.empty(piece.times_ps.size + 1, np.int64)
        return out[: fill_selected(piece.times_ps, piece.channels, channel, out)]

    def _count(self, starts: NDArray[np.int64], stops: NDArray[np.int64]) -> None:
        """Pairs whose later tag is new: (all starts, new stops) and (new starts, old stops)."""
        old_stops = self._stops
        self._starts = np.concatenate((self._starts, starts))
        self._stops = np.concatenate((self._stops, stops))
        fill_pairs(self._starts, stops, self._bin_ps, self._counts)
        fill_pairs(starts, old_stops, self._bin_ps, self._counts)

    def _keep_since(self, oldest_ps: int) -> None:
        """Keep the tags that a later one can still reach."""
        first_start, first_stop = (
            np.searchsorted(self._starts, oldest_ps),
            np.searchsorted(self._stops, oldest_ps),
        )
        self._starts, self._stops = (
            self._starts[first_start:].copy(),
            self._stops[first_stop:].copy(),
        )

    def _forget(self) -> None:
        self._starts = self._stops = np.empty(0, np.int64)


def _counted(times_ps: NDArray[np.int64], begin_ps: int) -> int:
    """Tags in the live interval: all but those that open an assumed stretch."""
    return int(times_ps.size - np.searchsorted(times_ps, np.int64(begin_ps)))
