"""Marks through conditioning: shifted with the tags, in order, before any block reaches them."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

from hypothesis import given
from hypothesis import strategies as st

from tagstream.conditioning import conditioned
from tagstream.feeds import IDLE, Arrivals
from tagstream.recording.layout import Mark
from tests.fakes_settings import make_settings
from tests.strategies import arrivals

S = 10**12


def test_marks_come_with_their_piece_shifted_by_the_largest_delay() -> None:
    first, second = Mark(5, "p", 1.0), Mark(5, "q", "H")
    pieces = [
        arrivals([(5, 0)], marks=(first, second)),
        arrivals([(9, 0)], marks=(Mark(2, "p", 3.0),)),
    ]
    found = [c.marks for c in conditioned(pieces, make_settings(delays=[-10, 40, 0]))]
    assert found == [(Mark(45, "p", 1.0), Mark(45, "q", "H")), (Mark(42, "p", 3.0),), ()]


def test_negative_delays_shift_marks_back() -> None:
    pieces = [arrivals([(5, 0)], marks=(Mark(100, "p", 1.0),))]
    (found, _) = conditioned(pieces, make_settings(delays=[-10, -20, -30]))
    assert found.marks == (Mark(90, "p", 1.0),)


def test_marks_follow_a_source_that_starts_again() -> None:
    first, again = [(30 * S + i, 0) for i in range(20)], [(i, 0) for i in range(20)]
    pieces = [arrivals(first), arrivals(again), arrivals([(25, 0)], marks=(Mark(22, "p", 1.0),))]
    found = list(conditioned(pieces, make_settings()))
    assert found[2].marks == (Mark(31 * S + 22, "p", 1.0),)


def test_a_mark_in_a_pause_interrupts_nothing() -> None:
    mark = Mark(10, "p", 1.0)
    pieces = [
        arrivals([(5, 0)], begin_ps=0, end_ps=10),
        replace(IDLE, marks=(mark,), dropped={"repeated": 3}),
        arrivals([(15, 0)], begin_ps=10, end_ps=20),
    ]
    found = list(conditioned(pieces, make_settings()))
    assert found[1].marks == (mark,)
    assert found[-1].counters.gaps == 0
    assert found[-1].counters.dropped["repeated"] == 3
    assert [b.opens for c in found for b in c.blocks] == [True, False]


@st.composite
def streams(draw: Any) -> list[Arrivals]:
    """Pieces of one kind, each with a mark at the newest end that had been received before it."""
    vouched = draw(st.booleans())
    end, newest, pieces = 0, 0, []
    for number in range(draw(st.integers(1, 8))):
        mark = (Mark(newest, "p", float(number)),) if number else ()
        begin = end + draw(st.sampled_from([0, 0, 30]))
        end = begin + draw(st.integers(1, 60))
        low = begin if vouched else max(begin - 25, 0)
        events = draw(st.lists(st.tuples(st.integers(low, end - 1), st.integers(0, 2)), max_size=9))
        gap, lossy = draw(st.booleans()), draw(st.booleans())
        more: dict[str, Any] = {"gap_before": gap, "marks": mark}
        if vouched:
            complete = draw(st.booleans())
            more |= {"begin_ps": begin, "end_ps": end, "complete": complete, "lossy": lossy}
        else:
            complete = False
        pieces.append(arrivals(events, **more))
        newest = max(newest, end if complete else 0, *(t + 1 for t, _ in events))
    return pieces


@given(
    streams(),
    st.lists(st.integers(-80, 80), min_size=3, max_size=3),
    st.integers(0, 20),
)
def test_no_block_has_reached_a_mark_before_it_comes(
    pieces: list[Arrivals], delays: list[int], disorder: int
) -> None:
    reached = -(2**62)
    settings = make_settings(delays=delays, max_disorder=f"{disorder} ps")
    for found in conditioned(pieces, settings):
        assert all(mark.time_ps >= reached for mark in found.marks)
        reached = max([reached, *(block.end_ps for block in found.blocks)])
