"""Blocks are cut exactly at the ends of slices."""

from __future__ import annotations

import itertools

from hypothesis import given
from hypothesis import strategies as st

from tagstream.tallies.slicer import cut_at_slices
from tests.fakes_blocks import block
from tests.strategies import sorted_times


@given(sorted_times(span_ps=99), st.integers(1, 40))
def test_pieces_join_to_the_block(times: list[int], slice_ps: int) -> None:
    whole = block([(t, 0) for t in times], 0, 100, opens=True)
    pieces = list(cut_at_slices(whole, slice_ps))
    assert [t for _, p in pieces for t in p.times_ps] == times
    assert pieces[0][1].begin_ps == 0
    assert pieces[-1][1].end_ps == 100
    for (_, a), (_, b) in itertools.pairwise(pieces):
        assert a.end_ps == b.begin_ps
        assert not b.opens
    for index, piece in pieces:
        assert index * slice_ps <= piece.begin_ps < piece.end_ps <= (index + 1) * slice_ps
        assert all(piece.begin_ps <= t < piece.end_ps for t in piece.times_ps)
