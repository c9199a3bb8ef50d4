"""Records in bytes of any lengths, and sessions that follow each other."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tagstream.feeds import IDLE, Arrivals, ResumePoint
from tagstream.feeds.live_records import HAND_ON_S, LiveRecords, Surroundings
from tagstream.settings.feeds import RecordLayout
from tagstream.units import BEYOND_LIMIT_PS, PS_PER_S
from tests.feeds.opened import tags_of
from tests.feeds.records_at_hand import GAP, LAYOUT, ROLLOVER, SLICE_PS, data, tag
from tests.strategies import split


class Clock:
    """Monotonic seconds that pass when told to."""

    now_s = 1000.0

    def __call__(self) -> float:
        return self.now_s


def live(clock: Clock | None = None, resumed: ResumePoint | None = None, **changes: Any) -> Any:
    layout = RecordLayout.model_validate(LAYOUT | changes)
    return LiveRecords(layout, Surroundings(SLICE_PS, resumed, clock or Clock()))


def put(records: LiveRecords, stream: bytes) -> None:
    records.room[: len(stream)] = stream
    records.received(len(stream))


def fed(records: LiveRecords, *parts: bytes) -> list[Arrivals]:
    found = []
    for part in parts:
        put(records, part)
        found += list(records.pieces())
    return found


def test_a_record_may_be_cut_at_every_byte() -> None:
    stream = data(ROLLOVER | 1, tag(9, 3), tag(12), GAP, tag(20, 2))
    whole = [(t, p.gap_before) for p in fed(live(), stream) for t in tags_of([p])]
    assert [gap for _, gap in whole] == [False, False, True]
    for at in range(len(stream) + 1):
        pieces = fed(live(), stream[:at], stream[at:])
        assert tags_of(pieces) == [t for t, _ in whole]
        assert [p.times_ps[0] for p in pieces if p.gap_before] == [whole[2][0][0]]


@given(st.lists(st.integers(0, 2**32 - 1), max_size=20), st.data())
def test_any_records_in_any_parts_are_as_in_one(numbers: list[int], more: st.DataObject) -> None:
    stream = data(*numbers)
    fractions = sorted(more.draw(st.lists(st.floats(0, 1), max_size=6)))
    parts = [bytes(part) for part in split(list(stream), fractions)]
    whole, cut = live(), live()
    assert tags_of(fed(cut, *parts)) == tags_of(fed(whole, stream))
    cut.end_session()
    assert cut.records_cut == 0


def test_a_new_session_goes_on_after_the_time_in_which_nothing_came() -> None:
    clock = Clock()
    records = live(clock)
    (first,) = fed(records, data(tag(100), tag(200)))
    records.end_session()
    clock.now_s += 0.0025  # two and a half slices of 1 ms
    (second,) = fed(records, data(tag(7), tag(9)))
    assert (first.times_ps.tolist(), first.gap_before) == ([100_000, 200_000], False)
    begin = 200_000 + 3 * SLICE_PS
    assert (second.times_ps.tolist(), second.gap_before) == ([begin, begin + 2_000], True)
    assert records.position["origin_ps"] == str(7_000 - begin)


def test_a_session_without_tags_is_none() -> None:
    records = live()
    records.end_session()
    assert fed(records, data(ROLLOVER)) == []
    records.end_session()
    (piece,) = fed(records, data(tag(5)))
    assert (piece.times_ps.tolist(), piece.gap_before) == ([5_000], False)


def test_a_cut_record_is_dropped_and_counted_when_a_session_ends() -> None:
    records = live()
    fed(records, data(ROLLOVER, tag(1), tag(2))[:-1])
    records.end_session()
    (piece,) = fed(records, data(tag(3)))  # neither half a record nor an epoch is left
    assert piece.times_ps.size == 1
    assert records.records_cut == 1


def test_a_resumed_run_goes_on_after_its_end() -> None:
    stopped = datetime.now(UTC) - timedelta(seconds=3)
    resumed = ResumePoint(5 * SLICE_PS, 3, None, {}, stopped.isoformat())
    (piece,) = fed(live(resumed=resumed), data(tag(5)))
    assert piece.gap_before
    assert int(piece.times_ps[0]) >= 5 * SLICE_PS + 3 * PS_PER_S
    assert int(piece.times_ps[0]) % SLICE_PS == 0


def test_what_was_received_is_due_soon_or_when_there_is_no_room() -> None:
    clock = Clock()
    records = live(clock)
    assert list(records.due_pieces()) == [IDLE]
    put(records, data(tag(1)))
    assert list(records.due_pieces()) == []
    assert records.due_s == pytest.approx(HAND_ON_S)
    clock.now_s += HAND_ON_S + 1e-6
    (piece,) = records.due_pieces()
    assert (piece.times_ps.tolist(), piece.arrived_s) == ([1_000], 1000.0)
    put(records, data(ROLLOVER))
    clock.now_s += 1
    assert list(records.due_pieces()) == [IDLE]
    records.received(len(records.room))
    assert records.due_s == 0.0


def test_counts_past_int64_are_beyond_the_limit() -> None:
    steps = [{"where": [31, 1], "equals": 1, "means": "rollover", "step": 2**62}]
    stream = data(tag(7), ROLLOVER, ROLLOVER, ROLLOVER, tag(7))
    (piece,) = fed(live(marker=steps, tick="1 ps"), stream)
    assert piece.times_ps.tolist() == [7, BEYOND_LIMIT_PS]
    (again,) = fed(live(marker=steps, tick="1 ps"), stream[4:])
    assert again.times_ps.tolist() == [BEYOND_LIMIT_PS]


def test_arrays_handed_on_are_their_own() -> None:
    records = live()
    (first,) = fed(records, data(tag(1)))
    before = first.times_ps.copy()
    fed(records, data(tag(60_000)))
    np.testing.assert_array_equal(first.times_ps, before)
