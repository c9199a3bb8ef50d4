"""Every way of ordering gives the same order, whatever the pieces."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.typing import NDArray

from tagstream.conditioning.ordering import order as module
from tagstream.conditioning.ordering.order import Order
from tests import naive
from tests.strategies import cuts, int64, split, tags


def push(order: Order, events: list[tuple[int, int]]) -> None:
    held = len(order)
    times, marks = order.room(len(events))
    times[held:] = [t for t, _ in events]
    marks[held:] = [m for _, m in events]
    order.take(held + len(events), bool((times[1:] < times[:-1]).any()))


def listed(tags: tuple[NDArray[np.int64], NDArray[np.uint8]]) -> list[tuple[int, int]]:
    return list(zip(tags[0].tolist(), tags[1].tolist(), strict=True))


@given(tags(most=120), cuts(), st.integers(0, 2_000), st.sampled_from([(8, 64), (0, 64), (0, 0)]))
def test_any_way_for_any_cut(
    events: list[tuple[int, int]],
    fractions: list[float],
    before: int,
    moves: tuple[int, int],
) -> None:
    numbered = [(t, i % 256) for i, (t, _) in enumerate(events)]
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(module, "MOVES_PER_TAG", moves[0])
        patch.setattr(module, "MOST_MOVES_PER_TAG", moves[1])
        order = Order(np.zeros(1, np.int64))
        for part in split(numbered, fractions):
            push(order, part)
        early = listed(order.release(before))
        assert all(t < before for t, _ in early)
        assert len(order) == len(numbered) - len(early)
        assert early + listed(order.release_all()) == naive.ordered(numbered)
    assert len(order) == 0


@given(
    tags(most=120, span_ps=1_000),
    cuts(),
    st.lists(st.integers(-300, 300), min_size=3, max_size=3),
    st.integers(0, 3),
    st.booleans(),
)
def test_delays_alone_or_after_a_disorder(
    events: list[tuple[int, int]],
    fractions: list[float],
    delays: list[int],
    most_runs: int,
    first_out_of_turn: bool,
) -> None:
    """Tags that arrive in order, but for the first two perhaps, and are delayed by channel."""
    raw = sorted(events)
    if first_out_of_turn:
        raw[:2] = raw[1::-1]
    order, found, latest, shuffled = Order(int64(delays)), [], -(10**6), -(10**6)
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(module, "MOST_RUNS", most_runs)
        patch.setattr(module, "MOVES_PER_TAG", 0)
        for part in split(raw, fractions):
            held = len(order)
            times, channels = order.room(len(part))
            for i, (t, channel) in enumerate(part, held):
                times[i], channels[i] = t + delays[channel], channel
                shuffled = latest if t < latest else shuffled
                latest = max(latest, t)
            unordered = bool((times[1:] < times[:-1]).any())
            order.take(held + len(part), unordered, shuffled)
            found += listed(order.release(latest - 5 + min(delays)))
        found += listed(order.release_all())
    moved = [(t + delays[channel], channel) for t, channel in raw]
    assert found == naive.ordered(moved)
