"""A feed read again, from where a run had come to."""

from __future__ import annotations

from collections.abc import Generator

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from tagstream.feeds import Arrivals
from tagstream.feeds.resumed import from_time
from tests.strategies import int64


def source(vouched: bool) -> Generator[Arrivals]:
    for begin in range(0, 100, 10):
        times = int64([begin, begin + 4, begin + 9])
        inputs = np.zeros(3, np.uint8)
        yield Arrivals(times, inputs, begin, begin + 10) if vouched else Arrivals(times, inputs)


@given(st.integers(0, 99), st.booleans())
def test_what_comes_before_is_left_out_and_the_rest_follows_a_gap(
    from_ps: int, vouched: bool
) -> None:
    found = list(from_time(source(vouched), from_ps))
    times = [t for piece in found for t in piece.times_ps.tolist()]
    everything = [t for piece in source(vouched) for t in piece.times_ps.tolist()]
    assert times == [t for t in everything if t >= from_ps]
    assert [piece.gap_before for piece in found] == [True] + [False] * (len(found) - 1)
    if vouched:
        assert found[0].begin_ps == from_ps
        assert [p.begin_ps for p in found[1:]] == [p.end_ps for p in found[:-1]]
