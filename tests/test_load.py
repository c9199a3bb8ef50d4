"""Busy seconds by stage: work counts, waiting does not."""

from __future__ import annotations

from collections.abc import Generator, Iterator

import pytest

from tagstream.load import Load, RecentLoad, limiting
from tests.fakes_outputs import FakeClock


def slow(clock: FakeClock, seconds: float, items: int) -> Generator[int]:
    for item in range(1, items + 1):
        clock.now += seconds
        yield item


def test_waiting_for_the_source_is_no_work() -> None:
    clock = FakeClock()
    load = Load(clock)

    def work(items: Iterator[int]) -> Generator[int]:
        for item in items:
            clock.now += 2.0
            yield 10 * item
        clock.now += 5.0
        yield 99

    found = []
    for result in load.timed("counting", slow(clock, 7.0, 3), work):
        clock.now += 100.0
        found.append(result)
    assert found == [10, 20, 30, 99]
    assert load.of_what_is_kept() == {"conditioning": 0, "counting": 11.0, "files": 0}
    assert load.totals() == {**load.of_what_is_kept(), "receiving": 0, "blocked": 0}


def test_of_a_source_that_waits_for_others_the_processor_time_counts() -> None:
    wall, clock = FakeClock(), FakeClock()
    load = Load(wall, cpu_clock=clock)
    for _ in load.timed_cpu("receiving", slow(clock, 0.5, 4)):
        wall.now += 3.0
    assert load.totals()["receiving"] == 2.0
    assert load.totals()["blocked"] == 12.0


def test_leaving_early_or_failing_closes_what_is_inside() -> None:
    closed = []

    def source() -> Generator[int]:
        try:
            yield from (1, 2, 3)
        finally:
            closed.append("source")

    def work(items: Iterator[int]) -> Generator[int]:
        try:
            yield from items
        finally:
            closed.append("work")

    load = Load()
    inner = source()
    results = load.timed("counting", inner, work)
    next(results)
    results.close()
    assert closed == ["work"]
    cpu = load.timed_cpu("receiving", source())
    next(cpu)
    cpu.close()
    assert closed == ["work", "source"]


def test_what_is_done_inside_counts_also_when_it_fails() -> None:
    clock = FakeClock()
    load = Load(clock)
    with load.busy("files"):
        clock.now += 1.5

    def fail() -> None:
        with load.busy("files"):
            clock.now += 0.5
            raise OSError("full")

    with pytest.raises(OSError, match="full"):
        fail()
    assert load.totals()["files"] == 2.0


def test_fractions_are_those_of_the_last_ten_seconds() -> None:
    clock = FakeClock()
    load = Load(clock)
    recent = RecentLoad(load, clock)
    assert set(recent.look().values()) == {0.0}
    for second in range(30):
        clock.now += 1.0
        load.add("counting", 0.9 if second < 15 else 0.3)
        load.add("files", 0.5)
        load.add("blocked", 1.0)
        found = recent.look()
        if second == 14:
            assert found["counting"] == pytest.approx(0.9)
            assert limiting(found) == "counting"
    assert found["counting"] == pytest.approx(0.3)
    assert limiting(found) == "files"
