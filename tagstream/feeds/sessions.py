"""Sessions of a source in one stream time.

A source counts ticks from a zero of its own, and begins again when it is restarted or connected
anew. Each session gets its place here: the first one fixes the origin, a later one goes on after
what is there already, and one that is met again after a restart of this program has its old place.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tagstream import units
from tagstream.feeds import ResumePoint, TimeBase
from tagstream.units import PS_PER_S, TickScale

PS_PER_US = 10**6
CACHED_TAGS = 1 << 14  # converted at a time, so that what lies between stays in the cache


@dataclass(frozen=True, slots=True)
class SessionStart:
    """What is known of a session when it begins.

    tick: in ps. first_ticks: the count where it begins. zero_utc: the wall time of count zero,
    ISO 8601 with an offset, if known. name: by which the session is known again after a restart
    of this program; None when it never is, such as that of a connection.
    """

    tick: Fraction
    first_ticks: int
    zero_utc: str | None = None
    name: str | None = None


def _utc_now() -> datetime:
    return datetime.now(UTC)


class Sessions:
    """Native counts to stream time, through all sessions.

    A new session goes on at the old end and a gap: the difference in UTC if both sessions know
    theirs, else the wall time in which nothing came; rounded up to a slice, at least one slice.
    clock: monotonic seconds. now: wall time, needed only after a restart.
    """

    def __init__(
        self,
        slice_ps: int,
        resumed: ResumePoint | None = None,
        clock: Callable[[], float] = time.monotonic,
        now: Callable[[], datetime] = _utc_now,
    ) -> None:
        self._slice_ps, self._clock, self._resumed = slice_ps, clock, resumed
        self._scale: TickScale | None = None
        self._beyond = False  # the session begins past the limit of a run
        self._reached_ps = None if resumed is None else resumed.end_ps
        self._reached_s = clock()
        self._base = TimeBase(Fraction(1))
        self._before: _Place | None = None  # of the session that a new one goes on after
        if resumed is not None:
            self._before = _Place.of_position(resumed.position)
            tick = Fraction(1) if self._before is None else self._before.tick
            self._base = TimeBase(tick, resumed.origin_ticks, resumed.origin_utc)
            passed = now() - parse_utc(resumed.stopped_utc)
            self._reached_s -= max(passed.total_seconds(), 0.0)
        self.count = 0

    @property
    def begun(self) -> bool:
        """Whether there is a session, so that times can be placed."""
        return self._scale is not None

    @property
    def reached_ps(self) -> int | None:
        """How far stream time has come: nothing new may lie before. None at the very beginning."""
        return self._reached_ps

    def reached(self, end_ps: int) -> None:
        """Stream time has come to `end_ps` just now. Not for a single tag: it may be garbage."""
        self._reached_ps = end_ps if self._reached_ps is None else max(end_ps, self._reached_ps)
        self._reached_s = self._clock()

    def begin(self, start: SessionStart) -> None:
        """A session begins, and the last one is over.

        Raises ValueError, as `TickScale`, for a tick that cannot be converted exactly.
        """
        scale = TickScale(start.tick, start.first_ticks, self._slice_ps)
        if self._before is not None and self._before.is_of(start):
            scale = scale.moved(scale.origin_ps - self._before.origin_ps)
        elif self._reached_ps is not None:
            first_ps = rounded_ps(start.first_ticks, start.tick) - scale.origin_ps
            scale = scale.moved(self._reached_ps + self._gap_ps(start) - first_ps)
        if self.count == 0:
            self._base = self._time_base(start, scale)
        self._scale = scale
        self._beyond = abs(self.to_one_ps(start.first_ticks)) >= units.TIME_LIMIT_PS
        self._before = _Place(start.name, start.tick, scale.origin_ps, start.zero_utc)
        self.count += 1

    def to_ps(self, ticks: NDArray[np.int64]) -> NDArray[np.int64]:
        """Stream time of counts of the present session, in a new array."""
        return self.given_up_to_ps(ticks.copy())

    def given_up_to_ps(self, ticks: NDArray[np.int64]) -> NDArray[np.int64]:
        """The same for an array that nobody else needs: where it can be written, its memory is
        used again, for a fresh array of this size costs more than the sum."""
        scale = self._begun()
        if self._beyond:
            return np.full(ticks.shape, units.BEYOND_LIMIT_PS)
        if not ticks.flags.writeable:
            return scale.to_ps(ticks)
        if not _moved_only(scale, ticks):
            for start in range(0, ticks.size, CACHED_TAGS):
                part = ticks[start : start + CACHED_TAGS]
                part[:] = scale.to_ps(part)
        elif scale.origin_ps:
            ticks -= np.int64(scale.origin_ps)
        return ticks

    def to_one_ps(self, ticks: int) -> int:
        """The same of one count, but never beyond the limit of a run: for ends of intervals."""
        scale = self._begun()
        time_ps = rounded_ps(ticks, scale.tick) - scale.origin_ps
        return min(max(time_ps, -units.TIME_LIMIT_PS), units.TIME_LIMIT_PS)

    @property
    def time_base(self) -> TimeBase:
        """That of the run: of the first session, or of the run that is resumed."""
        return self._base

    @property
    def position(self) -> dict[str, Any]:
        """What a later run needs to place the present session again, as JSON; empty before one."""
        return {} if self._before is None else self._before.as_position()

    def _begun(self) -> TickScale:
        if self._scale is None:
            raise RuntimeError("no session has begun")
        return self._scale

    def _gap_ps(self, start: SessionStart) -> int:
        """From the end of what is there to the begin of a new session: whole slices."""
        passed_ps = self._utc_gap_ps(start)
        if passed_ps is None:
            passed_ps = int((self._clock() - self._reached_s) * PS_PER_S)
        return max(-(-passed_ps // self._slice_ps), 1) * self._slice_ps

    def _utc_gap_ps(self, start: SessionStart) -> int | None:
        before = self._before
        if before is None or before.zero_utc is None or start.zero_utc is None:
            return None
        zeros = parse_utc(start.zero_utc) - parse_utc(before.zero_utc)
        ended_ps = (self._reached_ps or 0) + before.origin_ps
        began_ps = rounded_ps(start.first_ticks, start.tick)
        return zeros // timedelta(microseconds=1) * PS_PER_US + began_ps - ended_ps

    def _time_base(self, start: SessionStart, scale: TickScale) -> TimeBase:
        if self._resumed is not None:
            return TimeBase(start.tick, self._resumed.origin_ticks, self._resumed.origin_utc)
        utc = utc_of(start.zero_utc, scale.origin_ps)
        return TimeBase(start.tick, scale.origin_ticks, utc)


@dataclass(frozen=True, slots=True)
class _Place:
    """Where a session lies. origin_ps: time after its own zero at which stream time is zero."""

    name: str | None
    tick: Fraction
    origin_ps: int
    zero_utc: str | None

    def is_of(self, start: SessionStart) -> bool:
        """Whether the session goes on, so that its counts mean what they meant before."""
        return self.name is not None and (self.name, self.tick) == (start.name, start.tick)

    def as_position(self) -> dict[str, Any]:
        tick = units.format_time(self.tick)
        place = {"session": self.name, "tick": tick, "zero_utc": self.zero_utc}
        return place | {"origin_ps": str(self.origin_ps)}  # may exceed 64 bits

    @classmethod
    def of_position(cls, position: Mapping[str, Any]) -> _Place | None:
        """None where the run that is resumed has met no session."""
        if "origin_ps" not in position:
            return None
        tick = units.parse_time(position["tick"])
        origin_ps = int(position["origin_ps"])
        return cls(position["session"], tick, origin_ps, position["zero_utc"])


def rounded_ps(ticks: int, tick: Fraction) -> int:
    """Picoseconds of a count, exactly, rounded half up as `TickScale` does."""
    exact = ticks * tick
    return (2 * exact.numerator + exact.denominator) // (2 * exact.denominator)


def parse_utc(text: str) -> datetime:
    """A wall time from ISO 8601. Raises ValueError unless it has an offset, or Z."""
    moment = datetime.fromisoformat(text)
    if moment.tzinfo is None:
        raise ValueError('a time with its offset, such as "2026-12-01T12:00:00Z"')
    return moment.astimezone(UTC)


def utc_of(zero_utc: str | None, after_ps: int) -> str | None:
    """The wall time `after_ps` after another one; None if that is not known, or no date."""
    if zero_utc is None:
        return None
    try:
        moment = parse_utc(zero_utc) + timedelta(microseconds=after_ps // PS_PER_US)
    except OverflowError:
        return None
    return moment.isoformat()


def _moved_only(scale: TickScale, ticks: NDArray[np.int64]) -> bool:
    """Whether all counts are picoseconds, from another zero, and within the limit of a run."""
    if scale.tick != 1 or ticks.size == 0 or abs(scale.origin_ps) > 2**62:
        return False
    first = scale.first_ticks
    reach = units.TIME_LIMIT_PS - abs(first - scale.origin_ps)
    return first - reach <= int(ticks.min()) and int(ticks.max()) <= first + reach
