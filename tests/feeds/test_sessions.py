"""Where sessions of a source lie in stream time."""

from __future__ import annotations

import json
from datetime import UTC, datetime, timedelta
from fractions import Fraction
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tagstream import units
from tagstream.feeds import ResumePoint
from tagstream.feeds.sessions import CACHED_TAGS, Sessions, SessionStart, rounded_ps, utc_of
from tagstream.units import PS_PER_S

PS = Fraction(1)
SLICE = PS_PER_S
NOON = "2026-12-01T12:00:00+00:00"
TICKS = [Fraction(1), Fraction(10), Fraction(3, 2), Fraction(10**12, 8192), Fraction(25_000, 3)]


class Clock:
    """A clock that goes on when it is told."""

    def __init__(self) -> None:
        self.seconds = 100.0

    def __call__(self) -> float:
        return self.seconds


def placed(sessions: Sessions, *ticks: int) -> list[int]:
    return [int(ps) for ps in sessions.to_ps(np.array(ticks, np.int64))]


def begun(*starts: SessionStart, clock: Clock | None = None) -> Sessions:
    sessions = Sessions(SLICE, clock=clock or Clock())
    for start in starts:
        sessions.begin(start)
    return sessions


def test_the_first_session_fixes_the_origin_at_a_slice() -> None:
    sessions = begun(SessionStart(PS, 5 * SLICE + 7, NOON))
    assert placed(sessions, 5 * SLICE + 7) == [7]
    base = sessions.time_base
    assert (base.tick, base.origin_ticks) == (PS, 5 * SLICE)
    assert base.origin_utc == "2026-12-01T12:00:05+00:00"
    assert sessions.reached_ps is None


