"""Described records that arrive while they are made, in bytes of any lengths.

Where they come from (a socket, standard input, a growing file) puts them into the buffer; a
record that is cut in two by a packet is put together here.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tagstream import units
from tagstream.feeds import IDLE, IDLE_S, PIECE_TAGS, Arrivals, ResumePoint, TimeBase
from tagstream.feeds.assumed import JUDGES, position_ps
from tagstream.feeds.records import RecordDecoder
from tagstream.feeds.sessions import Sessions, SessionStart
from tagstream.feeds.ticks import SATURATED, TickPiece
from tagstream.settings.feeds import RecordLayout

HAND_ON_S = 0.05  # what was received waits no longer than this for more


@dataclass(frozen=True, slots=True)
class Surroundings:
    """What a feed of live records is built with. resumed: as for `feeds.build_live_feed`."""

    slice_ps: int
    resumed: ResumePoint | None = None
    clock: Callable[[], float] = time.monotonic


class LiveRecords:
    """Bytes as they arrive to pieces of the stream.

    Put bytes into `room`, tell `received` how many; `pieces` decodes what is there, due or not.
    Nobody vouches for anything. After `end_session` the next tag begins a session: stream time
    goes on there after the time in which nothing came.
    """

    def __init__(self, layout: RecordLayout, around: Surroundings) -> None:
        self._layout, self._clock = layout, around.clock
        self._sessions = Sessions(around.slice_ps, around.resumed, around.clock)
        self._decoder = RecordDecoder(layout)
        self._buffer = memoryview(bytearray(PIECE_TAGS * layout.record_bytes))
        self._filled = 0
        self._arrived_s: float | None = None  # the first of what is in the buffer
        self._in_session = False
        self._gap = around.resumed is not None
        self.records_cut = 0

    @property
    def room(self) -> memoryview:
        """Where the next bytes go; never empty after `pieces`."""
        return self._buffer[self._filled :]

    def received(self, count: int) -> None:
        """`count` bytes were put into `room`."""
        if self._arrived_s is None and count:
            self._arrived_s = self._clock()
        self._filled += count

    @property
    def due_s(self) -> float:
        """Seconds until what was received is to be handed on; infinite when there is nothing."""
        if self._arrived_s is None:
            return float("inf")
        if self._filled == len(self._buffer):
            return 0.0
        return max(self._arrived_s + HAND_ON_S - self._clock(), 0.0)

    def pieces(self) -> Iterator[Arrivals]:
        """The tags of all whole records that are there."""
        arrived_s, self._arrived_s = self._arrived_s, None
        whole = self._filled - self._filled % self._layout.record_bytes
        found = self._decoder.feed(self._buffer[:whole])
        rest = self._filled - whole
        self._buffer[:rest] = self._buffer[whole : self._filled]
        self._filled = rest
        for piece in found:
            yield self._arrivals(piece, arrived_s)

    def due_pieces(self) -> Iterator[Arrivals]:
        """What is due; `IDLE` when there is nothing at all, or nothing but markers."""
        if self.due_s == float("inf"):
            yield IDLE
        elif self.due_s <= 0:
            handed_on = False
            for piece in self.pieces():
                yield piece
                handed_on = True
            if not handed_on:
                yield IDLE

    def end_session(self) -> None:
        """Nothing more belongs to what came so far; a record that is cut off is lost."""
        self.records_cut += self._filled > 0
        self._filled, self._arrived_s = 0, None
        self._decoder = RecordDecoder(self._layout)
        self._gap |= self._in_session
        self._in_session = False

    def _arrivals(self, piece: TickPiece, arrived_s: float | None) -> Arrivals:
        if not self._in_session:
            tick = self._layout.native_tick_ps
            self._sessions.begin(SessionStart(tick, int(piece.ticks[0])))
            self._in_session = True
        gap, self._gap = self._gap or piece.gap_before, False
        times = self._times(piece.ticks)
        newest = times[-JUDGES:]
        if (good := newest[np.abs(newest) <= units.TIME_LIMIT_PS]).size:
            self._sessions.reached(position_ps(good))
        return Arrivals(times, piece.inputs, gap_before=gap, arrived_s=arrived_s)

    def _times(self, ticks: NDArray[np.int64]) -> NDArray[np.int64]:
        times = self._sessions.to_ps(ticks)
        if int(ticks.max()) == SATURATED:
            times[ticks == SATURATED] = units.BEYOND_LIMIT_PS
        return times

    @property
    def time_base(self) -> TimeBase:
        """As `Feed.time_base`."""
        if not self._sessions.begun:
            return TimeBase(self._layout.native_tick_ps)
        return self._sessions.time_base

    @property
    def position(self) -> dict[str, Any]:
        """As `LiveFeed.position`."""
        return self._sessions.position


class LiveRecordsFeed:
    """What all feeds of live records have in common, but for `pieces`."""

    def __init__(self, layout: RecordLayout, around: Surroundings) -> None:
        self._records = LiveRecords(layout, around)
        self._counts: dict[str, int | float | str] = {"bytes_received": 0, "records_cut": 0}

    def _count(self, name: str, more: int = 1) -> None:
        self._counts[name] = int(self._counts[name]) + more

    @property
    def _patience_s(self) -> float:
        """How long to wait for more."""
        return min(self._records.due_s, IDLE_S)

    def _received(self, count: int) -> None:
        self._records.received(count)
        self._count("bytes_received", count)

    def _session_ended(self) -> Iterator[Arrivals]:
        """What is still there; then the session is over."""
        yield from self._records.pieces()
        self._records.end_session()
        self._counts["records_cut"] = self._records.records_cut

    @property
    def link(self) -> dict[str, int | float | str]:
        """As `LiveFeed.link`."""
        return dict(self._counts)

    @property
    def position(self) -> dict[str, Any]:
        """As `LiveFeed.position`."""
        return self._records.position

    @property
    def time_base(self) -> TimeBase:
        """As `Feed.time_base`."""
        return self._records.time_base

    @property
    def truth(self) -> dict[str, Any]:
        """As `Feed.truth`: records tell none."""
        return {}

    @property
    def progress(self) -> float | None:
        """As `Feed.progress`: nobody knows how much is still to come."""
        return None
