"""Kernels of the tallies: counting loops over integers.

They fill arrays that the caller owns and add to what is there. Each has a slow twin in
tests/naive.py.

Array positions are cast to unsigned: a signed one makes the compiler allow for counting from
the end, which costs a third of the speed here.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tagstream.compiled import kernel

CHUNK = 1024  # tags whose candidates are kept at a time: they stay in the nearest cache
FEW_CHANNELS = 8  # up to which counting channel by channel is faster
TWO = 2  # steps of a pointer that are taken without asking whether they are needed
FOUR = 4  # pairs that are taken together
LONG = 1 << 60  # starts further apart are not taken together: their lags could not be doubled
GROUP = 8  # tags that are passed over together when none has a close neighbour


@kernel
def fill_selected(
    times_ps: NDArray[np.int64],
    channels: NDArray[np.uint8],
    channel: int,
    out_times: NDArray[np.int64],
) -> int:
    """Copy the times of one channel; return how many there are.

    times_ps, channels: n. out_times: int64, at least n + 1 long (the copy is written before it
    is known to be wanted, so that the loop has no branch).
    """
    count = 0
    for i in range(times_ps.size):
        out_times[np.uint64(count)] = times_ps[i]
        count += channels[i] == channel
    return count


@kernel
def fill_wanted(
    times_ps: NDArray[np.int64],
    channels: NDArray[np.uint8],
    wanted: NDArray[np.uint8],
    out_times: NDArray[np.int64],
    out_channels: NDArray[np.uint8],
) -> int:
    """Copy the tags of the wanted channels; return how many there are.

    times_ps, channels: n. wanted: uint8 by channel, 1 or 0. out_*: at least n + 1 long.
    """
    count = 0
    for i in range(times_ps.size):
        out_times[np.uint64(count)] = times_ps[i]
        out_channels[np.uint64(count)] = channels[i]
        count += int(wanted[channels[i]])
    return count


@kernel
def fill_counts(channels: NDArray[np.uint8], counts: NDArray[np.int64]) -> None:
    """Add the number of tags of each channel to `counts` (int64, by channel).

    Of few channels each is compared with all tags, many at a time; that beats one counter after
    the other, which waits for itself where one channel is frequent.
    """
    if counts.size <= FEW_CHANNELS:
        for channel in range(counts.size):
            found = 0
            for i in range(channels.size):
                found += int(channels[i] == channel)
            counts[channel] += found
    else:
        for i in range(channels.size):
            counts[np.uint64(channels[i])] += 1


@kernel
def fill_periods(
    times_ps: NDArray[np.int64], last: NDArray[np.int64], sums: NDArray[np.int64]
) -> None:
    """Sum the intervals between neighbouring tags of one channel.

    times_ps: int64, n, non-decreasing. last: int64 [1 if there is a tag before these, its time,
    1 if there is an interval before it, its length], carried from call to call. sums: int64
    [sum of intervals in ps, their number, how many are longer than 1.5 times the one before],
    added to.
    """
    size = times_ps.size
    for i in range(min(size, 2)):
        if last[0] == 1:
            interval = times_ps[i] - last[1]
            sums[0] += interval
            sums[1] += 1
            if last[2] == 1 and 2 * interval > 3 * last[3]:
                sums[2] += 1
            last[2] = 1
            last[3] = interval
        last[0] = 1
        last[1] = times_ps[i]
    if size <= 2:
        return
    missed = 0
    for i in range(2, size):
        before = times_ps[np.uint64(i - 1)] - times_ps[np.uint64(i - 2)]
        missed += int(2 * (times_ps[np.uint64(i)] - times_ps[np.uint64(i - 1)]) > 3 * before)
    sums[0] += times_ps[size - 1] - times_ps[1]
    sums[1] += size - 2
    sums[2] += missed
    last[1] = times_ps[size - 1]
    last[2] = 1
    last[3] = times_ps[size - 1] - times_ps[size - 2]


@kernel
def bin_of(twice: int, divisor: int, multiplier: int, shift: int) -> np.uint64:
    """twice // divisor for twice >= 0, by multiplication where that is exact.

    divisor, multiplier, shift: of `bins.exact_division`; multiplier 0 divides.
    """
    if multiplier != 0:
        return np.uint64((twice * multiplier) >> shift)
    return np.uint64(twice) // np.uint64(divisor)


@kernel
def fill_pairs_singly(
    starts_ps: NDArray[np.int64],
    stops_ps: NDArray[np.int64],
    division: NDArray[np.int64],
    counts: NDArray[np.int64],
) -> None:
    """The same as `fill_pairs`, start by start; for bins that no multiplication finds.

    Two pointers: of each start the first stop in reach is found, and those that follow are taken
    FOUR at a time; what is out of reach among the four goes to the last entry, since leaving it
    out would be a branch that nothing foretells. Cost: one pass over both, a step per pair.
    """
    divisor, multiplier, places = division[0], division[1], division[2]
    scrap = counts.size - 1
    reach = scrap * (divisor // 2)  # twice the distance from zero to the outer edges
    # A lag is inside when -reach <= 2 lag < reach, that is -least <= lag < most: lags are only
    # doubled once they are known to be small.
    least, most = reach // 2, (reach + 1) // 2
    size = stops_ps.size
    low = 0
    for i in range(starts_ps.size):
        start = starts_ps[i]
        for _ in range(TWO):
            low += int(low < size and stops_ps[np.uint64(low)] - start < -least)
        while low < size and stops_ps[np.uint64(low)] - start < -least:
            low += 1
        j = low
        while j + FOUR <= size:
            for g in range(FOUR):
                lag = min(stops_ps[np.uint64(j + g)] - start, most)  # most falls in the last entry
                counts[bin_of(2 * lag + reach, divisor, multiplier, places)] += 1
            j += FOUR
            if stops_ps[np.uint64(j - 1)] - start >= most:
                break
        else:
            while j < size:
                lag = stops_ps[np.uint64(j)] - start
                if lag >= most:
                    break
                counts[bin_of(2 * lag + reach, divisor, multiplier, places)] += 1
                j += 1


@kernel
def fill_pairs(
    starts_ps: NDArray[np.int64],
    stops_ps: NDArray[np.int64],
    division: NDArray[np.int64],
    counts: NDArray[np.int64],
) -> None:
    """Add all pairs of a start and a stop to the histogram of their lag, stop - start.

    starts_ps, stops_ps: int64, non-decreasing. division: of 2 bin, see `bin_of`. counts: int64,
    2K + 2; bin k = -K..K is counts[k + K] and holds the lags with
    floor((2 lag + bin) / (2 bin)) = k: half-open, centred on k bin. Lags outside all bins are
    not counted; what the last entry holds means nothing. Doubled lags keep everything whole.

    Two pointers: FOUR starts at a time meet all stops in reach of the first or the last of them.
    A pair that is out of reach goes to the last entry, since leaving it out would be a branch
    that nothing foretells. Doubled lags are taken modulo 2^64, where those out of reach on the
    lower side are large: one comparison serves both sides. Cost: one pass over both, a step per
    pair.
    """
    if division[1] == 0:
        fill_pairs_singly(starts_ps, stops_ps, division, counts)
        return
    multiplier, places = np.uint64(division[1]), np.uint64(division[2])
    reach = (counts.size - 1) * (division[0] // 2)
    least, most = reach // 2, (reach + 1) // 2
    top, size = np.uint64(2 * most + reach), stops_ps.size
    low, high = 0, 0
    whole = starts_ps.size - starts_ps.size % FOUR
    for i in range(0, whole, FOUR):
        first, last = starts_ps[np.uint64(i)], starts_ps[np.uint64(i + FOUR - 1)]
        if np.uint64(last) - np.uint64(first) > np.uint64(LONG):
            fill_pairs_singly(starts_ps[i : i + FOUR], stops_ps[low:], division, counts)
            continue
        while low < size and stops_ps[np.uint64(low)] - first < -least:
            low += 1
        high = max(high, low)
        while high < size and stops_ps[np.uint64(high)] - last < most:
            high += 1
        a, d = reach - 2 * first, reach - 2 * last
        b, c = reach - 2 * starts_ps[np.uint64(i + 1)], reach - 2 * starts_ps[np.uint64(i + 2)]
        for j in range(low, high):
            stop = 2 * stops_ps[np.uint64(j)]
            of_a = (min(np.uint64(stop + a), top) * multiplier) >> places
            of_b = (min(np.uint64(stop + b), top) * multiplier) >> places
            of_c = (min(np.uint64(stop + c), top) * multiplier) >> places
            of_d = (min(np.uint64(stop + d), top) * multiplier) >> places
            counts[of_a] += 1
            counts[of_b] += 1
            counts[of_c] += 1
            counts[of_d] += 1
    fill_pairs_singly(starts_ps[whole:], stops_ps[low:], division, counts)


@kernel
def fill_close_pairs(
    times_ps: NDArray[np.int64],
    channels: NDArray[np.uint8],
    first: int,
    division: NDArray[np.int64],
    reach: int,
    number: int,
    targets: NDArray[np.int64],
    candidates: NDArray[np.int64],
    counts: NDArray[np.int64],
) -> None:
    """Add to many histograms all pairs whose later tag is at `first` or after it.

    times_ps, channels: n tags in order, of all channels together. No tag from `first` on may
    reach the tag at index 0: times_ps[first] - times_ps[0] > reach // 2. division: of 2 bin,
    see `bin_of`. reach: twice the distance from lag zero to the outer edges, (2K + 1) bin.
    number: of channels. targets: int64, (2, orders, number**2): for a pair whose earlier tag is
    of channel a and whose later one is of channel b, at a number + b, the sign of its lag and the
    index of bin -K in `counts`; a pair that nobody wants has sign 0 and a place of its own.
    candidates: int64, at least CHUNK + 1 long. counts: int64, flat, 2K + 2 bins a histogram: the
    last takes lags on the outermost upper edge, which belong to no bin.

    Tags are gone through in layers: first those whose next neighbour before them is close enough,
    of these the ones whose second neighbour is, and so on. No layer has a branch that depends on
    the data, and groups of GROUP tags without a close neighbour are passed over at once. Cost:
    one pass, plus a step per pair of any two channels: for light with few neighbours in reach.
    """
    half = reach // 2
    size = times_ps.size
    for begin in range(first, size, CHUNK):
        end = min(begin + CHUNK, size)
        found = 0
        j = begin
        while j + GROUP <= end:
            close = 0
            for g in range(GROUP):
                close |= int(times_ps[np.uint64(j + g)] - times_ps[np.uint64(j + g - 1)] <= half)
            if close != 0:
                for g in range(GROUP):
                    candidates[np.uint64(found)] = j + g
                    found += times_ps[np.uint64(j + g)] - times_ps[np.uint64(j + g - 1)] <= half
            j += GROUP
        while j < end:
            candidates[np.uint64(found)] = j
            found += times_ps[np.uint64(j)] - times_ps[np.uint64(j - 1)] <= half
            j += 1
        distance = 1
        while found > 0:
            left = 0
            for q in range(found):
                later = candidates[np.uint64(q)]
                twice = 2 * (times_ps[np.uint64(later)] - times_ps[np.uint64(later - distance)])
                pair = np.uint64(
                    np.int64(channels[np.uint64(later - distance)]) * number
                    + np.int64(channels[np.uint64(later)])
                )
                for order in range(targets.shape[1]):
                    lag = reach + targets[0, order, pair] * twice
                    # Read anew each time: kept in registers they push out what the loop needs more.
                    k = bin_of(lag, division[0], division[1], division[2])
                    counts[np.uint64(targets[1, order, pair]) + k] += 1
                candidates[np.uint64(left)] = later
                left += (
                    times_ps[np.uint64(later)] - times_ps[np.uint64(later - distance - 1)] <= half
                )
            found = left
            distance += 1


def warm_up() -> None:
    """Compile every kernel here, or load it, for the types that a run uses."""
    times, channels = np.arange(4, dtype=np.int64), np.zeros(4, np.uint8)
    room, wanted = np.empty(5, np.int64), np.ones(1, np.uint8)
    division, counts = np.array([2, 0, 0], np.int64), np.zeros(4, np.int64)
    fill_selected(times, channels, 0, room)
    fill_wanted(times, channels, wanted, room, np.empty(5, np.uint8))
    fill_counts(channels, counts)
    fill_periods(times, np.zeros(4, np.int64), np.zeros(3, np.int64))
    fill_pairs(times, times, division, counts)
    targets, candidates = np.zeros((2, 1, 1), np.int64), np.empty(CHUNK + 1, np.int64)
    fill_close_pairs(times, channels, 4, division, 3, 1, targets, candidates, counts)
