"""Every way of ordering gives the same order, whatever the pieces."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.typing import NDArray

from tagstream.conditioning import order as module
from tagstream.conditioning.order import Order
from tests import naive
from tests.strategies import cuts, split, tags


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
        order = Order()
        for part in split(numbered, fractions):
            push(order, part)
        early = listed(order.release(before))
        assert all(t < before for t, _ in early)
        assert len(order) == len(numbered) - len(early)
        assert early + listed(order.release_all()) == naive.ordered(numbered)
    assert len(order) == 0
