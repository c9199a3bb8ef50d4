"""Counts per channel, live time and clock periods."""

from __future__ import annotations

from tagstream.tallies.singles import Singles
from tests.fakes_blocks import block


def test_counts_live_time_and_periods_across_pieces_and_gaps() -> None:
    singles = Singles(2, clocks=[0])
    singles.add(block([(10, 0), (15, 1), (20, 0)], 0, 25, opens=True))
    singles.add(block([(30, 0)], 25, 40))
    singles.add(block([(90, 0), (100, 0)], 80, 100 + 1, opens=True))
    sums = singles.take()
    assert list(sums["counts"]) == [5, 1]
    assert sums["live_time_ps"] == 40 + 21
    assert list(sums["period_sum_ps"]) == [30, 0]
    assert list(sums["period_count"]) == [3, 0]
    again = singles.take()
    assert again["live_time_ps"] == 0
    assert list(again["counts"]) == [0, 0]


def test_missing_clock_tags_are_noticed() -> None:
    singles = Singles(1, clocks=[0])
    singles.add(block([(t, 0) for t in (0, 10, 20, 40, 50)], 0, 60, opens=True))
    assert list(singles.take()["missed_count"]) == [1]


def test_the_opening_tag_of_an_assumed_stretch_is_not_counted() -> None:
    # n tags in the time from the first to the last would read +25 % at ten tags.
    singles = Singles(1, clocks=[])
    singles.add(block([(t, 0) for t in range(0, 100, 10)], 1, 91, opens=True))
    sums = singles.take()
    assert sums["counts"][0] == 9
    assert sums["live_time_ps"] == 90
