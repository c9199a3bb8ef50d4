"""More than can be processed: whole slices are left out, and counted as gaps.

Stands between receiving and recording. Slices are those of the times as received, before delays.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Generator, Iterator, Mapping
from typing import Protocol

from tagstream.feeds import IDLE, IDLE_S, Arrivals
from tagstream.feeds.assumed import AssumedCoverage, position_ps
from tagstream.feeds.shed_pattern import LoadMean, ShedPattern, fitting
from tagstream.feeds.shed_slices import SliceCutter


class _Judging(Protocol):
    """What of the section [conditioning] is needed here."""

    @property
    def max_disorder_ps(self) -> int: ...

    @property
    def max_jump_ps(self) -> int: ...


class Shedder:
    """Decides from the load how much is left out, and leaves it out.

    busy: seconds of work so far, by stage, of the stages that work on what is kept.
    """

    def __init__(
        self,
        slice_ps: int,
        judging: _Judging,
        busy: Callable[[], Mapping[str, float]],
        clock: Callable[[], float] = time.monotonic,
    ) -> None:
        self._slice_ps, self._jump_ps = slice_ps, judging.max_jump_ps
        self._busy, self._clock = busy, clock
        self._pattern = ShedPattern()
        self._cutter = SliceCutter(slice_ps, self._pattern)
        self._assumed = AssumedCoverage(judging.max_disorder_ps, judging.max_jump_ps)
        self._mean = LoadMean(clock(), busy())
        self._seen_ps: int | None = None
        self._cost, self._told_s = 0.0, clock()

    def numbers(self) -> dict[str, int | float]:
        """For the health of a run. shed_fraction: of slices, now. cost_s_per_stream_s: wall
        seconds that the busiest stage worked for each kept stream second, before the last
        decision; 0 before the first."""
        return {
            "shed_fraction": 1.0 - self._pattern.keep,
            "shed_slices": self._cutter.slices,
            "shed_time_ps": self._cutter.time.shed_ps,
            "cost_s_per_stream_s": self._cost,
        }

    def take(self, piece: Arrivals) -> Iterator[Arrivals]:
        """What is kept of a piece. Says at least every IDLE_S what was left out."""
        self._decide_when_due()
        taken = False
        for kept in self._kept(piece):
            taken = True
            yield kept
        if taken:
            self._told_s = self._clock()
        elif self._clock() - self._told_s >= IDLE_S:
            self._told_s = self._clock()
            yield from self._cutter.told()

    def finish(self) -> Iterator[Arrivals]:
        """What still waits, when the stream ends."""
        for piece in self._assumed.finish():
            yield from self._cutter.take(piece)
        yield from self._cutter.finish()

    def _kept(self, piece: Arrivals) -> Iterator[Arrivals]:
        if piece is IDLE:
            yield from self._cutter.told()
            yield piece
        elif self._pattern.keeps_all:
            yield from self.finish()
            self._count(piece)
            yield piece
        elif piece.begin_ps is not None:
            yield from self._cut(piece)
        else:
            for covered in self._assumed.take(piece):
                yield from self._cut(covered)

    def _cut(self, piece: Arrivals) -> Iterator[Arrivals]:
        self._seen_ps = piece.end_ps if piece.end_ps is not None else self._seen_ps
        yield from self._cutter.take(piece)

    def _count(self, piece: Arrivals) -> None:
        """Stream time of a piece that is handed on as it is."""
        if piece.begin_ps is not None and piece.end_ps is not None:
            self._seen_ps = piece.end_ps
            passed = piece.end_ps - piece.begin_ps if piece.complete else 0
        elif piece.times_ps.size:
            before, self._seen_ps = self._seen_ps, position_ps(piece.times_ps)
            passed = 0 if before is None else self._seen_ps - before
            passed = passed if 0 <= passed <= self._jump_ps else 0
        else:
            return
        self._cutter.time.kept_ps += passed

    def _decide_when_due(self) -> None:
        now, spent = self._clock(), self._cutter.time
        if self._seen_ps is None or not self._mean.due(now):
            return
        if self._mean.kept_since(spent) < self._slice_ps:
            return
        self._cost, speed = self._mean.take(now, self._busy(), spent)
        keep = fitting(self._pattern.keep, self._cost, speed)
        if keep != self._pattern.keep:
            self._pattern.decide(keep, self._seen_ps // self._slice_ps + 1)


def shed(pieces: Generator[Arrivals], shedder: Shedder) -> Generator[Arrivals]:
    """The pieces of a live feed, without what is left out."""
    try:
        for piece in pieces:
            yield from shedder.take(piece)
        yield from shedder.finish()
    finally:
        pieces.close()
