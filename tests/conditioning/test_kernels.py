"""The kernels of conditioning equal their slow twins."""

from __future__ import annotations

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from tagstream.conditioning import kernels as k
from tagstream.conditioning.kernels import (
    fill_dead_time_cut,
    fill_moved,
    is_ordered,
    largest_disorder,
)
from tagstream.conditioning.ordering.kernels import FIRST
from tests import naive
from tests.strategies import int64, tags


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


@given(tags(most=200), st.integers(-2_000, 2_000))
def test_disorder_is_measured_as_one_by_one(events: list[tuple[int, int]], latest: int) -> None:
    times = [t for t, _ in events]
    assert largest_disorder(int64(times), latest) == naive.largest_disorder(times, latest)
    assert is_ordered(int64(times)) == (times == sorted(times))


@given(tags(most=100), st.lists(st.integers(-90, 90), min_size=2, max_size=2), st.integers(0, 9))
def test_tags_get_their_channel_and_delay(
    events: list[tuple[int, int]], delays: list[int], shift: int
) -> None:
    channel_of = {1: 0, 2: 1}  # input 0 is of no channel
    table = np.array([k.UNLISTED_INPUT, 0, 1] + [k.UNLISTED_INPUT] * 253, np.uint8)
    padded = int64(delays + [0] * 254)
    times, inputs = int64([t for t, _ in events]), np.array([i for _, i in events], np.uint8)
    out_times, out_channels = np.empty_like(times), np.empty_like(inputs)
    n = fill_moved(times, inputs, shift, table, padded, out_times, out_channels)
    found = list(zip(out_times[:n].tolist(), out_channels[:n].tolist(), strict=True))
    assert found == naive.delayed(events, channel_of, delays, shift)


def test_a_long_stream_is_judged_as_tag_by_tag() -> None:
    """Many chunks, and in some of them a late tag, a lone far one, garbage or an unlisted input."""
    rng = np.random.default_rng(5)
    size = 20 * k.CHUNK
    times = np.cumsum(rng.integers(0, 50, size))
    times[rng.random(size) < 0.3] -= 80  # within max_disorder
    for at in rng.integers(0, size, 12):
        times[at] += rng.choice([-5_000, 10**9, 2**62, -(2**62)])
    inputs = rng.choice([1, 2, 9], size, p=[0.5, 0.499, 0.001]).astype(np.uint8)
    tags = list(zip(times.tolist(), inputs.tolist(), strict=True))
    limit = 1 << 61
    table = np.full(256, k.UNLISTED_INPUT, np.uint8)
    table[[1, 2]] = 0, 1
    state = np.zeros(k.STATE_SIZE, np.int64)
    state[k.SHUFFLED] = FIRST
    pending = np.zeros((2, k.CONFIRMATIONS + 1), np.int64)
    out_times, out_channels = np.empty(size, np.int64), np.empty(size, np.uint8)
    counts = np.zeros(k.COUNT_SIZE, np.int64)
    rules = int64([1_000, 10**6, limit, -limit, limit, 0])
    delays = int64([0, 30] + [0] * 254)
    begin = 0
    while begin < size:
        end = min(begin + int(rng.integers(1, 3 * k.CHUNK)), size)
        part = slice(begin, end)
        used = k.fill_judged(
            times[part],
            inputs[part],
            rules,
            table,
            delays,
            state,
            pending[0],
            pending[1],
            out_times,
            out_channels,
            counts,
        )
        assert used == end - begin
        begin = end
    kept, dropped = naive.judged(tags, 1_000, 10**6, limit)
    n = counts[k.KEPT]
    found = list(zip(out_times[:n].tolist(), out_channels[:n].tolist(), strict=True))
    assert found == naive.delayed(kept, {1: 0, 2: 1}, [0, 30], 0)
    assert [counts[k.LATE], counts[k.JUMP], counts[k.OVERFLOW]] == list(dropped.values())
    assert counts[k.LATE] > 0
    assert counts[k.JUMP] > 0
    assert counts[k.OVERFLOW] > 0
    assert state[k.DISORDER] >= 80
