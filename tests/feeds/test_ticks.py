"""Origin and interval of files of native ticks."""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction
from pathlib import Path
from types import SimpleNamespace

import numpy as np
import pytest

from tagstream.errors import InputError
from tagstream.feeds import TimeBase
from tagstream.feeds.ticks import TickFeed, TickPiece
from tagstream.units import PS_PER_S
from tests.strategies import int64


class Listed:
    """A source that yields what it was given."""

    path = Path("listed")
    progress = 0.5

    def __init__(self, *pieces: tuple[list[int], bool]) -> None:
        self._pieces = pieces

    def pieces(self) -> Iterator[TickPiece]:
        for ticks, gap in self._pieces:
            yield TickPiece(int64(ticks), np.zeros(len(ticks), np.uint8), gap)


def feed(
    *pieces: tuple[list[int], bool],
    tick: Fraction = Fraction(1),
    begin_ps: int | None = None,
    end_ps: int | None = None,
) -> TickFeed:
    settings = SimpleNamespace(tick_ps=tick, begin_ps=begin_ps, end_ps=end_ps)
    return TickFeed(Listed(*pieces), settings, PS_PER_S)


@pytest.mark.parametrize(
    ("first", "moved", "origin"),
    [
        (5, 5, 0),
        (PS_PER_S - 1, PS_PER_S - 1, 0),
        (PS_PER_S, 0, PS_PER_S),
        (17 * 10**17 + 3, 3, 17 * 10**17),
        (-1, PS_PER_S - 1, -PS_PER_S),
    ],
)
def test_the_first_tag_fixes_the_origin(first: int, moved: int, origin: int) -> None:
    made = feed(([], False), ([first, first + 7], False), ([first - 9], False))
    times = [p.times_ps.tolist() for p in made.pieces()]
    assert times == [[moved, moved + 7], [moved - 9]]
    assert made.time_base == TimeBase(Fraction(1), origin)


def test_a_tick_that_is_no_whole_number_of_ps_rounds_once() -> None:
    """Tick 122 070 312.5 ps: rounded half up from the exact product."""
    made = feed(([8192, 8193, 8194], False), tick=Fraction(10**12, 8192))
    assert [p.times_ps.tolist() for p in made.pieces()] == [[0, 122_070_313, 244_140_625]]
    assert made.time_base.origin_ticks == 8192


def test_given_begin_and_end_make_one_interval_and_fix_the_origin() -> None:
    made = feed(([5 * PS_PER_S], False), begin_ps=PS_PER_S + 5, end_ps=9 * PS_PER_S)
    told = [(p.times_ps.tolist(), p.begin_ps, p.end_ps, p.complete) for p in made.pieces()]
    interval = (5, 8 * PS_PER_S)
    assert told == [([4 * PS_PER_S], *interval, False), ([], *interval, True)]
    assert made.time_base.origin_ticks == PS_PER_S


def test_a_vouched_file_may_have_no_tags_another_not() -> None:
    assert [p.complete for p in feed(begin_ps=0, end_ps=7).pieces()] == [True]
    with pytest.raises(InputError, match="listed: holds no tags"):
        list(feed(([], True)).pieces())


def test_without_an_interval_nothing_is_vouched_for() -> None:
    (first, second) = feed(([1], False), ([2], True)).pieces()
    assert (first.begin_ps, first.end_ps, first.complete) == (None, None, True)
    assert (first.gap_before, second.gap_before) == (False, True)


def test_before_the_first_piece_the_origin_is_not_known() -> None:
    assert feed(([1], False)).time_base == TimeBase(Fraction(1), None)
    assert feed().progress == 0.5
    assert feed().truth == {}
