"""Intervals without the slices that are left out.

What is left out comes out as an empty interval that is all gap, with its tags counted. An
interval within one slice, or whose slices have one fate, costs nothing per tag.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np

from tagstream.feeds import IDLE, Arrivals
from tagstream.feeds.shed_pattern import ShedPattern, StreamTime
from tagstream.recording.layout import Mark

MOST_SLICES = 10_000  # an interval of more is not cut: it has few tags, and overloads nobody


@dataclass(frozen=True, slots=True)
class _Run:
    """Neighbouring slices with one fate, as far as they lie in an interval."""

    keep: bool
    first_slice: int
    begin_ps: int
    end_ps: int


class SliceCutter:
    """Takes pieces with intervals, hands on what the pattern keeps of them.

    time: kept and left out so far. slices: left out so far.
    """

    def __init__(self, slice_ps: int, pattern: ShedPattern) -> None:
        self._slice_ps, self._pattern = slice_ps, pattern
        self.time, self.slices = StreamTime(), 0
        self._last_shed = -(1 << 63)
        self._parts: list[Arrivals] = []  # of an interval that must be cut, until it is complete
        self._begin_ps = self._end_ps = 0  # of what was left out and not told yet
        self._untold = False
        self._dropped: Counter[str] = Counter()
        self._marks: tuple[Mark, ...] = ()

    def take(self, piece: Arrivals) -> Iterator[Arrivals]:
        """What is kept of a piece; one without an interval is handed on as it is."""
        if self._parts and _interval(piece) != _interval(self._parts[0]):
            yield from self._cut()
        if piece.begin_ps is None or piece.end_ps is None:
            yield from self.told()
            yield piece
            return
        runs = self._runs(piece.begin_ps, piece.end_ps)
        self._pattern.forget_before(piece.begin_ps // self._slice_ps)
        if len(runs) > 1:
            self._parts.append(piece)
            if piece.complete:
                yield from self._cut()
        elif runs[0].keep:
            yield from self._kept(piece, runs[0])
        else:
            self._shed(piece, runs[0])

    def told(self) -> Iterator[Arrivals]:
        """What was left out since the last piece, if anything."""
        if self._untold:
            yield replace(
                IDLE,
                begin_ps=self._begin_ps,
                end_ps=self._end_ps,
                lossy=True,
                dropped=dict(self._dropped),
                marks=self._marks,
            )
        self._untold, self._marks = False, ()
        self._dropped.clear()

    def finish(self) -> Iterator[Arrivals]:
        """What still waits, when the stream ends."""
        if self._parts:
            yield from self._cut()
        yield from self.told()

    def _runs(self, begin: int, end: int) -> list[_Run]:
        first, last = begin // self._slice_ps, max(end - 1, begin) // self._slice_ps
        if last - first > MOST_SLICES:
            return [_Run(True, first, begin, end)]
        keeps = [self._pattern.keeps(index) for index in range(first, last + 1)]
        starts = [i for i in range(len(keeps)) if i == 0 or keeps[i] != keeps[i - 1]]
        begins = [begin] + [(first + i) * self._slice_ps for i in starts[1:]]
        return [
            _Run(keeps[i], first + i, b, e)
            for i, b, e in zip(starts, begins, [*begins[1:], end], strict=True)
        ]

    def _cut(self) -> Iterator[Arrivals]:
        """The parts of an interval, sorted by the fate of their slices; within a run of slices
        tags keep their order. A tag outside the interval goes with the end it is next to."""
        parts, self._parts = self._parts, []
        begin, end = parts[0].begin_ps or 0, parts[0].end_ps or 0
        runs = self._runs(begin, end)
        times = np.concatenate([part.times_ps for part in parts])
        inputs = np.concatenate([part.inputs for part in parts])
        borders = np.array([run.begin_ps for run in runs[1:]], np.int64)
        of_run = np.searchsorted(borders, times, side="right")
        order = np.argsort(of_run, kind="stable")
        ends = np.cumsum(np.bincount(of_run, minlength=len(runs)))
        head = _head(parts)
        for run, stop, count in zip(runs, ends, np.diff(ends, prepend=0), strict=True):
            chosen = order[stop - count : stop]
            last = run is runs[-1]
            piece = replace(
                head,
                times_ps=times[chosen],
                inputs=inputs[chosen],
                begin_ps=run.begin_ps,
                end_ps=run.end_ps,
                complete=parts[-1].complete or not last,
            )
            if run.keep:
                yield from self._kept(piece, run)
            else:
                self._shed(piece, run)
            head = replace(head, gap_before=False, dropped={}, marks=())

    def _kept(self, piece: Arrivals, run: _Run) -> Iterator[Arrivals]:
        yield from self.told()
        if piece.complete:
            self.time.kept_ps += run.end_ps - run.begin_ps
        yield piece

    def _shed(self, piece: Arrivals, run: _Run) -> None:
        if not self._untold:
            self._untold, self._begin_ps, self._end_ps = True, run.begin_ps, run.end_ps
        self._end_ps = max(self._end_ps, run.end_ps)
        self._dropped.update(piece.dropped)
        self._dropped["shed"] += piece.times_ps.size
        self._marks += piece.marks
        last = max(run.end_ps - 1, run.begin_ps) // self._slice_ps
        self.slices += max(last - max(run.first_slice - 1, self._last_shed), 0)
        self._last_shed = max(self._last_shed, last)
        if piece.complete:
            self.time.shed_ps += run.end_ps - run.begin_ps


def _interval(piece: Arrivals) -> tuple[int | None, int | None]:
    return piece.begin_ps, piece.end_ps


def _head(parts: list[Arrivals]) -> Arrivals:
    """The first part, with all that the parts say besides their tags."""
    dropped: Counter[str] = Counter()
    for part in parts:
        dropped.update(part.dropped)
    marks = tuple(mark for part in parts for mark in part.marks)
    lossy = any(part.lossy for part in parts)
    return replace(parts[0], dropped=dict(dropped), marks=marks, lossy=lossy)
