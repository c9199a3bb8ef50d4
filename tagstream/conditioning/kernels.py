"""Kernels of conditioning: judge in arrival order, order in time, cut dead time.

They see arrays and integers only and fill arrays that the caller owns. Each has a slow twin in
tests/naive.py.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from tagstream.compiled import kernel

# Slots of the state of `fill_judged`, int64.
LATEST, STARTED, OFFSET, PENDING, PENDING_LATEST, PENDING_BACK, DISORDER = range(7)
STATE_SIZE = 7
# Slots of its counts, int64.
KEPT, LATE, JUMP, OVERFLOW, OUTSIDE, UNLISTED, UNORDERED = range(7)
COUNT_SIZE = 7

CONFIRMATIONS = 16  # tags that must agree with a first one before a jump in time is believed
UNLISTED_INPUT = 255  # entry of the table of channels for an input without a channel


@kernel
def later(time_ps: int, by_ps: int, limit_ps: int) -> int:
    """time + by, but not past the limit: the sum could leave int64."""
    return time_ps + by_ps if time_ps < limit_ps - by_ps else limit_ps


@kernel
def fill_plain(
    times_ps: NDArray[np.int64],
    inputs: NDArray[Any],
    first: int,
    rules: NDArray[np.int64],
    channel_of: NDArray[np.uint8],
    delays_ps: NDArray[np.int64],
    state: NDArray[np.int64],
    out_times: NDArray[np.int64],
    out_channels: NDArray[np.uint8],
    counts: NDArray[np.int64],
) -> int:
    """Take tags from `first` on while nothing is wrong with their times.

    Arguments as in `fill_judged`. Returns the index of the first tag that is late, far from the
    others or outside the interval, else the number of tags. Cost: one pass without rare cases.
    """
    disorder, jump, limit = rules[0], rules[1], rules[2]
    offset = state[2]
    # Raw times, bounded so that no sum or difference leaves int64.
    begin, end = max(rules[3], -limit), min(rules[4], limit + 1)
    begin = begin - offset if offset <= 0 or begin >= offset - limit else -limit
    end = end - offset if offset >= 0 or end <= limit + offset else limit + 1
    latest = state[0] - offset
    largest, kept, unlisted, unordered = state[6], counts[0], counts[5], counts[6]
    last = out_times[np.uint64(kept - 1)] if kept > 0 else -limit - limit // 256
    i = first
    size = times_ps.size
    while i < size:
        t = times_ps[np.uint64(i)]
        if t > later(latest, jump, limit) or t < latest - disorder or t < begin or t >= end:
            break
        largest = max(largest, latest - t)
        latest = max(latest, t)
        channel = channel_of[inputs[np.uint64(i)]]
        listed = channel != UNLISTED_INPUT
        moved = t + offset + delays_ps[channel]
        out_times[np.uint64(kept)] = moved
        out_channels[np.uint64(kept)] = channel
        unordered |= np.int64(listed & (moved < last))
        last = moved if listed else last
        kept += np.int64(listed)
        unlisted += 1 - np.int64(listed)
        i += 1
    state[0], state[6] = latest + offset, largest
    counts[0], counts[5], counts[6] = kept, unlisted, unordered
    return i


@kernel
def fill_judged(
    times_ps: NDArray[np.int64],
    inputs: NDArray[Any],
    rules: NDArray[np.int64],
    channel_of: NDArray[np.uint8],
    delays_ps: NDArray[np.int64],
    state: NDArray[np.int64],
    pending_times: NDArray[np.int64],
    pending_inputs: NDArray[np.int64],
    out_times: NDArray[np.int64],
    out_channels: NDArray[np.uint8],
    counts: NDArray[np.int64],
) -> int:
    """Judge tags in arrival order; the good ones get their channel and delay.

    times_ps, inputs: n tags in arrival order. rules: int64 [max_disorder, max_jump, limit,
    begin, end] in ps and 1 if a source vouches for the interval (else it is the whole range).
    channel_of: uint8, one entry for each value that the type of `inputs` can have,
    UNLISTED_INPUT for none. delays_ps: int64, 256, by channel. state: int64 (STATE_SIZE),
    carried from call to call. pending_*: int64 (CONFIRMATIONS + 1), tags that are far from all
    others and not yet believed. out_*: room for n more tags than the counts[KEPT] that they
    already hold. counts: int64 (COUNT_SIZE), otherwise zeroed by the caller; on return
    counts[KEPT] tags are in out_*, counts[UNORDERED] says whether one is before the one before
    it, the others count drops by reason.

    A tag is late when it lies more than max_disorder before the latest one so far. A tag more
    than max_jump ahead of the latest, or more than max_jump before it, is held; it is believed
    when the next CONFIRMATIONS tags agree with it, and dropped when one agrees with the old
    time. Where a source vouches for the interval a long pause is no fault, so there a tag agrees
    if only it is not before the held ones. What happens to a tag depends on the tags before it
    alone.

    Returns the number of tags consumed: n, or fewer when a jump was just confirmed; then the
    caller must end what came before and judge the pending tags again under a new state.
    Cost: one pass.
    """
    disorder, jump, limit, begin, end = rules[0], rules[1], rules[2], rules[3], rules[4]
    vouched = rules[5] == 1
    i = 0
    size = times_ps.size
    while i < size:
        if state[1] == 1 and state[3] == 0:
            i = fill_plain(
                times_ps,
                inputs,
                i,
                rules,
                channel_of,
                delays_ps,
                state,
                out_times,
                out_channels,
                counts,
            )
            if i == size:
                break
        t, offset = times_ps[i], state[2]
        beyond = t > limit or t < -limit
        if beyond or (offset > 0 and t > limit - offset) or (offset < 0 and t < -limit - offset):
            counts[3] += 1
            i += 1
            continue
        t += offset
        if t < begin or t >= end:
            counts[4] += 1
            i += 1
            continue
        if state[1] == 0:
            state[0], state[1] = t, 1
            if state[3] == 0:
                continue  # the first tag is plain by its own measure
        far = t > later(state[0], jump, limit) or t < state[0] - jump
        if state[3] > 0:
            near = t >= state[4] - disorder and (vouched or t <= later(state[4], jump, limit))
            if far and near:
                pending_times[state[3]] = times_ps[i]
                pending_inputs[state[3]] = np.int64(inputs[i])
                state[3] += 1
                state[4] = max(state[4], t)
                i += 1
                if state[3] > CONFIRMATIONS:
                    return i
                continue
            counts[1 if state[5] == 1 else 2] += state[3]
            state[3] = 0
        if far:
            pending_times[0] = times_ps[i]
            pending_inputs[0] = np.int64(inputs[i])
            state[3], state[4] = 1, t
            state[5] = 1 if t < state[0] else 0
            i += 1
        elif state[0] - t > disorder:
            state[6] = max(state[6], state[0] - t)
            counts[1] += 1
            i += 1
        # else the tag is plain again: the loop takes it with those that follow
    return i


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


@kernel
def fill_dead_time_cut(
    times_ps: NDArray[np.int64],
    channels: NDArray[np.uint8],
    dead_times_ps: NDArray[np.int64],
    last_kept_ps: NDArray[np.int64],
    ever_kept: NDArray[np.uint8],
) -> int:
    """Move the tags that no dead time hides to the front; return how many there are.

    times_ps (non-decreasing), channels: n, rearranged. dead_times_ps: int64, by channel; a tag
    closer than this to the last kept one of its channel is dropped. last_kept_ps, ever_kept:
    by channel, carried from call to call.
    """
    kept = 0
    for i in range(times_ps.size):
        t = times_ps[i]
        channel = channels[i]
        if ever_kept[channel] and t - last_kept_ps[channel] < dead_times_ps[channel]:
            continue
        last_kept_ps[channel] = t
        ever_kept[channel] = 1
        times_ps[kept] = t
        channels[kept] = channel
        kept += 1
    return kept


def warm_up() -> None:
    """Compile every kernel here, or load it, for the types that a run uses."""
    times, channels = np.arange(4, dtype=np.int64), np.zeros(4, np.uint8)
    delays, state = np.zeros(256, np.int64), np.zeros(STATE_SIZE, np.int64)
    rules = np.array([10, 100, 1 << 61, 0, 1 << 60, 0], np.int64)
    pending = np.zeros((2, CONFIRMATIONS + 1), np.int64)
    for inputs in (channels, channels.astype(np.uint16)):
        fill_judged(
            times,
            inputs,
            rules,
            np.zeros(1 << 8 * inputs.itemsize, np.uint8),
            delays,
            state,
            pending[0],
            pending[1],
            np.empty(4, np.int64),
            np.empty(4, np.uint8),
            np.zeros(COUNT_SIZE, np.int64),
        )
    starts = np.zeros(9, np.int32)
    fill_bucketed(times, channels, starts, np.empty_like(times), np.empty_like(channels))
    fill_ordered(times, channels, 8)
    fill_dead_time_cut(times, channels, delays, np.zeros(256, np.int64), np.zeros(256, np.uint8))
