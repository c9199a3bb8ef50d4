"""The values of the last hour, which latest.h5 carries so that a viewer shows a course."""

from __future__ import annotations

from collections import deque

import numpy as np
from numpy.typing import NDArray

from tagstream.outputs import Row
from tagstream.outputs.layout import HOUR_S, MOST_HISTORY
from tagstream.units import PS_PER_S


class RecentValues:
    """Values over the shortest span, the last hour of stream time, at most MOST_HISTORY points.

    spans: names, "run" first. Where slices are shorter than a second every n-th is kept.
    """

    def __init__(self, spans: tuple[str, ...], slice_ps: int) -> None:
        self.span = spans[1] if len(spans) > 1 else spans[0]
        self._index = min(1, len(spans) - 1)
        self._every = max(1, -(-HOUR_S * PS_PER_S // slice_ps // MOST_HISTORY))
        self._rows: deque[tuple[int, dict[str, tuple[float, float, float]]]] = deque()

    def add(self, row: Row) -> None:
        """Take the values of a slice; let go of what is older than an hour."""
        if row.slice_index % self._every:
            return
        found = {
            name: (spans[self._index].value, spans[self._index].lower, spans[self._index].upper)
            for name, spans in row.estimates.items()
        }
        self._rows.append((row.end_ps, found))
        while self._rows[0][0] <= row.end_ps - HOUR_S * PS_PER_S:
            self._rows.popleft()

    def columns(self, estimate: str) -> tuple[NDArray[np.float64], ...]:
        """time (end of the slice, s of stream time), value, lower, upper: float64, n each."""
        rows = [
            (end_ps / PS_PER_S, *found[estimate])
            for end_ps, found in self._rows
            if estimate in found  # the estimates of a run may change while it goes on
        ]
        return tuple(np.array(rows, np.float64).reshape(-1, 4).T.copy())
