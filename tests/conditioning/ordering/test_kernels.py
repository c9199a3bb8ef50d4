"""The kernels of ordering equal their slow twins."""

from __future__ import annotations

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from tagstream.conditioning.ordering.kernels import (
    fill_apart,
    fill_bucketed,
    fill_merged,
    fill_ordered,
)
from tests import naive
from tests.strategies import int64, tags


@given(tags(), st.integers(0, 200))
def test_insertion_sorts_stably_or_says_how_far_it_came(
    events: list[tuple[int, int]], most_moves: int
) -> None:
    numbered = [(t, i % 256) for i, (t, _) in enumerate(events)]
    times, marks = int64([t for t, _ in numbered]), np.array([m for _, m in numbered], np.uint8)
    done = fill_ordered(times, marks, most_moves)
    found = list(zip(times.tolist(), marks.tolist(), strict=True))
    assert found[:done] == naive.ordered(numbered[:done])
    assert found[done:] == numbered[done:]
    assert done == len(events) or most_moves < len(events) ** 2


@given(tags(most=200, span_ps=100_000), st.sampled_from([1, 2, 16, 256]))
def test_dealing_out_to_intervals_is_stable_and_nearly_in_order(
    events: list[tuple[int, int]], intervals: int
) -> None:
    numbered = [(t, i % 256) for i, (t, _) in enumerate(events)] or [(5, 0)]
    times, marks = int64([t for t, _ in numbered]), np.array([m for _, m in numbered], np.uint8)
    out_times, out_marks = np.empty_like(times), np.empty_like(marks)
    fill_bucketed(times, marks, np.empty(intervals + 1, np.int32), out_times, out_marks)
    fill_ordered(out_times, out_marks, 10**9)
    found = list(zip(out_times.tolist(), out_marks.tolist(), strict=True))
    assert found == naive.ordered(numbered)


@given(tags(most=100, span_ps=300), st.lists(st.booleans(), min_size=3, max_size=3))
def test_two_runs_dealt_out_and_merged_are_in_order(
    events: list[tuple[int, int]], chosen: list[bool]
) -> None:
    first = sorted(tag for tag in events if chosen[tag[1]])
    rest = sorted(tag for tag in events if not chosen[tag[1]])
    mixed = [*rest, *first]
    times, channels = int64([t for t, _ in mixed]), np.array([c for _, c in mixed], np.uint8)
    size = times.size
    room, names = np.empty((2, size + 2), np.int64), np.empty((2, size + 2), np.uint8)
    flags = np.array([*chosen, *[False] * 253], np.uint8)
    n = fill_apart(times, channels, flags, room[0], names[0], room[1], names[1])
    assert n == len(first)
    sides = room[0, : n + 2], names[0, : n + 2], room[1, : size - n + 2], names[1, : size - n + 2]
    fill_merged(*sides, times, channels)
    found = list(zip(times.tolist(), channels.tolist(), strict=True))
    assert found == naive.ordered([*first, *rest])
