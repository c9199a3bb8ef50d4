"""Marks find their place in the stream, never before what it has reached."""

from __future__ import annotations

from collections.abc import Generator

import numpy as np

from tagstream.feeds import IDLE, Arrivals
from tagstream.feeds.marking import MarkEntry, marked
from tagstream.recording.layout import Mark
from tests.strategies import int64

JUMP_PS = 10**13


def piece(times: list[int], begin: int | None = None, end: int | None = None) -> Arrivals:
    return Arrivals(int64(times), np.zeros(len(times), np.uint8), begin, end)


def through(pieces: list[Arrivals], entry: MarkEntry, at: int) -> list[tuple[Mark, ...]]:
    """The marks of each piece; one is asked for just before number `at` comes."""

    def source() -> Generator[Arrivals]:
        for number, one in enumerate(pieces):
            if number == at:
                entry.ask("power", 2.5)
            yield one

    return [one.marks for one in marked(source(), entry)]


def test_a_mark_takes_effect_at_the_end_of_the_newest_interval() -> None:
    found = through([piece([5], 0, 100), piece([150], 100, 200)], MarkEntry(JUMP_PS), 1)
    assert found == [(), (Mark(100, "power", 2.5),)]


def test_an_interval_that_is_not_complete_does_not_count() -> None:
    first = piece([5], 0, 100)
    part = Arrivals(int64([120]), np.zeros(1, np.uint8), 100, 200, complete=False)
    found = through([first, part, piece([130], 100, 200)], MarkEntry(JUMP_PS), 2)
    assert found[2] == (Mark(100, "power", 2.5),)


def test_where_nothing_is_vouched_it_follows_the_latest_tag_but_no_lone_far_one() -> None:
    far = 10**16
    found = through([piece([5, 90, 70]), piece([95, far]), IDLE], MarkEntry(JUMP_PS), 2)
    assert found[2] == (Mark(96, "power", 2.5),)
    first_is_far = through([piece([5, far, 90, 70]), IDLE], MarkEntry(JUMP_PS), 1)
    assert first_is_far[1] == (Mark(91, "power", 2.5),)


def test_after_a_jump_the_stream_is_where_its_tags_are() -> None:
    later = 5 * 10**13
    found = through([piece([5]), piece([later, later + 7]), IDLE], MarkEntry(JUMP_PS), 2)
    assert found[2] == (Mark(later + 8, "power", 2.5),)


def test_a_mark_waits_for_the_stream_to_begin_and_idle_pieces_carry_it() -> None:
    found = through([IDLE, piece([5], 0, 100), IDLE], MarkEntry(JUMP_PS), 0)
    assert found == [(), (), (Mark(100, "power", 2.5),)]


def test_a_time_of_its_own_holds_unless_it_has_passed() -> None:
    waits: list[float] = []
    now = [7.0]
    entry = MarkEntry(JUMP_PS, lambda mark, waited_s: waits.append(waited_s), lambda: now[0])
    entry.see(piece([5], 0, 100))
    entry.ask("a", 1.0, 250)
    entry.ask("b", "x", 50)
    now[0] = 7.5
    assert entry.marks() == (Mark(250, "a", 1.0), Mark(100, "b", "x"))
    assert waits == [0.5, 0.5]
