"""Marks that somebody sets while tags arrive: they get their place in the stream here.

Without a time of its own a mark takes effect at the end of the newest interval that is complete,
or, where the source vouches for nothing, just after the latest tag.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Generator
from dataclasses import replace
from queue import Empty, SimpleQueue

import numpy as np

from tagstream.feeds import Arrivals
from tagstream.marks import Value
from tagstream.recording.layout import Mark


class MarkEntry:
    """Where other threads leave marks for the stream.

    reached_ps: how far the stream has come, None before it began. placed: called with each mark
    and the seconds between its asking and its placing.
    """

    def __init__(
        self,
        max_jump_ps: int,
        placed: Callable[[Mark, float], None] = lambda mark, waited_s: None,
        clock: Callable[[], float] = time.monotonic,
    ) -> None:
        self._jump_ps, self._placed, self._clock = max_jump_ps, placed, clock
        self._waiting: SimpleQueue[tuple[str, Value, int | None, float]] = SimpleQueue()
        self.reached_ps: int | None = None

    def ask(self, key: str, value: Value, at_ps: int | None = None) -> None:
        """Leave a mark; from any thread. at_ps: stream time, absent: as soon as possible."""
        self._waiting.put((key, value, at_ps, self._clock()))

    def marks(self) -> tuple[Mark, ...]:
        """The marks that wait, in the order in which they were asked for, with their times.

        None of them lies before what the stream has reached.
        """
        found: list[Mark] = []
        while self.reached_ps is not None:
            try:
                key, value, at_ps, asked_s = self._waiting.get_nowait()
            except Empty:
                break
            mark = Mark(max(self.reached_ps, at_ps or self.reached_ps), key, value)
            self._placed(mark, self._clock() - asked_s)
            found.append(mark)
        return tuple(found)

    def see(self, piece: Arrivals) -> None:
        """Remember how far the stream has come with a piece."""
        if piece.end_ps is not None:
            if piece.complete:
                self.reached_ps = piece.end_ps
        elif piece.times_ps.size:
            self.reached_ps = self._latest(piece) + 1

    def _latest(self, piece: Arrivals) -> int:
        """The latest tag that is no lone one far ahead."""
        times, before = piece.times_ps, self.reached_ps
        if before is not None:
            near = times[times <= before + self._jump_ps]
            if near.size:
                return max(before - 1, int(near.max()))
        middle = np.int64(np.partition(times, times.size // 2)[times.size // 2])
        return int(times[times <= middle + self._jump_ps].max())


def marked(pieces: Generator[Arrivals], entry: MarkEntry) -> Generator[Arrivals]:
    """The pieces of a feed, with the marks that were asked for meanwhile."""
    try:
        for piece in pieces:
            marks = entry.marks()
            yield replace(piece, marks=(*piece.marks, *marks)) if marks else piece
            entry.see(piece)
    finally:
        pieces.close()
