"""A feed at the pace of its own clock, for rehearsals."""

from __future__ import annotations

import time
from collections.abc import Callable, Generator, Iterator
from dataclasses import replace

import numpy as np

from tagstream.feeds import IDLE, IDLE_S, Arrivals
from tagstream.units import PS_PER_S

STEP_S = 0.1  # pieces are cut so that none waits longer than this for its own last tag


def paced(
    pieces: Generator[Arrivals],
    pace: float,
    wait: Callable[[float], bool],
    clock: Callable[[], float] = time.monotonic,
) -> Generator[Arrivals]:
    """The pieces of a feed, cut small, each when its time has come; until then IDLE.

    pace: seconds of stream time per second of wall time. wait: sleeps for so many seconds; may
    return early, and returns True when waiting makes no sense any more (a stop).
    """
    step_ps = int(STEP_S * pace * PS_PER_S)
    first_ps: int | None = None
    started = clock()
    for whole in pieces:
        for piece in cut_by_time(whole, step_ps):
            last_ps = _last_ps(piece)
            if first_ps is None:
                first_ps = last_ps
            due = started + (last_ps - first_ps) / PS_PER_S / pace
            while (left := due - clock()) > 0:
                if wait(min(left, IDLE_S)):
                    break
                yield IDLE
            yield piece


def cut_by_time(piece: Arrivals, step_ps: int) -> Iterator[Arrivals]:
    """The same tags in the same order, in pieces whose latest time grows by at most a step."""
    if piece.times_ps.size == 0:
        yield piece
        return
    latest = np.maximum.accumulate(piece.times_ps)
    begin = 0
    while begin < latest.size:
        limit = np.int64(int(latest[begin]) // step_ps * step_ps + step_ps)
        end = max(int(np.searchsorted(latest, limit)), begin + 1)
        yield replace(
            piece,
            times_ps=piece.times_ps[begin:end],
            inputs=piece.inputs[begin:end],
            complete=piece.complete and end == latest.size,
            gap_before=piece.gap_before and begin == 0,
        )
        begin = end


def _last_ps(piece: Arrivals) -> int:
    if piece.times_ps.size:
        return int(piece.times_ps.max())
    return piece.end_ps or 0
