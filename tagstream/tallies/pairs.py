"""Histograms of pairs of channels that share their bins, counted in one pass."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from tagstream.block import Block
from tagstream.tallies.bins import exact_division
from tagstream.tallies.kernels import (
    CHUNK,
    fill_close_pairs,
    fill_pairs,
    fill_selected,
    fill_wanted,
)

# Neighbours in reach of a tag up to which going through all channels together is faster than
# two pointers on separate ones: measured, they cross between 0.5 and 1.
SPARSE_NEIGHBOURS = 0.6
SAMPLES = 512  # tags of a piece that are asked for their neighbours


class PairHistograms:
    """Pairs (start, stop) by lag, over pieces of a stream; nothing is paired across a gap.

    pairs: channel indices of start and stop, one pair a histogram; start = stop means ordered
    pairs of distinct tags. number: of channels in the blocks. A pair counts when its later tag
    comes. `counts` is int64, (len(pairs), 2K + 1); the caller may zero it between pieces.

    There are two ways, which give the same integers. Where few tags have another one in reach,
    all channels are gone through together in layers (kernels.fill_close_pairs): that costs
    little more than reading the times, for any number of pairs. Where many have, channels are
    separated and two pointers go over each pair (kernels.fill_pairs): that never meets a pair
    that nobody wants.
    """

    def __init__(
        self, pairs: Sequence[tuple[int, int]], number: int, bins_each_side: int, bin_ps: int
    ) -> None:
        self._pairs, self._number = list(pairs), number
        self._zero_bin = bins_each_side
        self._reach = (2 * bins_each_side + 1) * bin_ps
        self._division = exact_division(bins_each_side, bin_ps)
        # One histogram more for pairs that nobody wants, one bin more for the outermost edge.
        self._all_counts = np.zeros((len(self._pairs) + 1, 2 * bins_each_side + 2), np.int64)
        self.counts = self._all_counts[:-1, :-1]
        self._targets = _targets(self._pairs, number, self._all_counts.shape[1])
        self._candidates = np.empty(CHUNK + 1, np.int64)
        self._wanted = np.zeros(number, np.uint8)
        self._wanted[[channel for pair in self._pairs for channel in pair]] = 1
        # Room for the times of each channel, and of all wanted ones.
        self._rooms = [np.empty(0, np.int64) for _ in range(number + 1)]
        self._wanted_channels = np.empty(0, np.uint8)
        self._old_times: NDArray[np.int64] = np.empty(0, np.int64)
        self._old_channels: NDArray[np.uint8] = np.empty(0, np.uint8)

    def add(self, piece: Block) -> None:
        """Count the pairs whose later tag is in `piece`."""
        if piece.opens:
            self._forget()
        times, channels = self._wanted_tags(piece)
        if times.size:
            if neighbours_in_reach(times, self._reach // 2) <= SPARSE_NEIGHBOURS:
                self.add_sparse(times, channels)
            else:
                self.add_dense(times, channels)
        self._keep_since(piece.end_ps - self._reach // 2, times, channels)

    def add_sparse(self, times: NDArray[np.int64], channels: NDArray[np.uint8]) -> None:
        """Count the pairs of the wanted tags of a piece, and with those before it, in layers."""
        half = self._reach // 2
        head = int(np.searchsorted(times, times[0] + half, side="right"))
        old = self._old_times
        oldest = old[0] if old.size else times[0]
        beyond = np.array([oldest - half - 1], np.int64)  # out of reach of all that follow
        self._fill_close(
            np.concatenate((beyond, old, times[:head])),
            np.concatenate((np.zeros(1, np.uint8), self._old_channels, channels[:head])),
            1 + int(old.size),
        )
        self._fill_close(times, channels, head)

    def add_dense(self, times: NDArray[np.int64], channels: NDArray[np.uint8]) -> None:
        """The same by two pointers: (all starts, new stops) and (new starts, old stops)."""
        old, both = {}, {}
        for channel in np.flatnonzero(self._wanted).tolist():
            room = self._room(channel, self._old_times.size + times.size + 2)
            first = fill_selected(self._old_times, self._old_channels, channel, room)
            more = fill_selected(times, channels, channel, room[first:])
            old[channel], both[channel] = room[:first], room[: first + more]
        for (start, stop), counts in zip(self._pairs, self._all_counts, strict=False):
            new_starts, new_stops = (both[c][old[c].size :] for c in (start, stop))
            fill_pairs(both[start], new_stops, self._division, counts)
            fill_pairs(new_starts, old[stop], self._division, counts)
            if start == stop:
                counts[self._zero_bin] -= new_starts.size  # each tag met itself

    def _room(self, channel: int, size: int) -> NDArray[np.int64]:
        """Room for times of a channel, used again and again: new memory costs time."""
        if self._rooms[channel].size < size:
            self._rooms[channel] = np.empty(size + size // 4, np.int64)
        return self._rooms[channel]

    def _fill_close(
        self, times: NDArray[np.int64], channels: NDArray[np.uint8], first: int
    ) -> None:
        fill_close_pairs(
            times,
            channels,
            first,
            self._division,
            self._reach,
            self._number,
            self._targets,
            self._candidates,
            self._all_counts.ravel(),
        )

    def _wanted_tags(self, piece: Block) -> tuple[NDArray[np.int64], NDArray[np.uint8]]:
        if self._wanted.all():
            return piece.times_ps, piece.channels
        room = piece.times_ps.size + 1
        times = self._room(self._number, room)
        if self._wanted_channels.size < room:
            self._wanted_channels = np.empty(room + room // 4, np.uint8)
        channels = self._wanted_channels
        n = fill_wanted(piece.times_ps, piece.channels, self._wanted, times, channels)
        return times[:n], channels[:n]

    def _keep_since(
        self, oldest_ps: int, times: NDArray[np.int64], channels: NDArray[np.uint8]
    ) -> None:
        """Keep the tags that a later one can still reach."""
        i = int(np.searchsorted(self._old_times, np.int64(oldest_ps)))
        j = int(np.searchsorted(times, np.int64(oldest_ps)))
        self._old_times = np.concatenate((self._old_times[i:], times[j:]))
        self._old_channels = np.concatenate((self._old_channels[i:], channels[j:]))

    def _forget(self) -> None:
        self._old_times = np.empty(0, np.int64)
        self._old_channels = np.empty(0, np.uint8)


def neighbours_in_reach(times_ps: NDArray[np.int64], reach_ps: int) -> float:
    """How many later tags lie within `reach_ps` of a tag, on average over evenly chosen tags.

    Chosen from the tags themselves, so that short dense bursts count as what they cost.
    """
    chosen = np.linspace(0, times_ps.size - 1, min(times_ps.size, SAMPLES)).astype(np.int64)
    last = np.searchsorted(times_ps, times_ps[chosen] + reach_ps, side="right")
    return float(np.mean(last - chosen - 1))


def _targets(pairs: Sequence[tuple[int, int]], number: int, width: int) -> NDArray[np.int64]:
    """What each combination of an earlier and a later channel adds to; see fill_close_pairs."""
    wanted: dict[int, list[tuple[int, int]]] = {}
    for index, (start, stop) in enumerate(pairs):
        wanted.setdefault(start * number + stop, []).append((1, index * width))
        wanted.setdefault(stop * number + start, []).append((-1, index * width))
    orders = max(map(len, wanted.values()))
    targets = np.zeros((2, orders, number**2), np.int64)
    targets[1] = len(pairs) * width
    for combination, found in wanted.items():
        for order, (sign, place) in enumerate(found):
            targets[:, order, combination] = sign, place
    return targets
