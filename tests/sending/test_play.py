"""Pace, heartbeats, repeats and stops, with time that passes when told to."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

import numpy as np
import pytest

from tagstream.errors import InputError
from tagstream.sending import Portion
from tagstream.sending.play import Conductor, Player
from tagstream.units import PS_PER_S
from tests.strategies import int64

PART_PS = PS_PER_S // 2


class Time:
    """A clock, and waiting that moves it."""

    def __init__(self, stop_at_s: float = float("inf")) -> None:
        self.now_s, self.stop_at_s = 100.0, stop_at_s

    def clock(self) -> float:
        return self.now_s

    def wait(self, seconds: float) -> bool:
        self.now_s += min(seconds, 0.1)
        return self.now_s >= self.stop_at_s


class Noted:
    """A line that notes what it is given, and when."""

    def __init__(self, time: Time) -> None:
        self._time = time
        self.sent: list[tuple[float, int]] = []
        self.beats: list[tuple[float, int]] = []
        self.closed = 0

    def send(self, portion: Portion) -> bool:
        self.sent.append((round(self._time.now_s - 100, 6), portion.end_ps))
        return True

    def heartbeat(self, at_ps: int) -> bool:
        self.beats.append((round(self._time.now_s - 100, 6), at_ps))
        return True

    def close(self) -> None:
        self.closed += 1

    @property
    def counts(self) -> Mapping[str, int]:
        return {"tags": len(self.sent)}


def stream(*ends: int) -> Iterator[Portion]:
    for end in ends:
        yield Portion(end - PART_PS, end, int64([]), np.zeros(0, np.uint8))


def played(time: Time, pace: float | None, times: int, *ends: int) -> tuple[Noted, Player]:
    line = Noted(time)
    conductor = Conductor(pace, time.wait, time.clock)
    player = Player(lambda: stream(*ends), lambda session: line, conductor)
    player.play(times)
    return line, player


@pytest.mark.parametrize(("pace", "times"), [(1.0, [0, 0.5, 1.0]), (2.0, [0, 0.25, 0.5])])
def test_portions_go_when_their_time_has_come(pace: float, times: list[float]) -> None:
    line, player = played(Time(), pace, 1, PART_PS, 2 * PART_PS, 3 * PART_PS)
    assert [at for at, _ in line.sent] == pytest.approx(times)
    assert line.beats == []
    assert player.sent.stream_s == 1.5
    assert player.sent.seconds == pytest.approx(times[-1])


def test_without_a_pace_nothing_waits() -> None:
    line, player = played(Time(), None, 3, PART_PS, 100 * PART_PS)
    assert [at for at, _ in line.sent] == [0] * 6
    assert (player.sent.sessions, player.sent.counts, line.closed) == (3, {"tags": 2 + 4 + 6}, 3)


def test_in_a_gap_there_are_heartbeats() -> None:
    line, _ = played(Time(), 1.0, 1, PART_PS, 8 * PART_PS)
    assert [at for at, _ in line.beats] == pytest.approx([1, 2, 3])
    assert {at for _, at in line.beats} == {7 * PART_PS}


def test_a_stop_ends_all_sessions() -> None:
    line, player = played(Time(stop_at_s=100.7), 1.0, 5, PART_PS, 2 * PART_PS, 3 * PART_PS)
    assert len(line.sent) == 2
    assert (player.sent.sessions, line.closed) == (1, 1)


def test_a_recording_that_breaks_off_is_sent_up_to_there() -> None:
    def broken() -> Iterator[Portion]:
        yield from stream(PART_PS)
        raise InputError("broken")

    time = Time()
    line = Noted(time)
    player = Player(broken, lambda session: line, Conductor(None, time.wait, time.clock))
    with pytest.raises(InputError):
        player.play(2)
    assert player.sent.counts == {"tags": 1}
    assert line.closed == 1
