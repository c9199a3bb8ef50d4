"""What is known of the line: counted by the feed, and judged here."""

from __future__ import annotations

from collections.abc import Generator, Mapping
from typing import Any

import numpy as np

from tagstream.feeds import IDLE, Arrivals, TimeBase
from tagstream.load import Load, RecentLoad
from tagstream.supervision.receiving import LiveReceiving
from tests.fakes_outputs import FakeClock
from tests.fakes_settings import make_settings
from tests.strategies import int64


class Line:
    """A live feed with a link that tests set."""

    time_base = TimeBase(1)  # type: ignore[arg-type]
    truth: dict[str, Any] = {}  # noqa: RUF012
    progress = None

    def __init__(self) -> None:
        self.link: Mapping[str, int | float | str] = {"sequence_missing": 0}

    def pieces(self) -> Generator[Arrivals]:
        yield Arrivals(int64([1]), np.zeros(1, np.uint8), 0, 10)
        yield IDLE


def test_marks_and_pieces_pass_and_a_tap_sees_them() -> None:
    seen: list[Arrivals] = []

    def tap(pieces: Generator[Arrivals]) -> Generator[Arrivals]:
        for piece in pieces:
            seen.append(piece)
            yield piece

    receiving = LiveReceiving(make_settings(), Line(), Load(), True, tap)
    pieces = receiving.pieces()
    first = next(pieces)
    receiving.marks.ask("power", 1.0)
    second = next(pieces)
    assert first.end_ps == 10
    assert [(mark.time_ps, mark.key) for mark in second.marks] == [(10, "power")]
    assert seen == [first, second]
    pieces.close()


def test_what_the_network_loses_counts_as_a_burst_only_while_we_are_behind() -> None:
    line, clock = Line(), FakeClock(0.0)
    load = Load(clock, lambda: 0.0)
    receiving = LiveReceiving(make_settings(), line, load, True)
    receiving._recent = RecentLoad(load, clock)
    clock.now = 1.0
    line.link = {"sequence_missing": 3}
    assert receiving.numbers()["burst_losses"] == 0
    load.add("blocked", 1.9)
    clock.now = 3.0
    line.link = {"sequence_missing": 5}
    told = receiving.numbers()
    assert told["burst_losses"] == 2
    assert told["sequence_missing"] == 5
