"""Kernels of ordering: insertion, dealing out to intervals, merging of runs.

They fill arrays that the caller owns. Each has a slow twin in tests/naive.py.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tagstream.compiled import kernel

FIRST, LAST = -(1 << 63), (1 << 63) - 1  # before and after every time


@kernel
def fill_apart(
    times_ps: NDArray[np.int64],
    channels: NDArray[np.uint8],
    chosen: NDArray[np.uint8],
    out_times: NDArray[np.int64],
    out_channels: NDArray[np.uint8],
    rest_times: NDArray[np.int64],
    rest_channels: NDArray[np.uint8],
) -> int:
    """Deal tags out to two runs by channel; return how many are of the chosen channels.

    times_ps, channels: n. chosen: uint8 by channel, 1 or 0. out_*, rest_*: at least n + 2 long;
    the first entry is left free for `fill_merged`. Each tag is written to both, so that the
    loop has no branch.
    """
    a, b = 1, 1
    for i in range(times_ps.size):
        t, channel = times_ps[np.uint64(i)], channels[np.uint64(i)]
        out_times[np.uint64(a)] = t
        out_channels[np.uint64(a)] = channel
        rest_times[np.uint64(b)] = t
        rest_channels[np.uint64(b)] = channel
        is_chosen = int(chosen[channel])
        a += is_chosen
        b += 1 - is_chosen
    return a - 1


@kernel
def fill_merged(
    times_a: NDArray[np.int64],
    channels_a: NDArray[np.uint8],
    times_b: NDArray[np.int64],
    channels_b: NDArray[np.uint8],
    out_times: NDArray[np.int64],
    out_channels: NDArray[np.uint8],
) -> None:
    """Merge two runs of tags in order; of equal times those of a come first.

    times_a, channels_a: m + 2, of which the first and the last are scratch; times_b,
    channels_b: n + 2, likewise. out_*: m + n. From both ends at once, since each step waits for
    the one before it. Cost: one pass.
    """
    times_a[0] = times_b[0] = FIRST
    times_a[times_a.size - 1] = times_b[times_b.size - 1] = LAST
    low_a, low_b = 1, 1
    high_a, high_b = times_a.size - 2, times_b.size - 2
    size = out_times.size
    for i in range(size // 2):
        a, b = times_a[np.uint64(low_a)], times_b[np.uint64(low_b)]
        is_b = b < a
        out_times[np.uint64(i)] = min(a, b)
        channel = channels_a[np.uint64(low_a)]
        out_channels[np.uint64(i)] = channels_b[np.uint64(low_b)] if is_b else channel
        low_b += int(is_b)
        low_a += 1 - int(is_b)
        a, b = times_a[np.uint64(high_a)], times_b[np.uint64(high_b)]
        is_a = b < a
        out_times[np.uint64(size - 1 - i)] = max(a, b)
        channel = channels_b[np.uint64(high_b)]
        out_channels[np.uint64(size - 1 - i)] = channels_a[np.uint64(high_a)] if is_a else channel
        high_a -= int(is_a)
        high_b -= 1 - int(is_a)
    if size % 2 == 1:
        a, b = times_a[low_a], times_b[low_b]
        out_times[size // 2] = min(a, b)
        out_channels[size // 2] = channels_b[low_b] if b < a else channels_a[low_a]


@kernel
def fill_bucketed(
    times_ps: NDArray[np.int64],
    channels: NDArray[np.uint8],
    starts: NDArray[np.int32],
    out_times: NDArray[np.int64],
    out_channels: NDArray[np.uint8],
) -> None:
    """Copy tags nearly into order: by narrow intervals of time, in arrival order inside each.

    times_ps, channels: n > 0. starts: int32, scratch, a power of two of intervals plus one.
    out_*: n. Afterwards tags are out of order only among the few of one interval, and equal
    times are in arrival order, so that `fill_ordered` has few moves left. Cost: three passes,
    whatever the disorder.
    """
    least, most = times_ps[0], times_ps[0]
    for t in times_ps:
        least = min(least, t)
        most = max(most, t)
    shift = np.int64(0)
    while ((most - least) >> shift) >= starts.size - 1:
        shift += 1
    starts[:] = 0
    for t in times_ps:
        starts[np.uint64(((t - least) >> shift) + 1)] += 1
    total = starts[0]
    for i in range(1, starts.size):
        total += starts[i]
        starts[i] = total
    for i in range(times_ps.size):
        t = times_ps[i]
        interval = np.uint64((t - least) >> shift)
        place = starts[interval]
        starts[interval] = place + 1
        out_times[np.uint64(place)] = t
        out_channels[np.uint64(place)] = channels[i]


@kernel
def fill_ordered(times_ps: NDArray[np.int64], channels: NDArray[np.uint8], most_moves: int) -> int:
    """Sort tags in place by time, stably, by insertion; good for nearly ordered tags.

    times_ps, channels: n, rearranged. Gives up once more than `most_moves` moves were made and
    returns the number of tags then in order (a permutation that keeps equal times in arrival
    order is still in place, so a stable sort can go on from it); returns n when done.
    """
    moves = 0
    before = times_ps[0] if times_ps.size > 0 else 0
    for i in range(1, times_ps.size):
        t = times_ps[i]
        if t >= before:
            before = t
            continue
        channel = channels[i]
        j = i
        while j > 0 and times_ps[np.uint64(j - 1)] > t:
            times_ps[np.uint64(j)] = times_ps[np.uint64(j - 1)]
            channels[np.uint64(j)] = channels[np.uint64(j - 1)]
            j -= 1
        times_ps[np.uint64(j)] = t
        channels[np.uint64(j)] = channel
        moves += i - j
        if moves > most_moves:
            return i + 1
    return int(times_ps.size)


def warm_up() -> None:
    """Compile every kernel here, or load it, for the types that a run uses."""
    times, channels = np.arange(4, dtype=np.int64), np.zeros(4, np.uint8)
    starts = np.zeros(9, np.int32)
    fill_bucketed(times, channels, starts, np.empty_like(times), np.empty_like(channels))
    fill_ordered(times, channels, 8)
    room, more = np.empty((2, 6), np.int64), np.empty((2, 6), np.uint8)
    fill_apart(times, channels, np.ones(256, np.uint8), room[0], more[0], room[1], more[1])
    fill_merged(room[0], more[0], room[1, :2], more[1, :2], times, channels)
