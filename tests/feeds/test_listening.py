"""What a feed shows in a moment: counted by hand on small pieces."""

from __future__ import annotations

from collections.abc import Generator

import numpy as np
import pytest

from tagstream.feeds import IDLE, Arrivals
from tagstream.feeds.listening import (
    Heard,
    HeardInput,
    Listening,
    heard_from_feed,
    listen,
    right_disorder_ps,
)
from tests.fakes_outputs import FakeClock
from tests.fakes_settings import make_settings
from tests.flow.program import ROOT
from tests.strategies import int64

S = 10**12
JUMP = 10 * S


def piece(tags: list[tuple[int, int]], **more: object) -> Arrivals:
    inputs = np.array([i for _, i in tags], np.uint16)
    return Arrivals(int64([t for t, _ in tags]), inputs, **more)  # type: ignore[arg-type]


def heard(*pieces: Arrivals) -> Heard:
    listening = Listening(JUMP)
    for p in pieces:
        listening.add(p)
    return listening.report(5.0, {"messages": 3})


def test_inputs_rates_and_disorder_across_pieces() -> None:
    found = heard(
        piece([(0, 3), (700, 700), (500, 3)], begin_ps=0, end_ps=S),
        IDLE,
        piece([(S + 5, 3), (S + 1, 3), (650, 700)], begin_ps=S, end_ps=2 * S),
    )
    assert found.inputs == (HeardInput(3, 4, 2.0, 200), HeardInput(700, 2, 1.0, S + 5 - 650))
    assert (found.stream_s, found.vouched, found.gaps, found.lossy, found.far) == (2, True, 0, 0, 0)
    assert found.rate_hz == 3.0
    assert found.largest_disorder_ps == S - 645
    assert found.link == {"messages": 3}


def test_holes_gaps_losses_and_what_the_feed_dropped_are_counted() -> None:
    found = heard(
        piece([(1, 0)], begin_ps=0, end_ps=S, complete=False),
        piece([(2, 0)], begin_ps=0, end_ps=S, dropped={"repeated": 4}),
        piece([], begin_ps=2 * S, end_ps=3 * S, dropped={"repeated": 1, "overlap": 2}),
        piece([], begin_ps=3 * S, end_ps=4 * S, lossy=True, gap_before=True),
    )
    assert (found.gaps, found.lossy, found.stream_s) == (2, 1, 3)
    assert found.dropped == {"repeated": 5, "overlap": 2}


def test_without_intervals_time_runs_from_first_to_last_tag_of_each_stretch() -> None:
    found = heard(
        piece([(5 * S, 0), (7 * S, 0)]),
        piece([(8 * S, 0)]),
        piece([(90 * S, 0), (91 * S, 0)], gap_before=True),
    )
    assert (found.stream_s, found.vouched, found.gaps) == (4.0, False, 1)


def test_garbage_and_new_sessions_tell_nothing_of_disorder() -> None:
    found = heard(
        piece([(S, 0), (10**17, 0), (S + 100, 0), (S + 40, 0)]),
        piece([(S + 200, 0), (S + 300, 0)]),
        piece([(900 * S, 0), (901 * S, 0)]),
        piece([(0, 0), (7, 0)]),
    )
    assert found.far == 1
    (only,) = found.inputs
    assert (only.tags, only.largest_disorder_ps) == (10, 60)
    assert found.stream_s == pytest.approx(1.0, abs=1e-9)


def test_silence_is_heard_as_such() -> None:
    found = heard(IDLE, IDLE)
    assert (found.inputs, found.stream_s, found.largest_disorder_ps) == ((), 0.0, 0)
    alone = heard(piece([(5, 2)]))
    assert np.isnan(alone.inputs[0].rate_hz)


@pytest.mark.parametrize(
    ("largest", "right"),
    [(0, 10**6), (500_000, 10**6), (500_001, 2 * 10**6), (2_100_000, 5 * 10**6), (S, 2 * S)],
)
def test_a_right_disorder_is_twice_the_largest_rounded_up(largest: int, right: int) -> None:
    assert right_disorder_ps(largest) == right


def test_listening_ends_in_time_and_closes_the_feed() -> None:
    clock, closed = FakeClock(), []

    def endless() -> Generator[Arrivals]:
        try:
            while True:
                clock.now += 0.1
                yield IDLE
        finally:
            closed.append(True)

    listening = Listening(JUMP)
    assert 5.0 <= listen(endless(), listening, lambda s: s >= 5.0, clock) < 5.2
    assert closed == [True]


def test_a_feed_of_the_settings_is_opened_alone() -> None:
    scenario = str(ROOT / "config/scenarios/emitter-pulsed.toml")
    feed = {"kind": "simulation", "scenario": scenario, "duration": "100 ms"}
    found = heard_from_feed(make_settings(feed=feed), lambda seconds: False)
    assert [row.input for row in found.inputs] == [1, 2]
    assert found.stream_s == 0.1
