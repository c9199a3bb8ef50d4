"""A feed that is read again from its begin, without what an earlier process has counted."""

from __future__ import annotations

from collections.abc import Generator
from dataclasses import replace

from tagstream.feeds import Arrivals


def from_time(pieces: Generator[Arrivals], from_ps: int) -> Generator[Arrivals]:
    """The pieces of a feed from stream time `from_ps` on; the first begins after a gap."""
    begun = False
    try:
        for piece in pieces:
            if begun and not _is_before(piece, from_ps):
                yield piece
            elif (rest := _rest(piece, from_ps)) is not None:
                yield rest if begun else replace(rest, gap_before=True)
                begun = True
    finally:
        pieces.close()


def _is_before(piece: Arrivals, from_ps: int) -> bool:
    return piece.begin_ps is not None and piece.begin_ps < from_ps


def _rest(piece: Arrivals, from_ps: int) -> Arrivals | None:
    """The later part of a piece; None when there is none."""
    if piece.begin_ps is not None and piece.end_ps is not None:
        if piece.end_ps <= from_ps:
            return None
        piece = replace(piece, begin_ps=max(piece.begin_ps, from_ps))
    later = piece.times_ps >= from_ps
    if piece.begin_ps is None and not later.any():
        return None
    marks = tuple(mark for mark in piece.marks if mark.time_ps >= from_ps)
    return replace(piece, times_ps=piece.times_ps[later], inputs=piece.inputs[later], marks=marks)