def test_without_utc_the_gap_is_the_silence_rounded_up_to_slices() -> None:
    clock = Clock()
    sessions = begun(SessionStart(PS, 0), clock=clock)
    sessions.reached(SLICE // 2)
    clock.seconds += 2.25
    sessions.begin(SessionStart(PS, 77 * SLICE + 5))
    assert placed(sessions, 77 * SLICE + 5) == [SLICE // 2 + 3 * SLICE]
    assert sessions.to_one_ps(77 * SLICE + 6) == SLICE // 2 + 3 * SLICE + 1
    assert sessions.time_base.origin_ticks == 0


@pytest.mark.parametrize(
    ("zero", "first_s", "gap_slices"),
    [
        ("2026-12-01T12:00:05Z", 2, 3),  # ended at 12:00:04, goes on at 12:00:07
        ("2026-12-01T13:00:00.5+01:00", 5, 2),  # 12:00:05.5 in UTC: rounded up
        ("2026-12-01T11:00:00Z", 0, 1),  # a clock that was put back: never negative
    ],
)
def test_with_utc_on_both_sides_the_gap_is_their_difference(
    zero: str, first_s: int, gap_slices: int
) -> None:
    clock = Clock()
    sessions = begun(SessionStart(PS, 0, NOON), clock=clock)
    sessions.reached(4 * SLICE)
    clock.seconds += 1000
    sessions.begin(SessionStart(PS, first_s * SLICE, zero))
    assert placed(sessions, first_s * SLICE) == [(4 + gap_slices) * SLICE]


def test_a_third_session_goes_on_after_the_second() -> None:
    sessions = begun(SessionStart(PS, 0, NOON))
    sessions.reached(4 * SLICE)
    sessions.begin(SessionStart(Fraction(10), 0, "2026-12-01T12:00:10Z"))
    sessions.reached(sessions.to_one_ps(SLICE // 10))
    assert sessions.reached_ps == 11 * SLICE
    sessions.begin(SessionStart(PS, 0, "2026-12-01T12:00:20Z"))
    assert placed(sessions, 0) == [20 * SLICE]
    assert sessions.count == 3


def test_stream_time_never_goes_back() -> None:
    sessions = begun(SessionStart(PS, 0))
    sessions.reached(5 * SLICE)
    sessions.reached(3 * SLICE)
    assert sessions.reached_ps == 5 * SLICE


@given(
    st.sampled_from(TICKS),
    st.integers(-(2**62), 2**62),
    st.integers(0, 50 * 86_400) | st.none(),
    st.lists(st.integers(-(10**9), 10**12), max_size=20),
)
def test_arrays_and_single_counts_agree_and_are_exact(
    tick: Fraction, first: int, reached_s: int | None, offsets: list[int]
) -> None:
    sessions = Sessions(SLICE, clock=Clock())
    if reached_s is not None:
        sessions.reached(reached_s * SLICE)
    sessions.begin(SessionStart(tick, first))
    origin_ps = int(sessions.position["origin_ps"])
    counts = [first + offset for offset in offsets]
    for count, ps in zip(counts, placed(sessions, *counts), strict=True):
        exact = count * tick - origin_ps
        if abs(exact) < 50 * 86_400 * PS_PER_S:
            assert ps == sessions.to_one_ps(count) == rounded_ps(count, tick) - origin_ps
            assert abs(ps - exact) <= Fraction(1, 2)
        elif abs(exact) > units.TIME_LIMIT_PS:
            assert abs(ps) == units.BEYOND_LIMIT_PS
            assert abs(sessions.to_one_ps(count)) == units.TIME_LIMIT_PS


@pytest.mark.parametrize("first", [0, 10**15, -(10**15)])
def test_counts_that_make_no_sense_lie_beyond_the_limit(first: int) -> None:
    sessions = begun(SessionStart(PS, first))
    extremes = placed(sessions, -(2**63), first, 2**63 - 1)
    assert [abs(ps) for ps in (extremes[0], extremes[2])] == [units.BEYOND_LIMIT_PS] * 2
    assert 0 <= extremes[1] < SLICE


def test_a_session_past_the_limit_of_a_run_is_all_beyond_it() -> None:
    sessions = Sessions(SLICE, clock=Clock())
    sessions.reached(units.TIME_LIMIT_PS - SLICE // 2)
    sessions.begin(SessionStart(Fraction(3, 2), 0))
    assert placed(sessions, 0, 5) == [units.BEYOND_LIMIT_PS] * 2
    assert sessions.to_one_ps(5) == units.TIME_LIMIT_PS


@pytest.mark.parametrize("tick", TICKS)
def test_long_arrays_are_converted_as_short_ones(tick: Fraction) -> None:
    counts = np.arange(3 * CACHED_TAGS // 2, dtype=np.int64)
    sessions = begun(SessionStart(tick, 0))
    expected = [rounded_ps(count, tick) for count in counts.tolist()]
    assert sessions.to_ps(counts).tolist() == expected


@pytest.mark.parametrize("tick", TICKS)
def test_only_an_array_that_is_given_up_is_written_to(tick: Fraction) -> None:
    sessions = begun(SessionStart(tick, 5 * SLICE))
    counts = np.array([5 * SLICE + 1, 5 * SLICE + 7], np.int64)
    fixed = counts.copy()
    fixed.flags.writeable = False
    expected = sessions.to_ps(counts).tolist()
    assert counts.tolist() == fixed.tolist()
    assert sessions.given_up_to_ps(fixed).tolist() == expected
    assert sessions.given_up_to_ps(counts) is counts
    assert counts.tolist() == expected


def stopped(sessions: Sessions, end_ps: int, **changed: Any) -> ResumePoint:
    """Where a run stood, through JSON as it is kept."""
    position = json.loads(json.dumps(sessions.position | changed))
    base = sessions.time_base
    return ResumePoint(end_ps, base.origin_ticks, base.origin_utc, position, NOON)


def resumed(point: ResumePoint, after: timedelta) -> Sessions:
    now = datetime(2026, 12, 1, 12, tzinfo=UTC) + after
    return Sessions(SLICE, point, Clock(), lambda: now)


@pytest.mark.parametrize("tick", TICKS)
def test_after_a_restart_the_same_session_has_its_old_place(tick: Fraction) -> None:
    first = SessionStart(tick, 123_456_789_012_345, None, "a")
    before = begun(first)
    count = 123_456_789_212_345
    at_ps = before.to_one_ps(count)
    after = resumed(stopped(before, 3 * SLICE), timedelta(days=3))
    assert after.reached_ps == 3 * SLICE
    after.begin(SessionStart(tick, count, None, "a"))
    assert placed(after, count) == [at_ps]
    assert after.time_base == before.time_base
    assert after.position == before.position


@pytest.mark.parametrize("name", ["b", None])
def test_after_a_restart_another_session_goes_on_after_the_time_since(name: str | None) -> None:
    before = begun(SessionStart(PS, 2 * SLICE, None, "a" if name else None))
    after = resumed(stopped(before, 7 * SLICE), timedelta(seconds=59.5))
    after.begin(SessionStart(PS, 0, None, name))
    assert placed(after, 0) == [(7 + 60) * SLICE]
    assert after.time_base == before.time_base


def test_after_a_restart_utc_of_both_sessions_counts_more() -> None:
    before = begun(SessionStart(PS, 0, NOON, "a"))
    after = resumed(stopped(before, 7 * SLICE), timedelta(days=9))
    after.begin(SessionStart(PS, 0, "2026-12-01T12:01:00Z", "b"))
    assert placed(after, 0) == [60 * SLICE]


def test_a_wall_clock_that_was_put_back_gives_one_slice() -> None:
    before = begun(SessionStart(PS, 0))
    after = resumed(stopped(before, 7 * SLICE), timedelta(seconds=-300))
    after.begin(SessionStart(PS, 0))
    assert placed(after, 0) == [8 * SLICE]


def test_a_run_that_met_no_session_goes_on_all_the_same() -> None:
    empty = Sessions(SLICE, clock=Clock())
    assert empty.position == {}
    after = resumed(stopped(empty, 0), timedelta(seconds=5))
    after.begin(SessionStart(PS, 3 * SLICE))
    assert placed(after, 3 * SLICE) == [5 * SLICE]


def test_nothing_is_placed_before_a_session_begins() -> None:
    with pytest.raises(RuntimeError, match="no session"):
        Sessions(SLICE).to_one_ps(1)


def test_a_utc_that_is_no_date_is_none() -> None:
    assert utc_of("9999-12-31T23:59:59Z", 10 * PS_PER_S) is None
    assert utc_of(None, 0) is None
