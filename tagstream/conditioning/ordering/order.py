"""Tags wait here until no earlier one can come."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tagstream.conditioning.ordering.kernels import (
    FIRST,
    fill_apart,
    fill_bucketed,
    fill_merged,
    fill_ordered,
)

MOVES_PER_TAG = 2  # beyond this, dealing tags out to intervals of time beats moving them
MOST_RUNS = 4  # beyond this, dealing out to intervals beats merging runs again and again
MOST_MOVES_PER_TAG = 64  # in intervals: beyond this the light is so bunched that sorting beats it


class Order:
    """Puts tags in time order; equal times keep arrival order.

    delays_ps: int64, by channel; what was added to the times. Four ways, the same order: tags
    nearly in order are moved one by one. Tags that are out of order by their delays alone make
    runs, one for each delay, which are merged. Others are first dealt out to narrow intervals of
    time, which costs the same whatever the disorder; the library's stable sort is left for light
    so bunched that intervals hold very many tags.
    """

    def __init__(self, delays_ps: NDArray[np.int64]) -> None:
        self._times = np.empty(0, np.int64)
        self._channels = np.empty(0, np.uint8)
        self._count = 0
        self._far_apart = False  # the last tags out of order were too far from their places
        # The channels of each run. Of equal times, the tag with the larger delay arrived first.
        runs = np.flip(np.unique(delays_ps)) if delays_ps.size else np.zeros(1, np.int64)
        self._runs = [np.flatnonzero(delays_ps == delay) for delay in runs]
        self._largest_delay_ps = int(runs[0])
        self._shuffled_ps = FIRST

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

    def take(self, count: int, unordered: bool, shuffled_ps: int = FIRST) -> None:
        """`count` tags are now in those arrays; put them in order if they are not.

        shuffled_ps: the latest time, without delay, when last a tag arrived before an earlier
        one.
        """
        in_turn = self._in_turn(shuffled_ps)
        self._times, self._channels = self._times[:count], self._channels[:count]
        self._count = count
        if not unordered:
            self._far_apart = False
        elif in_turn and 1 < len(self._runs) <= MOST_RUNS:
            self._times, self._channels = merged(self._times, self._channels, self._runs)
        else:
            self._sort()

    def _in_turn(self, shuffled_ps: int) -> bool:
        """Whether all tags, those that wait and those just taken, arrived in order.

        A tag that waits for longer than the largest delay after a disorder arrived after it.
        """
        same, self._shuffled_ps = shuffled_ps == self._shuffled_ps, shuffled_ps
        waited = self._count == 0 or int(self._times[0]) - self._largest_delay_ps > shuffled_ps
        return same and waited

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


def merged(
    times_ps: NDArray[np.int64], channels: NDArray[np.uint8], runs: list[NDArray[np.intp]]
) -> tuple[NDArray[np.int64], NDArray[np.uint8]]:
    """Tags in order, from tags of which those of each run are.

    runs: the channels of each; of equal times those of earlier runs come first.
    """
    if len(runs) == 1:
        return times_ps, channels
    half = len(runs) // 2
    chosen = np.zeros(256, np.uint8)
    chosen[np.concatenate(runs[:half])] = 1
    size = times_ps.size
    room = [(np.empty(size + 2, np.int64), np.empty(size + 2, np.uint8)) for _ in range(2)]
    (times_a, channels_a), (times_b, channels_b) = room
    a = fill_apart(times_ps, channels, chosen, times_a, channels_a, times_b, channels_b)
    b = size - a
    for times, names, part in (
        (times_a[1 : a + 1], channels_a[1 : a + 1], runs[:half]),
        (times_b[1 : b + 1], channels_b[1 : b + 1], runs[half:]),
    ):
        times[:], names[:] = merged(times, names, part)
    out_times, out_channels = np.empty(size, np.int64), np.empty(size, np.uint8)
    fill_merged(
        times_a[: a + 2],
        channels_a[: a + 2],
        times_b[: b + 2],
        channels_b[: b + 2],
        out_times,
        out_channels,
    )
    return out_times, out_channels
