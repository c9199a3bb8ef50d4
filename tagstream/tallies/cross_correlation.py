"""Histograms of the lags between two channels, or of one channel with itself."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tagstream.block import Block
from tagstream.settings.measures import CrossCorrelation
from tagstream.tallies import Sums
from tagstream.tallies.bins import lag_axis, lag_edges
from tagstream.tallies.pair_time import PairTime
from tagstream.tallies.pairs import PairHistograms

SUM_NAMES = (
    *("counts", "start_counts", "stop_counts"),
    *("live_time_ps", "pair_time_ps", "expected_pairs"),
)


def build(
    sections: Sequence[CrossCorrelation], channels: Mapping[str, int]
) -> list[CrossCorrelations]:
    """Tallies for all [[tally]] sections of this kind; those with equal bins share one pass."""
    alike: dict[tuple[int, int], list[CrossCorrelation]] = {}
    for section in sections:
        alike.setdefault((section.bin_ps, section.bins_each_side), []).append(section)
    return [CrossCorrelations(group, channels) for group in alike.values()]


def sums_in(arrays: Mapping[str, NDArray[Any]]) -> dict[str, NDArray[Any]]:
    """What adds up, of all that the results of a tally hold; a resumed run goes on from it."""
    return {name: np.asarray(arrays[name]) for name in SUM_NAMES}


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


class CrossCorrelations:
    """Pairs (start, stop) by lag = t_stop - t_start, in the slice of their later tag.

    sections: with equal bins. Bin k = -K..K holds the lags with
    floor((2 lag + bin) / (2 bin)) = k. Where start and stop are one channel, ordered pairs of
    distinct tags count. Nothing is correlated across a gap.

    Sums of each: counts (2K + 1), start_counts, stop_counts, live_time_ps (), pair_time_ps (()
    or 2K + 1), int64; expected_pairs (() or 2K + 1), float64.
    """

    def __init__(self, sections: Sequence[CrossCorrelation], channels: Mapping[str, int]) -> None:
        self._pairs = {s.name: (channels[s.start], channels[s.stop]) for s in sections}
        self._bin_ps, bins = sections[0].bin_ps, sections[0].bins_each_side
        self._histograms = PairHistograms(
            list(self._pairs.values()), len(channels), bins, self._bin_ps
        )
        axes = {
            "lag": lag_axis(bins, self._bin_ps).astype(np.float64),
            "lag_edges": lag_edges(bins, self._bin_ps),
        }
        self.axes = dict.fromkeys(self._pairs, axes)
        self._pair_time = PairTime(lag_axis(bins, self._bin_ps))

    def add(self, piece: Block) -> None:
        self._pair_time.add(piece)
        self._histograms.add(piece)

    def take(self, singles: Sums) -> dict[str, dict[str, NDArray[Any]]]:
        pair_time = self._pair_time.take()
        histograms = self._histograms.counts
        sums = {
            name: self._sums(counts.copy(), pair, pair_time, singles)
            for (name, pair), counts in zip(self._pairs.items(), histograms, strict=True)
        }
        histograms[:] = 0
        return sums

    def _sums(
        self,
        counts: NDArray[np.int64],
        pair: tuple[int, int],
        pair_time: NDArray[np.int64],
        singles: Sums,
    ) -> dict[str, NDArray[Any]]:
        starts, stops = (int(singles["counts"][channel]) for channel in pair)
        live_time_ps = int(singles["live_time_ps"])
        others = max(stops - (pair[0] == pair[1]), 0)
        return {
            "counts": counts,
            "start_counts": np.array(starts, np.int64),
            "stop_counts": np.array(stops, np.int64),
            "live_time_ps": np.array(live_time_ps, np.int64),
            "pair_time_ps": pair_time,
            "expected_pairs": expected_pairs(starts, others, live_time_ps, pair_time, self._bin_ps),
        }
