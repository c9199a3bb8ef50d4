"""Kernels of the recording against their slow twins."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from tagstream.recording.kernels import fill_groups, fill_times
from tagstream.units import BEYOND_LIMIT_PS, TIME_LIMIT_PS
from tests import naive
from tests.strategies import int64

near_limit = st.integers(TIME_LIMIT_PS - 2**33, BEYOND_LIMIT_PS)
any_times = st.lists(
    st.integers(0, 2**33)
    | st.integers(-(2**34), 0)
    | near_limit
    | near_limit.map(lambda t: -t)
    | st.integers(-(2**63), 2**63 - 1),
    max_size=40,
)


def grouped(times: list[int]) -> tuple[list[tuple[int, list[int]]], list[int]]:
    """What the kernel makes of `times`, and the extent it saw."""
    n = len(times)
    zeros, starts, offsets = np.empty(n, np.int64), np.empty(n, np.int64), np.empty(n, np.uint32)
    extent = int64([2**63 - 1, -(2**63)])
    count = fill_groups(int64(times), BEYOND_LIMIT_PS, zeros, starts, offsets, extent)
    bounds = [*starts[:count].tolist(), n]
    parts = [offsets[bounds[g] : bounds[g + 1]].tolist() for g in range(count)]
    return list(zip(zeros[:count].tolist(), parts, strict=True)), extent.tolist()


@given(any_times)
@example([0, 2**32 - 1, 2**32, 1])
@example([2**32, 0, 2**32 - 1])
@example([BEYOND_LIMIT_PS, -BEYOND_LIMIT_PS, BEYOND_LIMIT_PS])
def test_groups_are_those_of_the_slow_twin(times: list[int]) -> None:
    assert grouped(times)[0] == naive.groups(times, BEYOND_LIMIT_PS)


@given(any_times)
def test_times_come_back_exactly(times: list[int]) -> None:
    groups = naive.groups(times, BEYOND_LIMIT_PS)
    zeros = int64([zero for zero, _ in groups])
    lengths = [len(offsets) for _, offsets in groups]
    starts = int64([sum(lengths[:g]) for g in range(len(lengths))])
    offsets = np.array([o for _, part in groups for o in part], np.uint32)
    back = np.empty(len(times), np.int64)
    if times:
        fill_times(offsets, zeros, starts, 0, TIME_LIMIT_PS, back)
    kept = [min(max(t, -BEYOND_LIMIT_PS), BEYOND_LIMIT_PS) for t in times]
    assert back.tolist() == kept == naive.times_of_groups(groups, TIME_LIMIT_PS)


@given(
    st.lists(
        st.tuples(
            st.integers(-(2**63), 2**63 - 1),
            st.lists(st.integers(-BEYOND_LIMIT_PS, BEYOND_LIMIT_PS), max_size=5),
        ),
        min_size=1,
        max_size=5,
    ),
    st.data(),
)
def test_any_part_of_wide_groups_is_decoded_and_saturates(
    groups: list[tuple[int, list[int]]], data: st.DataObject
) -> None:
    """Offsets of another program may be negative, groups empty and zeros absurd."""
    clamped = [
        (min(max(zero, -BEYOND_LIMIT_PS), BEYOND_LIMIT_PS), offsets) for zero, offsets in groups
    ]
    want = naive.times_of_groups(clamped, TIME_LIMIT_PS)
    lengths = [len(offsets) for _, offsets in groups]
    starts = [sum(lengths[:g]) for g in range(len(lengths))]
    first = data.draw(st.integers(0, len(want)))
    offsets = int64([o for _, part in groups for o in part])[first:]
    back = np.empty(offsets.size, np.int64)
    fill_times(offsets, int64([z for z, _ in groups]), int64(starts), first, TIME_LIMIT_PS, back)
    assert back.tolist() == want[first:]


@pytest.mark.parametrize(
    ("times", "extent"),
    [([5, 3, 9], [3, 9]), ([5, BEYOND_LIMIT_PS], [5, 5]), ([-7, 2**40], [-7, 2**40])],
)
def test_extent_is_that_of_times_within_the_limit(times: list[int], extent: list[int]) -> None:
    assert grouped(times)[1] == extent
