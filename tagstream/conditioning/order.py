"""Tags wait here until no earlier one can come."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tagstream.conditioning.kernels import fill_bucketed, fill_ordered

MOVES_PER_TAG = 2  # beyond this, dealing tags out to intervals of time beats moving them
MOST_MOVES_PER_TAG = 64  # in intervals: beyond this the light is so bunched that sorting beats it


class Order:
    """Puts tags in time order; equal times keep arrival order.

    Three ways, the same order: tags nearly in order are moved one by one; others are first dealt
    out to narrow intervals of time, which costs the same whatever the disorder; the library's
    stable sort is left for light so bunched that intervals hold very many tags.
    """

    def __init__(self) -> None:
        self._times = np.empty(0, np.int64)
        self._channels = np.empty(0, np.uint8)
        self._count = 0
        self._far_apart = False  # the last tags out of order were too far from their places

    def __len__(self) -> int:
        return self._count

    def room(self, more: int) -> tuple[NDArray[np.int64], NDArray[np.uint8]]:
        """Arrays that begin with the tags that wait, with room for `more` after them."""
        times = np.empty(self._count + more, np.int64)
        channels = np.empty(self._count + more, np.uint8)
        times[: self._count] = self._times
        channels[: self._count] = self._channels
        self._times, self._channels = times, channels
        return times, channels

    def take(self, count: int, unordered: bool) -> None:
        """`count` tags are now in those arrays; put them in order if they are not."""
        self._times, self._channels = self._times[:count], self._channels[:count]
        self._count = count
        if unordered:
            self._sort()
        else:
            self._far_apart = False

    def release(self, before_ps: int) -> tuple[NDArray[np.int64], NDArray[np.uint8]]:
        """The tags before `before_ps`, in order; they leave."""
        i = int(np.searchsorted(self._times, np.int64(before_ps), side="left"))
        times, channels = self._times[:i], self._channels[:i]
        self._times, self._channels = self._times[i:], self._channels[i:]
        self._count = int(self._times.size)
        return times, channels

    def release_all(self) -> tuple[NDArray[np.int64], NDArray[np.uint8]]:
        """All tags, in order; they leave."""
        times, channels = self._times, self._channels
        self._times, self._channels = np.empty(0, np.int64), np.empty(0, np.uint8)
        self._count = 0
        return times, channels

    def _sort(self) -> None:
        size = self._count
        if not self._far_apart:
            if fill_ordered(self._times, self._channels, MOVES_PER_TAG * size) == size:
                return
            self._far_apart = True
        times, channels = np.empty_like(self._times), np.empty_like(self._channels)
        intervals = np.empty((1 << size.bit_length()) + 1, np.int32)
        fill_bucketed(self._times, self._channels, intervals, times, channels)
        if fill_ordered(times, channels, MOST_MOVES_PER_TAG * size) < size:
            order = np.argsort(times, kind="stable")
            times, channels = times[order], channels[order]
        self._times, self._channels = times, channels
