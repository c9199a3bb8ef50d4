"""What becomes of messages: in turn, missing, repeated, of others, of a restarted sender."""

from __future__ import annotations

from dataclasses import replace
from datetime import UTC, datetime, timedelta
from fractions import Fraction
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tagstream.feeds import IDLE, PIECE_TAGS, Arrivals, ResumePoint
from tagstream.feeds.message_stream import MessageStream, narrowed
from tagstream.feeds.messages import MessageError, TagsMessage
from tagstream.feeds.sessions import Sessions
from tagstream.units import PS_PER_S
from tests.feeds.messages_at_hand import HEADER, message
from tests.feeds.opened import tags_of

SLICE = 1000
NOON = datetime(2026, 12, 1, 12, tzinfo=UTC)


class Sender:
    """Hands messages to a stream and keeps what comes out."""

    def __init__(self, stream: str | None = None, resumed: ResumePoint | None = None) -> None:
        self.seconds = 0.0
        now = NOON + timedelta(microseconds=2)
        self.sessions = Sessions(SLICE, resumed, lambda: self.seconds, lambda: now)
        self.stream = MessageStream(self.sessions, stream, resumed)
        self.got: list[Arrivals] = []

    def send(self, *messages: TagsMessage) -> Sender:
        for each in messages:
            self.got += self.stream.take(each, 1.5)
        return self

    def count(self, name: str) -> object:
        return self.stream.counts[name]

    @property
    def intervals(self) -> list[tuple[int | None, int | None, bool]]:
        return [(piece.begin_ps, piece.end_ps, piece.gap_before) for piece in self.got]

    @property
    def dropped(self) -> dict[str, int]:
        pieces = [*self.got, self.stream.idle()]
        reasons = {reason for piece in pieces for reason in piece.dropped}
        return {reason: sum(p.dropped.get(reason, 0) for p in pieces) for reason in reasons}


def test_messages_in_turn_are_one_covered_stretch() -> None:
    sender = Sender().send(
        message(0, 5010, 5020, [(5010, 1), (5019, 2)]),
        message(1, 5020, 5020),
        message(2, 5020, 5030, [(5025, 300)]),
    )
    assert sender.intervals == [(10, 20, False), (20, 20, False), (20, 30, False)]
    assert tags_of(sender.got) == [(10, 1), (19, 2), (25, 300)]
    assert [piece.inputs.dtype for piece in sender.got] == [np.uint8, np.uint8, np.uint16]
    assert {piece.arrived_s for piece in sender.got} == {1.5}
    assert sender.sessions.time_base.origin_ticks == 5000
    assert (sender.count("sessions"), sender.count("sequence_missing")) == (1, 0)
    assert sender.stream.idle() is IDLE


def test_a_first_message_that_is_not_number_0_is_no_loss() -> None:
    sender = Sender().send(message(41, 0, 10), message(42, 10, 20))
    assert sender.intervals == [(0, 10, False), (10, 20, False)]
    assert sender.count("sequence_missing") == 0


def test_missing_messages_are_counted_and_a_gap() -> None:
    sender = Sender().send(message(0, 0, 10), message(4, 10, 20), message(5, 20, 30))
    assert sender.intervals == [(0, 10, False), (10, 20, True), (20, 30, False)]
    assert sender.count("sequence_missing") == 3


def test_a_pause_that_nobody_covers_is_a_gap() -> None:
    sender = Sender().send(message(0, 0, 10), message(1, 15, 20))
    assert sender.intervals == [(0, 10, False), (15, 20, True)]


def test_repeated_and_late_messages_are_dropped_and_told_apart() -> None:
    sender = Sender().send(
        message(0, 0, 10),
        message(2, 20, 30),
        message(1, 10, 20, [(11, 1)]),
        message(2, 20, 30, [(21, 1), (22, 1)]),
        message(3, 30, 40),
    )
    assert sender.intervals == [(0, 10, False), (20, 30, True), (30, 40, False)]
    assert (sender.count("sequence_out_of_order"), sender.count("sequence_repeated")) == (1, 1)
    assert sender.dropped == {"repeated": 3}
    assert sender.got[-1].dropped == {"repeated": 3}


