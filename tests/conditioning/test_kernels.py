"""The kernels of conditioning equal their slow twins."""

from __future__ import annotations

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from tagstream.conditioning.kernels import fill_bucketed, fill_dead_time_cut, fill_ordered
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


@given(tags(span_ps=300), st.integers(0, 60), st.lists(st.integers(0, 50), min_size=3, max_size=3))
def test_dead_time_in_two_pieces(
    events: list[tuple[int, int]], cut: int, dead_times: list[int]
) -> None:
    events = sorted(events)
    last, ever = np.zeros(3, np.int64), np.zeros(3, np.uint8)
    found = []
    for part in (events[:cut], events[cut:]):
        times, channels = int64([t for t, _ in part]), np.array([c for _, c in part], np.uint8)
        n = fill_dead_time_cut(times, channels, int64(dead_times), last, ever)
        found += list(zip(times[:n].tolist(), channels[:n].tolist(), strict=True))
    assert found == naive.without_dead_time(events, dead_times)


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
