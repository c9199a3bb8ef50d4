"""When slices are left out and when not, step by step, with a clock that the test moves."""

from __future__ import annotations

from collections.abc import Generator

import numpy as np

from tagstream.counters import Counters
from tagstream.feeds import IDLE, Arrivals
from tagstream.feeds.shedding import Shedder, shed
from tagstream.settings import Settings
from tests.fakes_outputs import FakeClock
from tests.fakes_settings import make_settings
from tests.feeds.opened import tags_of
from tests.strategies import int64

S = 10**12
STEP = S // 4
SETTINGS: Settings = make_settings()


class Bench:
    """A shedder, and a program whose work takes `cost` wall seconds per stream second."""

    def __init__(self) -> None:
        self.clock, self.busy_s, self.now_ps = FakeClock(), 0.0, 0
        self.shedder = Shedder(S, SETTINGS.conditioning, self.busy, self.clock)

    def busy(self) -> dict[str, float]:
        return {"counting": self.busy_s}

    def play(self, seconds: int, cost: float, speed: float = 1.0) -> list[Arrivals]:
        """Messages of a quarter of a second; the sender waits when it must."""
        found = []
        for _ in range(4 * seconds):
            due = self.clock.now + 0.25 / speed
            begin, self.now_ps = self.now_ps, self.now_ps + STEP
            times = int64([begin + 5, begin + STEP - 1])
            message = Arrivals(times, np.zeros(2, np.uint8), begin, self.now_ps)
            for piece in self.shedder.take(message):
                found.append(piece)
                if not piece.lossy:
                    self.busy_s += 0.25 * cost
                    self.clock.now += 0.25 * cost
            self.clock.now = max(self.clock.now, due)
        return found


def test_nothing_is_left_out_while_it_can_be_processed() -> None:
    bench = Bench()
    assert len(bench.play(100, cost=0.8)) == 400
    assert len(bench.play(100, cost=0.8, speed=50.0)) == 400
    assert len(bench.play(100, cost=3.0, speed=0.2)) == 400
    assert bench.shedder.numbers()["shed_fraction"] == 0
    assert bench.shedder.numbers()["shed_slices"] == 0


def test_whole_slices_are_left_out_until_the_load_allows_all_again() -> None:
    bench = Bench()
    found = bench.play(400, cost=3.0)
    numbers = bench.shedder.numbers()
    assert numbers["cost_s_per_stream_s"] == 3.0
    assert abs(numbers["shed_fraction"] - (1 - 0.85 / 3)) < 1e-9
    kept = [p for p in found if not p.lossy]
    by_slice = np.bincount([(p.begin_ps or 0) // S for p in kept], minlength=400)
    assert set(by_slice.tolist()) == {0, 4}
    assert abs(np.sum(by_slice == 0) - 396 * (1 - 0.85 / 3)) < 30
    assert abs(numbers["shed_slices"] - np.sum(by_slice == 0)) <= 1
    assert len(tags_of(kept)) + sum(p.dropped.get("shed", 0) for p in found) >= 2 * 1600 - 8

    after = bench.play(400, cost=0.5)
    assert bench.shedder.numbers()["shed_fraction"] == 0
    assert not any(p.lossy for p in after[-1000:])


def test_what_is_left_out_is_told_in_time_and_idle_passes() -> None:
    bench = Bench()
    bench.play(60, cost=4.0)
    last_told = bench.clock.now
    while not any(p.lossy for p in bench.play(1, cost=4.0)):
        last_told = bench.clock.now
    assert bench.clock.now - last_told <= 5.0
    assert [p for p in bench.shedder.take(IDLE) if not p.lossy] == [IDLE]


def test_at_the_end_every_tag_is_accounted_for_and_the_source_is_closed() -> None:
    bench = Bench()
    bench.play(60, cost=4.0)
    closed = []

    def source() -> Generator[Arrivals]:
        try:
            for i in range(200):
                begin = bench.now_ps + i * STEP
                yield Arrivals(int64([begin]), np.zeros(1, np.uint8), begin, begin + STEP)
        finally:
            closed.append(True)

    told = list(bench.shedder.finish())
    assert sum(p.times_ps.size for p in told) == 0
    found = list(shed(source(), bench.shedder))
    left_out = sum(p.dropped.get("shed", 0) for p in found)
    assert left_out > 100
    assert len(tags_of(found)) + left_out == 200
    assert closed == [True]
    assert "shed" in Counters().dropped


def test_a_source_that_vouches_for_nothing_goes_back_to_what_it_was() -> None:
    bench = Bench()
    bench.play(60, cost=4.0)
    assert bench.shedder.numbers()["shed_fraction"] > 0.7

    def records(seconds: int, cost: float) -> list[Arrivals]:
        found = []
        for _ in range(seconds * 4):
            begin, bench.now_ps = bench.now_ps, bench.now_ps + STEP
            times = int64(list(range(begin, bench.now_ps, STEP // 50)))
            piece = Arrivals(times, np.zeros(times.size, np.uint8))
            for kept in bench.shedder.take(piece):
                found.append(kept)
                bench.busy_s += 0.0 if kept.lossy else 0.25 * cost
            bench.clock.now += 0.25
        return found

    assert any(p.lossy for p in records(30, 4.0))
    last = records(100, 0.3)[-20:]
    assert all(p.begin_ps is None and not p.lossy for p in last)
