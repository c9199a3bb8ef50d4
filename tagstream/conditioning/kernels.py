"""Kernels of conditioning: judge in arrival order, cut dead time.

They see arrays and integers only and fill arrays that the caller owns. Each has a slow twin in
tests/naive.py.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from tagstream.compiled import kernel

# Slots of the state of `fill_judged`, int64. SHUFFLED: the latest time when last a tag came
# before it; the tags after that moment came in order.
LATEST, STARTED, OFFSET, PENDING, PENDING_LATEST, PENDING_BACK, DISORDER, SHUFFLED = range(8)
STATE_SIZE = 8
# Slots of its counts, int64.
KEPT, LATE, JUMP, OVERFLOW, OUTSIDE, UNLISTED, UNORDERED = range(7)
COUNT_SIZE = 7

CONFIRMATIONS = 16  # tags that must agree with a first one before a jump in time is believed
UNLISTED_INPUT = 255  # entry of the table of channels for an input without a channel
CHUNK = 1024  # tags that are looked at together: they stay in the nearest cache
HALF_RANGE = 1 << 62  # sums and differences of two times below this stay in int64


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
    """Take tags from `first` on, one by one, while nothing is wrong with their times.

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
    shuffled = state[7]
    last = out_times[np.uint64(kept - 1)] if kept > 0 else -limit - limit // 256
    i = first
    size = times_ps.size
    while i < size:
        t = times_ps[np.uint64(i)]
        if t > later(latest, jump, limit) or t < latest - disorder or t < begin or t >= end:
            break
        largest = max(largest, latest - t)
        shuffled = latest + offset if t < latest else shuffled
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
    state[0], state[6], state[7] = latest + offset, largest, shuffled
    counts[0], counts[5], counts[6] = kept, unlisted, unordered
    return i


@kernel
def is_ordered(times_ps: NDArray[np.int64]) -> bool:
    """Whether no time is before the one before it. times_ps: int64, n."""
    steps_back = 0
    for i in range(1, times_ps.size):
        steps_back += int(times_ps[np.uint64(i)] < times_ps[np.uint64(i - 1)])
    return steps_back == 0


@kernel
def largest_disorder(times_ps: NDArray[np.int64], latest_ps: int) -> int:
    """How far a tag lies before the latest one so far, at most; 0 if all are in order.

    times_ps: int64, n. latest_ps: of the tags before. No two of them may be HALF_RANGE apart.
    """
    # Each step waits for the one before it. So four quarters go side by side; what was the latest
    # before each is a maximum, which waits for nothing.
    quarter = times_ps.size // 4
    latest_a = latest = latest_ps
    for i in range(quarter):
        latest = max(latest, times_ps[np.uint64(i)])
    latest_b = latest
    for i in range(quarter, 2 * quarter):
        latest = max(latest, times_ps[np.uint64(i)])
    latest_c = latest
    for i in range(2 * quarter, 3 * quarter):
        latest = max(latest, times_ps[np.uint64(i)])
    latest_d = latest
    a = b = c = d = np.int64(0)
    for i in range(quarter):
        t = times_ps[np.uint64(i)]
        a = max(a, latest_a - t)
        latest_a = max(latest_a, t)
        t = times_ps[np.uint64(i + quarter)]
        b = max(b, latest_b - t)
        latest_b = max(latest_b, t)
        t = times_ps[np.uint64(i + 2 * quarter)]
        c = max(c, latest_c - t)
        latest_c = max(latest_c, t)
        t = times_ps[np.uint64(i + 3 * quarter)]
        d = max(d, latest_d - t)
        latest_d = max(latest_d, t)
    for t in times_ps[4 * quarter :]:
        d = max(d, latest_d - t)
        latest_d = max(latest_d, t)
    return int(max(max(a, b), max(c, d)))


@kernel
def fill_moved(
    times_ps: NDArray[np.int64],
    inputs: NDArray[Any],
    shift_ps: int,
    channel_of: NDArray[np.uint8],
    delays_ps: NDArray[np.int64],
    out_times: NDArray[np.int64],
    out_channels: NDArray[np.uint8],
) -> int:
    """Give tags their channel, the delay of that channel and a common shift.

    times_ps, inputs: n. shift_ps: added to all. out_*: at least n long. Tags of inputs without
    a channel are left out. Returns how many there are. Each step goes over all tags before the
    next one does, so that several can be taken at once.
    """
    n = times_ps.size
    unlisted = 0
    for i in range(n):
        channel = channel_of[inputs[np.uint64(i)]]
        out_channels[np.uint64(i)] = channel
        unlisted += int(channel == UNLISTED_INPUT)
    for i in range(n):
        delay = delays_ps[out_channels[np.uint64(i)]]
        out_times[np.uint64(i)] = times_ps[np.uint64(i)] + (shift_ps + delay)
    if unlisted == 0:
        return n
    kept = 0
    for i in range(n):
        out_times[np.uint64(kept)] = out_times[np.uint64(i)]
        out_channels[np.uint64(kept)] = out_channels[np.uint64(i)]
        kept += int(out_channels[np.uint64(i)] != UNLISTED_INPUT)
    return kept


@kernel
def fill_together(
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
    """The same as `fill_plain`, a CHUNK at a time, while nothing is wrong in the whole chunk.

    Returns the index of the first tag of the chunk that it leaves to be looked at one by one.
    """
    limit, offset = rules[2], state[2]
    size = times_ps.size
    begin = first
    while begin < size:
        chunk = times_ps[begin : begin + CHUNK]
        least, most = chunk[0], chunk[chunk.size - 1]
        ordered = is_ordered(chunk)
        if not ordered:
            for t in chunk:
                least = min(least, t)
                most = max(most, t)
        if least < -HALF_RANGE // 2 or most > HALF_RANGE // 2 or abs(offset) > HALF_RANGE // 2:
            break
        latest = state[0] - offset
        far = most > latest + min(rules[1], HALF_RANGE) or latest < -HALF_RANGE // 2
        if far or least + offset < rules[3] or most + offset >= rules[4]:
            break
        if most + offset > limit or least + offset < -limit:
            break
        disorder = max(latest - least, 0) if ordered else largest_disorder(chunk, latest)
        if disorder > rules[0]:
            break
        kept = counts[0]
        more = fill_moved(
            chunk,
            inputs[begin : begin + CHUNK],
            offset,
            channel_of,
            delays_ps,
            out_times[kept:],
            out_channels[kept:],
        )
        counts[6] |= int(not is_ordered(out_times[max(kept - 1, 0) : kept + more]))
        counts[0] += more
        counts[5] += chunk.size - more
        state[0] = max(latest, most) + offset
        state[6] = max(state[6], disorder)
        state[7] = state[0] if disorder > 0 else state[7]
        begin += CHUNK
    return min(begin, size)


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
            out = (out_times, out_channels, counts)
            i = fill_together(times_ps, inputs, i, rules, channel_of, delays_ps, state, *out)
            stop = min(i + CHUNK, size)
            few = times_ps[:stop]
            i = fill_plain(few, inputs, i, rules, channel_of, delays_ps, state, *out)
            if i == stop:
                continue
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
    fill_dead_time_cut(times, channels, delays, np.zeros(256, np.int64), np.zeros(256, np.uint8))
