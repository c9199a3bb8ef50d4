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
KEPT, LATE, JUMP, OVERFLOW, OUTSIDE, UNLISTED = range(6)
COUNT_SIZE = 6

CONFIRMATIONS = 16  # tags that must agree with a first one before a jump in time is believed
UNLISTED_INPUT = 255  # entry of the table of channels for an input without a channel


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
    begin, end] in ps, the interval being that of which the source vouches (or the whole range).
    channel_of: uint8, by input, UNLISTED_INPUT for none. delays_ps: int64, by channel.
    state: int64 (STATE_SIZE), carried from call to call. pending_*: int64
    (CONFIRMATIONS + 1), tags that are far from all others and not yet believed.
    out_*: at least n + CONFIRMATIONS + 1 long. counts: int64 (COUNT_SIZE), zeroed by the caller;
    counts[KEPT] tags are in out_* on return, counts of drops by reason.

    A tag is late when it lies more than max_disorder before the latest one so far. A tag more
    than max_jump ahead of the latest, or more than max_jump before it, is held; it is believed
    when the next CONFIRMATIONS tags agree with it, and dropped when one agrees with the old
    time. What happens to a tag depends on the tags before it alone.

    Returns the number of tags consumed: n, or fewer when a jump was just confirmed; then the
    caller must end what came before and judge the pending tags again under a new state.
    Cost: one pass.
    """
    disorder, jump, limit, begin, end = rules[0], rules[1], rules[2], rules[3], rules[4]
    latest, started, offset = state[0], state[1], state[2]
    kept = counts[0]
    n = times_ps.size
    for i in range(n):
        t = times_ps[i] + offset
        if t > limit or t < -limit:
            counts[3] += 1
            continue
        if t < begin or t >= end:
            counts[4] += 1
            continue
        if started == 0:
            started = 1
            latest = t
        ahead = t - latest > jump
        back = latest - t > jump
        if state[3] > 0:
            reference = state[4]
            agrees = t >= reference - disorder and t - reference <= jump
            if (ahead or back) and agrees:
                pending_times[state[3]] = times_ps[i]
                pending_inputs[state[3]] = np.int64(inputs[i])
                state[3] += 1
                state[4] = max(reference, t)
                if state[3] > CONFIRMATIONS:
                    state[0], state[1] = latest, started
                    counts[0] = kept
                    return i + 1
                continue
            counts[1 if state[5] == 1 else 2] += state[3]
            state[3] = 0
        if ahead or back:
            pending_times[0] = times_ps[i]
            pending_inputs[0] = np.int64(inputs[i])
            state[3] = 1
            state[4] = t
            state[5] = 1 if back else 0
            continue
        if t > latest:
            latest = t
        elif latest - t > state[6]:
            state[6] = latest - t
        if latest - t > disorder:
            counts[1] += 1
            continue
        number = np.int64(inputs[i])
        channel = channel_of[number] if number < channel_of.size else np.uint8(UNLISTED_INPUT)
        if channel == UNLISTED_INPUT:
            counts[5] += 1
            continue
        out_times[kept] = t + delays_ps[channel]
        out_channels[kept] = channel
        kept += 1
    state[0], state[1] = latest, started
    counts[0] = kept
    return n


@kernel
def fill_ordered(times_ps: NDArray[np.int64], channels: NDArray[np.uint8], most_moves: int) -> int:
    """Sort tags in place by time, stably, by insertion; good for nearly ordered tags.

    times_ps, channels: n, rearranged. Gives up once more than `most_moves` moves were made and
    returns the number of tags then in order (a permutation that keeps equal times in arrival
    order is still in place, so a stable sort can go on from it); returns n when done.
    """
    moves = 0
    for i in range(1, times_ps.size):
        t = times_ps[i]
        if t >= times_ps[i - 1]:
            continue
        channel = channels[i]
        j = i
        while j > 0 and times_ps[j - 1] > t:
            times_ps[j] = times_ps[j - 1]
            channels[j] = channels[j - 1]
            j -= 1
        times_ps[j] = t
        channels[j] = channel
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
