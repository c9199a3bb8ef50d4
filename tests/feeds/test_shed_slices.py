"""Slices cut out of intervals: no tag is lost unseen, none kept in what is left out."""

from __future__ import annotations

from dataclasses import replace
from itertools import pairwise

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from tagstream.feeds import Arrivals
from tagstream.feeds.shed_pattern import ShedPattern
from tagstream.feeds.shed_slices import MOST_SLICES, SliceCutter
from tagstream.recording.layout import Mark
from tests.feeds.opened import tags_of
from tests.strategies import int64

SLICE = 1_000


class Every(ShedPattern):
    """Keeps the slices given."""

    def __init__(self, kept: set[int]) -> None:
        super().__init__()
        self._kept = kept

    def keeps(self, index: int) -> bool:
        return index in self._kept


def piece(times: list[int], begin: int, end: int, **more: object) -> Arrivals:
    inputs = (np.arange(len(times)) % 4).astype(np.uint8)
    return Arrivals(int64(times), inputs, begin, end, **more)  # type: ignore[arg-type]


def cut(pieces: list[Arrivals], kept: set[int]) -> tuple[list[Arrivals], SliceCutter]:
    cutter = SliceCutter(SLICE, Every(kept))
    found = [out for p in pieces for out in cutter.take(p)]
    return [*found, *cutter.finish()], cutter


def shown(p: Arrivals) -> tuple[object, ...]:
    return p.times_ps.tolist(), p.begin_ps, p.end_ps, p.lossy, dict(p.dropped)


def test_what_is_kept_whole_is_handed_on_as_it_is() -> None:
    whole = piece([1_500, 1_200, 2_999], 1_000, 3_000)
    found, cutter = cut([whole], {1, 2})
    assert found[0] is whole
    assert (cutter.time.kept_ps, cutter.time.shed_ps, cutter.slices) == (2_000, 0, 0)


def test_a_slice_is_cut_out_of_an_interval() -> None:
    tags = [500, 1_200, 900, 2_100, 1_999, 2_000, 2_500]
    found, cutter = cut([piece(tags, 400, 2_600, gap_before=True)], {0, 2})
    assert [shown(p) for p in found] == [
        ([500, 900], 400, 1_000, False, {}),
        ([], 1_000, 2_000, True, {"shed": 2}),
        ([2_100, 2_000, 2_500], 2_000, 2_600, False, {}),
    ]
    assert [p.inputs.tolist() for p in found] == [[0, 2], [], [3, 1, 2]]
    assert [p.gap_before for p in found] == [True, False, False]
    assert (cutter.time.kept_ps, cutter.time.shed_ps, cutter.slices) == (1_200, 1_000, 1)


def test_messages_in_what_is_left_out_are_told_as_one() -> None:
    mark = Mark(1_300, "power", 2.0)
    pieces = [
        piece([1_100], 1_000, 1_200, dropped={"repeated": 3}),
        piece([1_250, 1_260], 1_200, 1_400, marks=(mark,)),
        piece([], 1_400, 2_000),
        piece([2_000], 2_000, 2_100),
    ]
    found, cutter = cut(pieces, {2})
    told: tuple[object, ...] = ([], 1_000, 2_000, True, {"repeated": 3, "shed": 3})
    assert [shown(p) for p in found] == [told, shown(pieces[3])]
    assert found[0].marks == (mark,)
    assert cutter.slices == 1


def test_an_interval_in_several_pieces_is_cut_when_it_is_complete() -> None:
    parts = [
        piece([1_200, 900], 0, 2_500, complete=False, dropped={"repeated": 1}),
        piece([2_400, 950], 0, 2_500),
    ]
    found, _ = cut(parts, {0, 2})
    assert [shown(p) for p in found] == [
        ([900, 950], 0, 1_000, False, {"repeated": 1}),
        ([], 1_000, 2_000, True, {"shed": 1}),
        ([2_400], 2_000, 2_500, False, {}),
    ]
    broken, _ = cut([parts[0], piece([3_100], 3_000, 3_200)], {0, 2, 3})
    assert [p.complete for p in broken] == [True, True, False, True]
    whole, _ = cut(parts, {0, 1, 2})
    assert whole == parts


def test_tags_outside_their_interval_go_with_its_ends() -> None:
    found, _ = cut([piece([-7_000, 9_000, 1_500], 500, 2_500)], {2})
    assert [shown(p) for p in found] == [
        ([], 500, 2_000, True, {"shed": 2}),
        ([9_000], 2_000, 2_500, False, {}),
    ]


def test_a_lossy_interval_stays_so_and_pieces_without_an_interval_pass() -> None:
    lossy = piece([1_500, 2_500], 1_000, 3_000, lossy=True)
    plain = replace(lossy, begin_ps=None, end_ps=None, lossy=False)
    found, _ = cut([lossy, plain], {2})
    assert [shown(p) for p in found] == [
        ([], 1_000, 2_000, True, {"shed": 1}),
        ([2_500], 2_000, 3_000, True, {}),
        shown(plain),
    ]


def test_an_interval_of_very_many_slices_is_not_cut() -> None:
    endless = piece([5], 0, (MOST_SLICES + 2) * SLICE)
    found, _ = cut([endless], set())
    assert found[0] is endless


@given(
    st.lists(st.tuples(st.integers(0, 3_500), st.lists(st.integers(-500, 4_000), max_size=12))),
    st.sets(st.integers(0, 12)),
    st.integers(1, 3),
)
def test_no_tag_is_lost_unseen(
    intervals: list[tuple[int, list[int]]], kept: set[int], parts: int
) -> None:
    now, pieces = 0, []
    for length, offsets in intervals:
        times = [now + offset for offset in offsets]
        shares = [times[i::parts] for i in range(parts)]
        for i, share in enumerate(shares):
            pieces.append(piece(share, now, now + length, complete=i == parts - 1))
        now += length
    found, cutter = cut(pieces, kept)
    left_out = sum(p.dropped.get("shed", 0) for p in found)
    assert len(tags_of(found)) + left_out == len(tags_of(pieces))
    assert cutter.time.kept_ps + cutter.time.shed_ps == now
    for p in found:
        assert p.begin_ps is not None
        assert p.end_ps is not None
        if p.end_ps > p.begin_ps:
            fates = {i in kept for i in range(p.begin_ps // SLICE, (p.end_ps - 1) // SLICE + 1)}
            assert fates == {not p.lossy}
    ends = [(p.begin_ps, p.end_ps) for p in found if p.complete]
    assert all(before[1] == after[0] for before, after in pairwise(ends))
