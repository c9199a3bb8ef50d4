"""Kernels of the recording: times to groups of short offsets, and back.

They see arrays and integers only and fill arrays that the caller owns. Each has a slow twin in
tests/naive.py.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from tagstream.compiled import kernel

CHUNK = 256  # tags that are looked at together
LARGEST_OFFSET_PS = 2**32 - 1


@kernel
def fill_groups(
    times_ps: NDArray[np.int64],
    beyond_ps: int,
    zeros_ps: NDArray[np.int64],
    starts: NDArray[np.int64],
    offsets_ps: NDArray[np.uint32],
    extent_ps: NDArray[np.int64],
) -> int:
    """Cut times into groups of consecutive tags whose spread fits uint32; return how many.

    times_ps: n, any order; outside -beyond_ps..beyond_ps they are stored as the nearer of the
    two. beyond_ps: at most 2**63 - 2**32, so that no sum here overflows. zeros_ps, starts: at
    least n long; the smallest time of each group and the index of its first tag. offsets_ps: at
    least n long; time less the zero of its group. extent_ps: [lowest, highest], widened by each
    group that lies wholly inside +-beyond_ps. A group is as long as it can be. Cost: two passes.
    """
    n = times_ps.size
    spread = np.int64(LARGEST_OFFSET_PS)
    groups = 0
    first = 0
    while first < n:
        low = min(max(times_ps[first], -beyond_ps), beyond_ps)
        high = low
        last = first + 1
        while last < n:  # many tags at a time, as long as all of them fit into the group
            least = most = times_ps[last]
            for t in times_ps[last : last + CHUNK]:
                least = min(least, t)
                most = max(most, t)
            least = min(max(least, -beyond_ps), beyond_ps)
            most = min(max(most, -beyond_ps), beyond_ps)
            if most > low + spread or least < high - spread or most - least > spread:
                break
            low, high = min(low, least), max(high, most)
            last = min(last + CHUNK, n)
        while last < n:
            t = min(max(times_ps[last], -beyond_ps), beyond_ps)
            if t > low + spread or t < high - spread:
                break
            low = min(low, t)
            high = max(high, t)
            last += 1
        for i in range(first, last):
            t = min(max(times_ps[np.uint64(i)], -beyond_ps), beyond_ps)
            offsets_ps[np.uint64(i)] = np.uint32(t - low)
        zeros_ps[groups] = low
        starts[groups] = first
        if low > -beyond_ps and high < beyond_ps:
            extent_ps[0] = min(extent_ps[0], low)
            extent_ps[1] = max(extent_ps[1], high)
        groups += 1
        first = last
    return groups


@kernel
def fill_times(
    offsets_ps: NDArray[Any],
    zeros_ps: NDArray[np.int64],
    starts: NDArray[np.int64],
    first: int,
    limit_ps: int,
    times_ps: NDArray[np.int64],
) -> None:
    """Times of n consecutive tags from their offsets and the groups they lie in.

    offsets_ps: uint32 or int64, n, within +-(limit_ps + 1); those of the tags first,
    first + 1 ... of the file. zeros_ps, starts: of m >= 1 groups, starts non-decreasing and
    starts[0] <= first; the last group has no end. times_ps: int64, at least n long. A time, or
    an offset, beyond +-limit_ps becomes limit_ps + 1 or its negative. Cost: one pass.
    """
    n = offsets_ps.size
    for group in range(starts.size):
        begin = max(starts[group] - first, 0)
        end = n if group + 1 == starts.size else min(starts[group + 1] - first, n)
        zero = min(max(zeros_ps[group], -limit_ps - 1), limit_ps + 1)
        most = limit_ps - max(zero, 0)  # what an offset may be: no sum here overflows
        least = -limit_ps - min(zero, 0)
        low = high = np.int64(0)
        for i in range(begin, end):
            low = min(low, np.int64(offsets_ps[np.uint64(i)]))
            high = max(high, np.int64(offsets_ps[np.uint64(i)]))
        if least <= low and high <= most:  # as nearly always: no tag needs a look of its own
            for i in range(begin, end):
                times_ps[np.uint64(i)] = zero + np.int64(offsets_ps[np.uint64(i)])
            continue
        for i in range(begin, end):
            offset = np.int64(offsets_ps[i])
            if offset > most:
                times_ps[i] = limit_ps + 1
            elif offset < least:
                times_ps[i] = -limit_ps - 1
            else:
                times_ps[i] = zero + offset
