"""Files of native ticks as feeds: what CSV, arrays and binary records have in common.

A source decodes; here its ticks get their origin, become picoseconds, and the interval that the
settings vouch for, if they do, is put around them.
"""

from __future__ import annotations

from collections.abc import Generator, Iterator
from dataclasses import dataclass
from fractions import Fraction
from pathlib import Path
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

from tagstream import units
from tagstream.errors import InputError
from tagstream.feeds import Arrivals, TimeBase

SATURATED = 2**63 - 1  # a count that would not fit int64: certainly past the limit of a run


@dataclass(frozen=True, slots=True)
class TickPiece:
    """Decoded tags in arrival order.

    ticks: int64, n, SATURATED where the count does not fit. inputs: uint8 or uint16, n.
    gap_before: tags may have been lost just before this piece.
    """

    ticks: NDArray[np.int64]
    inputs: NDArray[Any]
    gap_before: bool = False


class TickSource(Protocol):
    """A file of native ticks.

    `pieces` raises InputError after it has yielded what was good. `progress`: the fraction of
    the file read so far.
    """

    path: Path

    def pieces(self) -> Iterator[TickPiece]: ...

    @property
    def progress(self) -> float: ...


class Ticked(Protocol):
    """What the settings of such a feed have in common."""

    @property
    def tick_ps(self) -> Fraction: ...
    @property
    def begin_ps(self) -> int | None: ...
    @property
    def end_ps(self) -> int | None: ...


class TickFeed:
    """A feed over a source of native ticks.

    The origin is `begin` of the settings, else the first tag, rounded down to a slice. With
    `begin` and `end` all tags are of one interval, whose last piece has no tags.
    """

    def __init__(self, source: TickSource, settings: Ticked, slice_ps: int) -> None:
        self._source, self._settings, self._slice_ps = source, settings, slice_ps
        self._scale: units.TickScale | None = None
        if settings.begin_ps is not None:
            self._fix_origin(-int(-settings.begin_ps // settings.tick_ps))

    def _fix_origin(self, first_ticks: int) -> units.TickScale:
        self._scale = units.TickScale(self._settings.tick_ps, first_ticks, self._slice_ps)
        return self._scale

    def pieces(self) -> Generator[Arrivals]:
        """As `Feed.pieces`."""
        for piece in self._source.pieces():
            scale = self._scale
            if scale is None:
                if piece.ticks.size == 0:
                    continue  # a gap before the first tag has no two sides
                scale = self._fix_origin(int(piece.ticks[0]))
            yield self._arrivals(scale, piece)
        if self._scale is None:
            raise InputError(f"{self._source.path}: holds no tags")
        if self._settings.begin_ps is not None:
            nothing = TickPiece(np.zeros(0, np.int64), np.zeros(0, np.uint8))
            yield self._arrivals(self._scale, nothing, complete=True)

    def _arrivals(
        self, scale: units.TickScale, piece: TickPiece, complete: bool = False
    ) -> Arrivals:
        times = scale.to_ps(piece.ticks)
        if piece.ticks.size and int(piece.ticks.max()) == SATURATED:
            times[piece.ticks == SATURATED] = units.BEYOND_LIMIT_PS
        begin, end = self._settings.begin_ps, self._settings.end_ps
        if begin is None or end is None:
            return Arrivals(times, piece.inputs, gap_before=piece.gap_before)
        return Arrivals(
            times,
            piece.inputs,
            begin - scale.origin_ps,
            end - scale.origin_ps,
            complete,
            piece.gap_before,
        )

    @property
    def time_base(self) -> TimeBase:
        """As `Feed.time_base`."""
        if self._scale is None:
            return TimeBase(self._settings.tick_ps)
        return TimeBase(self._settings.tick_ps, self._scale.origin_ticks)

    @property
    def truth(self) -> dict[str, Any]:
        """As `Feed.truth`: a file of tags knows none."""
        return {}

    @property
    def progress(self) -> float | None:
        """As `Feed.progress`."""
        return self._source.progress
