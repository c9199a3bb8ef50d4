"""Tags wait here until no earlier one can come."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tagstream.conditioning.kernels import fill_ordered

MOVES_PER_TAG = 8  # beyond this, sorting runs beats moving tags one by one


class Order:
    """Puts tags in time order; equal times keep arrival order."""

    def __init__(self) -> None:
        self._times = np.empty(0, np.int64)
        self._channels = np.empty(0, np.uint8)

    def __len__(self) -> int:
        return int(self._times.size)

    def push(self, times_ps: NDArray[np.int64], channels: NDArray[np.uint8]) -> None:
        """Take tags in arrival order. The arrays are rearranged: they must be the caller's gift."""
        if len(self):
            times_ps = np.concatenate((self._times, times_ps))
            channels = np.concatenate((self._channels, channels))
        if fill_ordered(times_ps, channels, MOVES_PER_TAG * times_ps.size) < times_ps.size:
            order = np.argsort(times_ps, kind="stable")
            times_ps, channels = times_ps[order], channels[order]
        self._times, self._channels = times_ps, channels

    def release(self, before_ps: int) -> tuple[NDArray[np.int64], NDArray[np.uint8]]:
        """The tags before `before_ps`, in order; they leave."""
        i = int(np.searchsorted(self._times, np.int64(before_ps), side="left"))
        times, channels = self._times[:i], self._channels[:i]
        self._times, self._channels = self._times[i:].copy(), self._channels[i:].copy()
        return times, channels

    def release_all(self) -> tuple[NDArray[np.int64], NDArray[np.uint8]]:
        """All tags, in order; they leave."""
        times, channels = self._times, self._channels
        self._times, self._channels = np.empty(0, np.int64), np.empty(0, np.uint8)
        return times, channels
