"""Recordings in portions: every tag in one, and each complete for its interval."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tagstream.feeds import Arrivals
from tagstream.sending import Portion
from tagstream.sending import portions as portions_module
from tagstream.sending.portions import PART_PS, cut_up, portions
from tagstream.units import PS_PER_S
from tests.strategies import arrivals, int64, split

Tags = list[tuple[int, int]]


def tags_of(found: list[Portion]) -> Tags:
    return [tag for p in found for tag in zip(p.times_ps.tolist(), p.inputs.tolist(), strict=True)]


def covered(found: list[Portion]) -> list[tuple[int, int]]:
    """The intervals, joined where one goes on where the last ended without a gap."""
    joined: list[tuple[int, int]] = []
    for p in found:
        if joined and joined[-1][1] == p.begin_ps and not p.gap_before:
            joined[-1] = (joined[-1][0], p.end_ps)
        else:
            joined.append((p.begin_ps, p.end_ps))
    return [(begin, end) for begin, end in joined if end > begin]


def check(found: list[Portion]) -> None:
    """Intervals rise and never overlap; parts are short, or silent."""
    for p, q in pairwise(found):
        assert p.end_ps <= q.begin_ps
    for p in found:
        assert p.begin_ps <= p.end_ps
        assert p.end_ps - p.begin_ps <= (PART_PS if p.times_ps.size else PS_PER_S)


@st.composite
def rows(draw: st.DrawFn) -> tuple[list[Arrivals], Tags, list[tuple[int, int]]]:
    """(pieces of a recording that vouches for its intervals, its tags, the intervals).

    Tags are out of order by less than a piece, so that a look at one piece is enough.
    """
    pieces: list[Arrivals] = []
    tags: Tags = []
    intervals: list[tuple[int, int]] = []
    begin = draw(st.integers(-5, 5))
    for _ in range(draw(st.integers(1, 4))):
        begin += draw(st.sampled_from([0, 0, 7, 10 * PART_PS]))
        length = draw(st.sampled_from([1, 10, 100, PART_PS, 30 * PART_PS + 3]))
        times = sorted(draw(st.lists(st.integers(begin, begin + length - 1), max_size=12)))
        parts = list(split(times, draw(st.lists(st.floats(0, 1), max_size=3).map(sorted))))
        for number, part in enumerate(parts):
            mixed = [(time, time % 7) for time in draw(st.permutations(part))]
            tags += mixed
            last = number == len(parts) - 1
            fields = {"begin_ps": begin, "end_ps": begin + length, "complete": last}
            pieces.append(arrivals(mixed, **fields))
        intervals.append((begin, begin + length))
        begin += length
    return pieces, tags, intervals


@given(rows())
def test_vouched_intervals_are_covered_exactly_with_all_their_tags(
    made: tuple[list[Arrivals], Tags, list[tuple[int, int]]],
) -> None:
    pieces, tags, intervals = made
    found = list(portions(pieces))
    check(found)
    assert sorted(tags_of(found)) == sorted(tags)
    for p in found:
        assert all(p.begin_ps <= time < p.end_ps for time in p.times_ps.tolist())
    wanted = [Portion(a, b, int64([]), np.zeros(0, np.uint8)) for a, b in intervals]
    assert covered(found) == covered(wanted)


def test_tags_stay_in_the_order_in_which_they_came() -> None:
    tags = [(5, 0), (3, 1), (3, 0), (PART_PS + 9, 0), (4, 2), (PART_PS + 2, 1)]
    (piece,) = [arrivals(tags, begin_ps=0, end_ps=2 * PART_PS)]
    first, second = portions([piece])
    assert tags_of([first]) == [(5, 0), (3, 1), (3, 0), (4, 2)]
    assert tags_of([second]) == [(PART_PS + 9, 0), (PART_PS + 2, 1)]


def test_tags_outside_of_their_interval_stay_outside_and_none_is_lost() -> None:
    one = arrivals([(-50, 0), (10, 0), (500, 0)], begin_ps=0, end_ps=100)
    two = arrivals([(110, 0), (99, 0)], begin_ps=50, end_ps=90)  # covered before
    found = list(portions([one, two]))
    check(found)
    assert sorted(tags_of(found)) == [(-50, 0), (10, 0), (99, 0), (110, 0), (500, 0)]
    inside = [t for p in found for t in p.times_ps.tolist() if p.begin_ps <= t < p.end_ps]
    assert inside == [10]


def test_a_gap_without_length_and_lost_tags_are_told() -> None:
    pieces = [
        arrivals([(1, 0)], begin_ps=0, end_ps=10),
        arrivals([(11, 0)], begin_ps=10, end_ps=20, gap_before=True),
        arrivals([(21, 0)], begin_ps=20, end_ps=20 + 3 * PART_PS, lossy=True),
    ]
    found = list(portions(pieces))
    assert [p.gap_before for p in found[:3]] == [False, True, False]
    assert [p.lossy for p in found] == [False, False] + [True] * (len(found) - 2)
    assert covered(found) == [(0, 10), (10, 20 + 3 * PART_PS)]


def test_a_tag_that_is_late_by_more_than_a_piece_goes_out_outside() -> None:
    pieces = [
        arrivals([(t, 0)], begin_ps=0, end_ps=100, complete=t == 60) for t in (10, 40, 50, 20, 60)
    ]
    found = list(portions(pieces))
    check(found)
    assert sorted(t for t, _ in tags_of(found)) == [10, 20, 40, 50, 60]
    assert covered(found) == [(0, 100)]


def test_what_is_held_is_bounded_whatever_comes(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(portions_module, "MOST_HELD", 10)
    times = [t for pair in zip(range(100), range(100, 200), strict=True) for t in pair]
    last = len(times) - 1
    pieces = [
        arrivals([(t, 0)], begin_ps=0, end_ps=1000, complete=i == last) for i, t in enumerate(times)
    ]
    found = list(portions(pieces))
    check(found)
    assert sorted(t for t, _ in tags_of(found)) == list(range(200))
    assert max(p.times_ps.size for p in found) < 30


def test_without_intervals_they_are_assumed_up_to_the_latest_tag() -> None:
    times = list(range(0, 10 * PART_PS, PART_PS // 100))
    pieces = [arrivals([(t, 1) for t in part]) for part in split(times, [0.2, 0.5, 0.9])]
    found = list(portions(pieces))
    check(found)
    assert sorted(t for t, _ in tags_of(found)) == times
    ((begin, end),) = covered(found)
    assert begin <= 10 * PART_PS // 100
    assert end == times[-1] + 1


def test_a_long_silence_is_cut_lazily() -> None:
    year = 365 * 86_400 * PS_PER_S // 4
    whole = Portion(0, year, int64([5, year - 1]), np.zeros(2, np.uint8))
    parts = cut_up(whole)
    assert tags_of([next(parts)]) == [(5, 0)]
    silent = next(parts)
    assert (silent.times_ps.size, silent.end_ps - silent.begin_ps) == (0, PS_PER_S)
