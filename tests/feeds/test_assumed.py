"""Intervals by what is assumed of a source that vouches for nothing."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from tagstream.feeds import Arrivals
from tagstream.feeds.assumed import AssumedCoverage
from tests.feeds.opened import tags_of
from tests.strategies import int64

DISORDER, JUMP = 100, 10_000


def piece(times: list[int], **more: object) -> Arrivals:
    return Arrivals(int64(times), np.ones(len(times), np.uint8), **more)  # type: ignore[arg-type]


def covered(pieces: list[Arrivals]) -> list[Arrivals]:
    assumed = AssumedCoverage(DISORDER, JUMP)
    return [*(out for p in pieces for out in assumed.take(p)), *assumed.finish()]


def shown(pieces: list[Arrivals]) -> list[tuple[object, ...]]:
    return [(p.times_ps.tolist(), p.begin_ps, p.end_ps, p.gap_before) for p in pieces]


def test_a_piece_covers_up_to_the_disorder_before_its_end() -> None:
    found = covered([piece([1_000]), piece([1_500, 1_950, 2_000]), piece([1_960, 5_000])])
    assert shown(found) == [
        ([1_000], 1_001, 1_001, True),  # the tag that opens it may lie outside, as it always does
        ([1_500], 1_001, 1_850, False),
        ([1_950, 2_000, 1_960], 1_850, 4_900, False),
        ([5_000], 4_900, 5_001, False),
    ]


def test_darkness_is_covered_and_a_gap_is_not() -> None:
    found = covered([piece([1_000]), piece([9_000]), piece([9_800], gap_before=True)])
    assert shown(found) == [
        ([1_000], 1_001, 1_001, True),
        ([], 1_001, 8_900, False),
        ([9_000], 8_900, 9_001, False),
        ([9_800], 9_801, 9_801, True),
    ]


def test_a_jump_is_a_gap_and_a_new_session_is_left_to_conditioning() -> None:
    found = covered([piece([50_000]), piece([50_300, *[90_000] * 9]), piece([10] * 9)])
    assert shown(found) == [
        ([50_000], 50_001, 50_001, True),
        ([50_300], 50_001, 50_301, False),
        ([90_000] * 9, 90_001, 90_001, True),
        ([10] * 9, None, None, True),
    ]


def test_garbage_neither_moves_the_front_nor_waits_for_ever() -> None:
    far = 10**15
    found = covered([piece([1_000]), piece([1_500, far, 2_000, 2_001]), piece([2_500])])
    assert shown(found)[1] == ([1_500, far], 1_001, 1_901, False)
    assert len(tags_of(found)) == 6


def test_what_has_no_tags_keeps_its_place() -> None:
    empty = piece([], dropped={"repeated": 2})
    found = covered([empty, piece([1_000]), empty, piece([7], lossy=True), piece([3_000])])
    assert [(p.begin_ps, p.end_ps, dict(p.dropped)) for p in found] == [
        (None, None, {"repeated": 2}),
        (1_001, 1_001, {}),
        (1_001, 1_001, {"repeated": 2}),
        (None, None, {}),
        (3_001, 3_001, {}),
    ]


@given(st.lists(st.lists(st.integers(-DISORDER // 2, 900), max_size=40), max_size=8))
def test_no_tag_is_lost_and_all_in_order_lie_in_their_interval(offsets: list[list[int]]) -> None:
    pieces = [piece([2_000 + 1_000 * i + o for o in sorted(of)]) for i, of in enumerate(offsets)]
    found = covered(pieces)
    assert sorted(tags_of(found)) == sorted(tags_of(pieces))
    spans = [(p.begin_ps, p.end_ps) for p in found if p.begin_ps is not None]
    assert all(before[1] == after[0] for before, after in pairwise(spans))
    for p in found[1:]:
        if p.begin_ps is not None and not p.gap_before:
            outside = p.times_ps < p.begin_ps
            assert outside.sum() <= 9  # only the tags by which the begin was found