def test_time_that_was_covered_before_is_not_covered_again() -> None:
    sender = Sender().send(
        message(0, 0, 10), message(1, 9, 20, [(12, 1)]), message(2, 20, 30, [(22, 1)])
    )
    assert sender.intervals == [(0, 10, False), (20, 30, True)]
    assert sender.dropped == {"overlap": 1}
    assert sender.count("overlapping") == 1


def test_lost_tags_make_the_interval_a_gap_of_its_own() -> None:
    sender = Sender().send(message(0, 0, 10), message(1, 10, 20, [(12, 1)], lost=7))
    assert [piece.lossy for piece in sender.got] == [False, True]
    assert sender.count("lost_tags") == 7
    assert tags_of(sender.got) == [(12, 1)]


@pytest.mark.parametrize("stream", [None, "lab"])
def test_other_streams_are_counted_and_dropped(stream: str | None) -> None:
    other = message(9, 500, 600, [(501, 1)], stream="other")
    sender = Sender(stream).send(message(0, 0, 10), other, message(1, 10, 20))
    assert sender.intervals == [(0, 10, False), (10, 20, False)]
    assert sender.dropped == {"foreign_stream": 1}
    assert (sender.count("foreign_messages"), sender.count("stream")) == (1, "lab")


def test_a_stream_that_is_named_is_waited_for() -> None:
    sender = Sender("other").send(message(0, 0, 10, [(1, 1)]))
    assert sender.got == []
    idle = sender.stream.idle()
    assert (idle.begin_ps, idle.times_ps.size) == (None, 0)
    assert idle.dropped == {"foreign_stream": 1}
    assert sender.stream.idle() is IDLE


def test_a_restarted_sender_goes_on_after_the_silence() -> None:
    sender = Sender().send(message(0, 0, 1500))
    sender.seconds = 2.5 * SLICE / PS_PER_S
    again: dict[str, Any] = {"session": "second start"}
    sender.send(message(0, 70, 80, [(75, 1)], **again), message(1, 80, 90, **again))
    assert sender.intervals[1:] == [(4500, 4510, True), (4510, 4520, False)]
    assert tags_of(sender.got) == [(4505, 1)]
    assert (sender.count("sessions"), sender.count("session")) == (2, "second start")
    assert sender.count("sequence_missing") == 0


def test_a_restarted_sender_may_count_in_another_tick() -> None:
    again: dict[str, Any] = {"session": "second start", "tick": Fraction(10)}
    sender = Sender().send(message(0, 0, 1000), message(2, 5, 15, [(6, 1)], **again))
    assert tags_of(sender.got) == [(2010, 1)]
    assert sender.count("sequence_missing") == 2


def test_stragglers_of_a_session_that_is_over_are_out_of_turn() -> None:
    sender = Sender().send(
        message(0, 0, 10),
        message(0, 0, 10, session="second start"),
        message(1, 10, 20, [(11, 1)]),
        message(1, 10, 20, session="second start"),
    )
    assert [gap for _, _, gap in sender.intervals] == [False, True, False]
    assert sender.dropped == {"repeated": 1}
    assert sender.count("sequence_out_of_order") == 1


@pytest.mark.parametrize(
    "changed", [{"tick": Fraction(2)}, {"zero_utc": "2026-12-01T12:00:00Z"}], ids=str
)
def test_what_must_not_change_in_a_session_is_malformed_and_missing(
    changed: dict[str, Any],
) -> None:
    sender = Sender().send(message(0, 0, 10))
    with pytest.raises(MessageError, match="changed within a session"):
        sender.send(message(1, 10, 20, **changed))
    sender.send(message(2, 20, 30))
    assert sender.intervals == [(0, 10, False), (20, 30, True)]


