"""Intervals for a source that vouches for nothing, by what is assumed of it anyway.

Without intervals, live time runs from the first tag of a stretch to the last. That is right as
long as stretches are long. When slices are left out, each one kept is a stretch: a source that is
dark at its ends, or all through it, would read too bright. But the tags on either side, though
left out, were seen, and tell that time was live right up to the ends of the slice.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tagstream.feeds import Arrivals

JUDGES = 17  # tags whose median tells where the stream is: a few may be garbage


class AssumedCoverage:
    """Pieces without intervals to pieces with them.

    A piece covers the time from where the last one ended to max_disorder before its end; tags
    later than that wait for the next one. A pause longer than `jump_ps` is a gap.
    """

    def __init__(self, disorder_ps: int, jump_ps: int) -> None:
        self._disorder_ps, self._jump_ps = disorder_ps, jump_ps
        self._front_ps: int | None = None
        self._times = np.zeros(0, np.int64)
        self._inputs: NDArray[Any] = np.zeros(0, np.uint8)

    def take(self, piece: Arrivals) -> Iterator[Arrivals]:
        """The same tags, as far as they are complete."""
        if piece.gap_before or piece.lossy:
            yield from self.finish()
        if piece.lossy or (self._front_ps is None and piece.times_ps.size == 0):
            yield piece
        elif self._front_ps is None:
            begin = _middle(piece.times_ps[:JUDGES]) + 1
            yield from self._covered(replace(piece, gap_before=True), begin)
        elif piece.times_ps.size == 0:
            yield replace(piece, begin_ps=self._front_ps, end_ps=self._front_ps)
        else:
            yield from self._next(piece, self._front_ps)

    def finish(self) -> Iterator[Arrivals]:
        """What waits, up to the last tag: the stream ends or is interrupted."""
        front, times, inputs = self._front_ps, self._times, self._inputs
        self._front_ps, self._times, self._inputs = None, times[:0], inputs[:0]
        if front is not None and times.size:
            yield Arrivals(times, inputs, front, max(int(times.max()) + 1, front))

    def _next(self, piece: Arrivals, front: int) -> Iterator[Arrivals]:
        latest, reach = position_ps(piece.times_ps), self._jump_ps + self._disorder_ps
        if latest < front - self._jump_ps:  # a new session: conditioning finds its place
            yield from self.finish()
            yield replace(piece, gap_before=True)
        elif latest > front + reach:
            near = np.abs(piece.times_ps - np.int64(front)) <= reach
            self._hold(piece.times_ps[near], piece.inputs[near])
            yield from self.finish()
            far = replace(piece, times_ps=piece.times_ps[~near], inputs=piece.inputs[~near])
            yield from self.take(replace(far, gap_before=True))
        else:
            yield from self._covered(piece, front)

    def _covered(self, piece: Arrivals, front: int) -> Iterator[Arrivals]:
        end = max(front, position_ps(piece.times_ps) - self._disorder_ps)
        self._hold(piece.times_ps, piece.inputs)
        times, inputs = self._times, self._inputs
        waits = (times >= end) & (times <= end + self._disorder_ps + self._jump_ps)
        self._times, self._inputs, self._front_ps = times[waits], inputs[waits], end
        yield replace(
            piece, times_ps=times[~waits], inputs=inputs[~waits], begin_ps=front, end_ps=end
        )

    def _hold(self, times: NDArray[np.int64], inputs: NDArray[Any]) -> None:
        if self._times.size == 0:
            self._times, self._inputs = times, inputs
        else:
            self._times = np.concatenate([self._times, times])
            self._inputs = np.concatenate([self._inputs, inputs])


def position_ps(times: NDArray[np.int64]) -> int:
    """Where a stream is after these tags, whatever garbage is among them."""
    return _middle(times[-JUDGES:])


def _middle(times: NDArray[np.int64]) -> int:
    return int(np.sort(times)[times.size // 2])
