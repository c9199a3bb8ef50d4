"""Plays portions to a line, at the pace of their own clock or as fast as the line takes them."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field

from tagstream.sending import Line, Portion
from tagstream.units import PS_PER_S

HEARTBEAT_S = 1.0  # a sender that has nothing to send says so at least this often


@dataclass(slots=True)
class Sent:
    """What was sent so far. counts: as those of the line, of all sessions together."""

    sessions: int = 0
    stream_s: float = 0.0
    seconds: float = 0.0
    counts: dict[str, int] = field(default_factory=dict)

    def add(self, counts: Mapping[str, int]) -> None:
        """Count what a line did."""
        for name, count in counts.items():
            self.counts[name] = self.counts.get(name, 0) + count


@dataclass(frozen=True, slots=True)
class Conductor:
    """What tells a player when. pace: stream seconds per second, None: as fast as possible.

    wait: sleeps up to some seconds; True when a stop was asked for.
    """

    pace: float | None
    wait: Callable[[float], bool]
    clock: Callable[[], float] = time.monotonic


class Player:
    """Plays a recording once or several times, each time as a new session.

    portions: called for each session. open_line: called with the number of the session, from 0.
    """

    def __init__(
        self,
        portions: Callable[[], Iterator[Portion]],
        open_line: Callable[[int], Line],
        conductor: Conductor,
    ) -> None:
        self._portions, self._open_line, self._conductor = portions, open_line, conductor
        self.sent = Sent()

    def play(self, times: int) -> None:
        """Play until the end, or until a stop is asked for. `sent` tells how far it came."""
        began_s = self._conductor.clock()
        for session in range(times):
            line = self._open_line(session)
            try:
                goes_on = self._play_to(line)
            finally:
                line.close()
                self.sent.add(line.counts)
                self.sent.seconds = self._conductor.clock() - began_s
            self.sent.sessions += 1
            if not goes_on:
                break

    def _play_to(self, line: Line) -> bool:
        """Whether the whole recording was sent."""
        zero: tuple[float, int] | None = None
        for portion in self._portions():
            if zero is not None and not self._until(self._due_s(zero, portion), line, portion):
                return False
            if not line.send(portion):
                return False
            if zero is None:  # time begins when somebody has taken the first portion
                zero = self._conductor.clock(), portion.end_ps
            self.sent.stream_s += (portion.end_ps - portion.begin_ps) / PS_PER_S
        return True

    def _due_s(self, zero: tuple[float, int], portion: Portion) -> float:
        pace = self._conductor.pace
        return zero[0] if pace is None else zero[0] + (portion.end_ps - zero[1]) / PS_PER_S / pace

    def _until(self, due_s: float, line: Line, portion: Portion) -> bool:
        """Wait for the time of a portion; False when a stop was asked for before."""
        conductor = self._conductor
        beat_s = conductor.clock() + HEARTBEAT_S
        while (left_s := due_s - (now_s := conductor.clock())) > 0:
            if now_s >= beat_s:
                beat_s = now_s + HEARTBEAT_S
                if not line.heartbeat(portion.begin_ps):
                    return False
            if conductor.wait(min(left_s, beat_s - now_s)):
                return False
        return not conductor.wait(0.0)
