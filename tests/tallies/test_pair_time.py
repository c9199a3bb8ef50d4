"""Pair time against counting instants one by one."""

from __future__ import annotations

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from tagstream.tallies.pair_time import PairTime
from tests import naive
from tests.fakes_blocks import block

LAGS = np.arange(-4, 5, dtype=np.int64) * 7


@given(st.lists(st.tuples(st.integers(0, 30), st.booleans()), min_size=1, max_size=6))
def test_equals_the_naive_count(pieces: list[tuple[int, bool]]) -> None:
    measured, expected = PairTime(LAGS), [0] * LAGS.size
    begin = stretch_begin = 100
    for length, opens in [(pieces[0][0], True), *pieces[1:]]:
        if opens:
            begin += 3  # a gap
            stretch_begin = begin
        measured.add(block([], begin, begin + length, opens))
        for i, lag in enumerate(LAGS):
            piece = (begin, begin + length)
            expected[i] += naive.pair_time(int(lag), (stretch_begin, piece[1]), piece)
        begin += length
    assert list(np.broadcast_to(measured.take(), LAGS.shape)) == expected


def test_away_from_a_begin_it_is_one_number() -> None:
    measured = PairTime(LAGS)
    measured.add(block([], 0, 1_000, True))
    assert measured.take().shape == LAGS.shape
    measured.add(block([], 1_000, 3_000))
    assert measured.take() == np.array(2_000)
