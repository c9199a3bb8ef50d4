"""Pieces of a recording to portions that each have all tags of their interval.

Where a recording vouches for an interval, the interval is cut up in stream time. Tags may be out
of order, so a cut never goes past the earliest tag of the piece that comes next: whatever lies
before the cut has then arrived, but for tags that are late by a whole piece (2**18 tags). Those
go out with the next portion, outside of its interval, and whoever receives them counts them.

Where nobody vouches, live time is assumed as when tags are received without intervals: from the
first tags of a stretch to the latest time so far, less what tags may be out of order. The tags
that open such a stretch lie just before it.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tagstream.feeds import Arrivals
from tagstream.feeds.assumed import AssumedCoverage
from tagstream.sending import Portion
from tagstream.units import PS_PER_S

PART_PS = PS_PER_S // 20
SILENT_PARTS = 20
MOST_HELD = 1 << 21  # tags; a recording out of order by more is none that can be played well
DISORDER_PS, JUMP_PS = 1_000_000, 10 * PS_PER_S  # as [conditioning] has them by default


def portions(pieces: Iterable[Arrivals]) -> Iterator[Portion]:
    """A recording in portions of about 2**18 tags, or of 50 ms where there are fewer.

    Silence comes in portions without tags, of at most 1 s.
    """
    cutter = _Cutter()
    for piece in _covered(pieces):
        for portion in cutter.take(piece):
            yield from cut_up(portion)
    for portion in (*cutter.finish(), *cutter.rest()):
        yield from cut_up(portion)


def _covered(pieces: Iterable[Arrivals]) -> Iterator[Arrivals]:
    """The same, with intervals that are assumed where there are none."""
    assumed = AssumedCoverage(DISORDER_PS, JUMP_PS)
    for piece in pieces:
        if piece.begin_ps is None:
            yield from assumed.take(piece)
        else:
            yield from assumed.finish()
            yield piece
    yield from assumed.finish()


class _Cutter:
    """Holds the tags of the piece before, until it is known how far they are complete."""

    def __init__(self) -> None:
        self._front_ps: int | None = None  # everything before has been handed on
        self._row: Arrivals | None = None  # the interval that is not complete yet
        self._gap = False
        self._times = np.zeros(0, np.int64)
        self._inputs: NDArray[Any] = np.zeros(0, np.uint8)

    def take(self, piece: Arrivals) -> Iterator[Portion]:
        """The portions that are whole now that `piece` has come."""
        if piece.begin_ps is None or piece.end_ps is None:
            self._hold(piece)  # lost tags of no known interval
            self._gap |= piece.gap_before or piece.lossy
            return
        if self._row is not None and not _continues(self._row, piece):
            yield from self.finish()
        if self._row is None:
            self._gap |= piece.gap_before
            front = piece.begin_ps if self._front_ps is None else self._front_ps
            self._front_ps = max(front, piece.begin_ps)
        self._row = piece
        if cut := self._complete_to(piece.times_ps, piece.end_ps):
            yield from self._before(cut, piece.lossy)
        self._hold(piece)
        if piece.complete:
            yield from self.finish()

    def finish(self) -> Iterator[Portion]:
        """What is left of the interval in progress, with whatever lies outside of it."""
        row, self._row, front = self._row, None, self._front_ps
        if row is not None and row.end_ps is not None and front is not None and row.end_ps > front:
            yield self._portion(row.end_ps, slice(None), row.lossy)

    def rest(self) -> Iterator[Portion]:
        """What no interval was left for: with one of no length, so that it is counted outside."""
        if self._times.size:
            end = int(self._times.max()) if self._front_ps is None else self._front_ps
            yield self._portion(end, slice(None), lossy=False)

    def _hold(self, piece: Arrivals) -> None:
        if self._times.size == 0:
            self._times, self._inputs = piece.times_ps, piece.inputs
        elif piece.times_ps.size:
            self._times = np.concatenate([self._times, piece.times_ps])
            self._inputs = np.concatenate([self._inputs, piece.inputs])

    def _complete_to(self, coming: NDArray[np.int64], end_ps: int) -> int | None:
        """Where to cut what is held, given the tags that come next; None: not yet."""
        front = self._front_ps
        if self._times.size == 0 or coming.size == 0 or front is None:
            return None
        cut = int(coming.min())
        if cut < front:  # late by a whole piece, or garbage: tells nothing
            inside = coming[coming >= front]
            cut = int(inside.min()) if inside.size else front
        if self._times.size > MOST_HELD:
            cut = max(cut, int(np.median(self._times)), front + 1)
        return cut if front < cut <= end_ps else None

    def _before(self, cut_ps: int, lossy: bool) -> Iterator[Portion]:
        """The held tags before `cut_ps`; the others stay."""
        if int(self._times.max()) < cut_ps:  # as nearly always: nothing is copied
            yield self._portion(cut_ps, slice(None), lossy)
            return
        goes = self._times < cut_ps
        times, inputs = self._times[~goes], self._inputs[~goes]
        yield self._portion(cut_ps, goes, lossy)
        self._times, self._inputs = times, inputs

    def _portion(self, end_ps: int, which: Any, lossy: bool) -> Portion:
        times, inputs, front, gap = self._times, self._inputs, self._front_ps, self._gap
        self._times, self._inputs = times[:0], inputs[:0]
        self._front_ps, self._gap = end_ps, False
        begin = end_ps if front is None else front
        return Portion(begin, end_ps, times[which], inputs[which], gap, lossy)


def _continues(row: Arrivals, piece: Arrivals) -> bool:
    same = (row.begin_ps, row.end_ps, row.lossy) == (piece.begin_ps, piece.end_ps, piece.lossy)
    return same and not piece.gap_before


def cut_up(whole: Portion) -> Iterator[Portion]:
    """A portion in parts of 50 ms; where there are no tags, of up to 1 s."""
    if whole.end_ps - whole.begin_ps <= PART_PS:
        yield whole
        return
    times, inputs = whole.times_ps, whole.inputs
    parts = -(-(whole.end_ps - whole.begin_ps) // PART_PS)
    part_of = np.clip((times - np.int64(whole.begin_ps)) // PART_PS, 0, parts - 1)
    if bool((part_of[1:] < part_of[:-1]).any()):
        order = np.argsort(part_of, kind="stable")  # within a part as they came
        times, inputs, part_of = times[order], inputs[order], part_of[order]
    part = first = 0
    while part < parts:
        after, last = _next_part(part, first, part_of)
        after = min(after, parts)
        begin = whole.begin_ps + part * PART_PS
        end = min(whole.begin_ps + after * PART_PS, whole.end_ps)
        gap = whole.gap_before and part == 0
        yield Portion(begin, end, times[first:last], inputs[first:last], gap, whole.lossy)
        part, first = after, last


def _next_part(part: int, first: int, part_of: NDArray[np.int64]) -> tuple[int, int]:
    """(the part after the next portion, the first tag after it): several parts in silence."""
    coming = int(part_of[first]) if first < part_of.size else part + SILENT_PARTS
    if coming > part:
        return min(coming, part + SILENT_PARTS), first
    return part + 1, int(np.searchsorted(part_of, part, side="right"))
