"""What a feed shows when one listens to it for a moment: inputs, rates, disorder, coverage.

For first contact: nothing is written, conditioned or judged. Tags further from where the stream
is than max_jump count as far and do not tell of disorder.
"""

from __future__ import annotations

import time
from collections import Counter
from collections.abc import Callable, Generator, Iterable, Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tagstream.feeds import IDLE, Arrivals, build_feed, build_live_feed
from tagstream.settings import Settings
from tagstream.settings.feeds import is_live
from tagstream.units import PS_PER_S

INPUTS = 1 << 16


@dataclass(frozen=True, slots=True)
class HeardInput:
    """One input: its tags, and how far behind the latest tag of any input its latest came."""

    input: int
    tags: int
    rate_hz: float
    largest_disorder_ps: int


@dataclass(frozen=True, slots=True)
class Heard:
    """What was heard in `listened_s` seconds of wall time.

    stream_s: stream time that it covers: what the source vouches for, else (`vouched` is false)
    from the first tag to the last. gaps: places where tags may be missing. lossy: intervals of
    which the source says so. far: tags further than max_jump from the others. dropped: by the
    feed, by reason. link: what came over the line, as the feed counts it.
    """

    listened_s: float
    inputs: tuple[HeardInput, ...]
    stream_s: float
    vouched: bool
    gaps: int
    lossy: int
    far: int
    dropped: Mapping[str, int] = field(default_factory=dict)
    link: Mapping[str, int | float | str] = field(default_factory=dict)

    @property
    def largest_disorder_ps(self) -> int:
        """Of all inputs; 0 without tags."""
        return max((found.largest_disorder_ps for found in self.inputs), default=0)

    @property
    def rate_hz(self) -> float:
        """Of all inputs together."""
        return sum(found.rate_hz for found in self.inputs)


class Listening:
    """Adds up pieces of a feed; `report` says what was heard."""

    def __init__(self, jump_ps: int) -> None:
        self._jump_ps = jump_ps
        self._tags = np.zeros(INPUTS, np.int64)
        self._behind_ps = np.zeros(INPUTS, np.int64)
        self._latest_ps: int | None = None
        self._first_ps: int | None = None  # of the stretch that nobody vouches for
        self._vouched_ps = self._assumed_ps = 0
        self._vouched_to_ps: int | None = None
        self._gaps = self._lossy = self._far = 0
        self._dropped: Counter[str] = Counter()

    def add(self, piece: Arrivals) -> None:
        """Take a piece into account."""
        if piece is IDLE:
            return
        self._dropped.update(piece.dropped)
        self._count_interval(piece)
        if piece.gap_before:
            self._end_stretch()
        if piece.times_ps.size:
            self._tags += np.bincount(piece.inputs, minlength=INPUTS)
            self._count_times(piece)

    def report(self, listened_s: float, link: Mapping[str, int | float | str]) -> Heard:
        """What was heard so far."""
        vouched = self._vouched_to_ps is not None
        now = 0 if self._latest_ps is None else self._latest_ps - (self._first_ps or 0)
        stream_s = (self._vouched_ps if vouched else self._assumed_ps + now) / PS_PER_S
        seen = np.flatnonzero(self._tags).tolist()
        inputs = tuple(
            HeardInput(
                number,
                int(self._tags[number]),
                float(self._tags[number] / stream_s) if stream_s else float("nan"),
                int(self._behind_ps[number]),
            )
            for number in seen
        )
        counts = (self._gaps, self._lossy, self._far)
        return Heard(
            listened_s, inputs, stream_s, vouched, *counts, dict(self._dropped), dict(link)
        )

    def _count_interval(self, piece: Arrivals) -> None:
        goes_on = True
        if piece.begin_ps is not None and piece.end_ps is not None:
            goes_on = self._vouched_to_ps in (None, piece.begin_ps) or not piece.complete
            if piece.complete:
                self._vouched_ps += piece.end_ps - piece.begin_ps
                self._vouched_to_ps = piece.end_ps
        self._gaps += piece.gap_before or not goes_on
        self._lossy += piece.lossy and piece.complete

    def _end_stretch(self) -> None:
        if self._latest_ps is not None and self._first_ps is not None:
            self._assumed_ps += self._latest_ps - self._first_ps
        self._latest_ps = self._first_ps = None

    def _count_times(self, piece: Arrivals) -> None:
        times = piece.times_ps
        middle = int(np.partition(times, times.size // 2)[times.size // 2])
        near = np.abs(times - np.int64(middle)) <= self._jump_ps
        self._far += int(times.size - near.sum())
        times, inputs = times[near], piece.inputs[near]
        if self._latest_ps is not None and abs(middle - self._latest_ps) > self._jump_ps:
            self._end_stretch()
        if self._latest_ps is None or self._first_ps is None:
            self._first_ps = self._latest_ps = int(times.min())
        self._count_disorder(times, inputs, self._latest_ps)
        self._latest_ps = max(self._latest_ps, int(times.max()))

    def _count_disorder(
        self, times: NDArray[np.int64], inputs: NDArray[Any], latest_ps: int
    ) -> None:
        latest = np.maximum(np.maximum.accumulate(times), np.int64(latest_ps))
        behind = latest - times
        late = behind > 0
        np.maximum.at(self._behind_ps, inputs[late], behind[late])


def listen(
    pieces: Generator[Arrivals],
    listening: Listening,
    ended: Callable[[float], bool],
    clock: Callable[[], float] = time.monotonic,
) -> float:
    """Add pieces until `ended`, which is told the seconds so far, or the feed ends; return them."""
    began = clock()
    try:
        for piece in pieces:
            listening.add(piece)
            if ended(clock() - began):
                break
    finally:
        pieces.close()
    return clock() - began


def heard_from_feed(settings: Settings, ended: Callable[[float], bool]) -> Heard:
    """Open the feed of the settings alone, listen until `ended`, close it.

    Raises InputError or SettingsError when it cannot be opened or, being a file, is broken.
    """
    slice_ps = settings.rolling.slice_ps
    listening = Listening(settings.conditioning.max_jump_ps)
    if not is_live(settings.feed):
        feed = build_feed(settings.feed, slice_ps)
        return listening.report(listen(feed.pieces(), listening, ended), {})
    live = build_live_feed(settings.feed, slice_ps, settings.security)
    return listening.report(listen(live.pieces(), listening, ended), live.link)


def right_disorder_ps(largest_ps: int) -> int:
    """A max_disorder with room to spare: at least twice the largest seen, from 1 us on; rounded
    up to 1, 2 or 5."""
    return next(n for n in _round_numbers() if n >= 2 * largest_ps)


def _round_numbers() -> Iterable[int]:
    scale = 1_000_000
    while True:
        yield from (scale, 2 * scale, 5 * scale)
        scale *= 10
