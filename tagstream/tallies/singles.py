"""Detections per channel, live time, and the periods of clock channels."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tagstream.block import Block
from tagstream.tallies.kernels import fill_counts, fill_periods, fill_selected


class Singles:
    """The tally that every run has.

    Sums: counts (n_channels), live_time_ps (), and by channel, filled for clocks alone,
    period_sum_ps, period_count, missed_count (see kernels.fill_periods). A period belongs to the
    slice of its later tag.
    """

    def __init__(self, channels: int, clocks: Sequence[int]) -> None:
        self._counts = np.zeros(channels, np.int64)
        self._live_time_ps = 0
        self._last = {clock: np.zeros(4, np.int64) for clock in clocks}
        self._periods = np.zeros((channels, 3), np.int64)
        self._room = np.empty(0, np.int64)  # used again and again: new memory costs much

    def add(self, piece: Block) -> None:
        first = int(np.searchsorted(piece.times_ps, np.int64(piece.begin_ps)))
        fill_counts(piece.channels[first:], self._counts)
        self._live_time_ps += piece.end_ps - piece.begin_ps
        for clock, last in self._last.items():
            if piece.opens:
                last[:] = 0
            if self._room.size <= piece.times_ps.size:
                self._room = np.empty(piece.times_ps.size * 5 // 4 + 1, np.int64)
            count = fill_selected(piece.times_ps, piece.channels, clock, self._room)
            fill_periods(self._room[:count], last, self._periods[clock])

    def take(self) -> dict[str, NDArray[Any]]:
        """The sums of the slice that ended; the next begins at zero."""
        sums = {
            "counts": self._counts.copy(),
            "live_time_ps": np.array(self._live_time_ps, np.int64),
            "period_sum_ps": self._periods[:, 0].copy(),
            "period_count": self._periods[:, 1].copy(),
            "missed_count": self._periods[:, 2].copy(),
        }
        self._counts[:] = 0
        self._periods[:] = 0
        self._live_time_ps = 0
        return sums