def test_a_large_message_comes_in_pieces_of_one_interval() -> None:
    size = 2 * PIECE_TAGS + 5
    ticks = np.arange(size, dtype=np.int64)
    header = replace(HEADER, count=size, end=size)
    sender = Sender().send(
        TagsMessage(header, ticks.copy(), np.ones(size, np.uint16)), message(1, size, size + 5)
    )
    assert [piece.times_ps.size for piece in sender.got] == [PIECE_TAGS, PIECE_TAGS, 5, 0]
    assert [piece.complete for piece in sender.got] == [False, False, True, True]
    assert {(piece.begin_ps, piece.end_ps) for piece in sender.got[:3]} == {(0, size)}
    assert np.array_equal(np.concatenate([piece.times_ps for piece in sender.got]), ticks)


def test_the_end_of_an_interval_is_placed_as_its_tags_are() -> None:
    third = Fraction(4, 3)  # ps
    sender = Sender().send(
        message(0, 1, 5, [(1, 1), (4, 1)], tick=third), message(1, 5, 9, [(5, 1)], tick=third)
    )
    assert sender.intervals == [(1, 7, False), (7, 12, False)]
    assert tags_of(sender.got) == [(1, 1), (5, 1), (7, 1)]


def test_a_bad_message_is_counted_and_remembered() -> None:
    sender = Sender()
    sender.stream.received(100)
    sender.stream.bad("no JSON", bytes(range(100)))
    counts = sender.stream.counts
    assert (counts["messages"], counts["bytes_received"], counts["malformed"]) == (1, 100, 1)
    assert (counts["last_error"], counts["last_error_count"]) == ("no JSON", 1)
    assert bytes.fromhex(str(counts["last_error_bytes"])) == bytes(range(64))
    assert datetime.fromisoformat(str(counts["last_error_utc"])).tzinfo is not None


def resumed_after(sender: Sender, end_ps: int) -> Sender:
    base = sender.sessions.time_base
    point = ResumePoint(
        end_ps, base.origin_ticks, base.origin_utc, sender.stream.position, NOON.isoformat()
    )
    return Sender(resumed=point)


def test_after_a_restart_the_session_goes_on_with_a_gap() -> None:
    before = Sender().send(message(0, 7000, 7010), message(1, 7010, 8200))
    after = resumed_after(before, 1200)
    other = message(4, 9000, 9010, [(9001, 1)], stream="other")
    after.send(other, message(2, 8190, 8210, [(8195, 1)]), message(4, 9000, 9010, [(9001, 1)]))
    assert after.intervals == [(2000, 2010, True)]
    assert tags_of(after.got) == [(2001, 1)]
    assert after.dropped == {"overlap": 1, "foreign_stream": 1}
    assert after.count("sequence_missing") == 1


def test_after_a_restart_a_new_session_goes_on_after_the_time_since() -> None:
    before = Sender().send(message(0, 7000, 7010))
    after = resumed_after(before, 500).send(message(3, 0, 10, session="second start"))
    assert after.intervals == [(2_000_500, 2_000_510, True)]
    assert after.sessions.time_base.origin_ticks == 7000


@given(
    st.lists(
        st.tuples(
            st.integers(0, 8), st.integers(0, 100), st.integers(0, 30), st.integers(0, 3),
            st.sampled_from(["lab", "lab", "lab", "other"]),
            st.sampled_from(["one", "one", "two", "three"]),
        ),
        max_size=30,
    )
)  # fmt: skip
def test_no_tag_is_lost_unseen_and_nothing_is_covered_twice(
    sent: list[tuple[int, int, int, int, str, str]],
) -> None:
    sender = Sender("lab")
    total = 0
    for sequence, begin, length, count, stream, session in sent:
        tags = [(begin, 1)] * count
        total += count
        sender.send(message(sequence, begin, begin + length, tags, stream=stream, session=session))
    assert len(tags_of(sender.got)) + sum(sender.dropped.values()) == total
    reached = None
    for begin_ps, end_ps, gap in sender.intervals:
        assert begin_ps is not None
        assert end_ps is not None
        assert reached is None or begin_ps >= reached
        assert gap or reached in (None, begin_ps)
        reached = end_ps


def test_inputs_take_one_byte_where_they_fit() -> None:
    assert narrowed(np.array([0, 255], np.uint16)).dtype == np.uint8
    assert narrowed(np.array([0, 256], np.uint16)).tolist() == [0, 256]
    assert narrowed(np.zeros(0, np.uint16)).dtype == np.uint8
