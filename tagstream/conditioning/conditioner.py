"""The chain of conditioning: pieces of a feed in, blocks out."""

from __future__ import annotations

from collections.abc import Callable, Generator, Iterable, Iterator
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from tagstream.block import Block
from tagstream.conditioning.judge import Judge
from tagstream.conditioning.kernels import fill_dead_time_cut
from tagstream.conditioning.ordering.order import Order
from tagstream.conditioning.stretch import AssumedStretch, Stretch, VouchedStretch
from tagstream.counters import Counters
from tagstream.errors import InputError
from tagstream.feeds import IDLE, Arrivals
from tagstream.recording.layout import Mark
from tagstream.settings import Settings
from tagstream.units import TIME_LIMIT_PS


@dataclass(frozen=True, slots=True)
class Conditioned:
    """The blocks that a piece of the feed completed, and the state of conditioning after it.

    counters: a copy, taken when they agreed with the blocks. latest_ps: the latest time that
    arrived. live_end_ps, last_tag_ps: end of the last block and its last tag; None before there
    is one. marks: with stream times at which all channels, delayed, are past the mark;
    no block before has reached them. arrived_s: as in `Arrivals`, of the piece.
    """

    blocks: list[Block]
    counters: Counters
    latest_ps: int | None
    live_end_ps: int | None
    last_tag_ps: int | None
    marks: tuple[Mark, ...] = ()
    arrived_s: float | None = None


def conditioned(
    pieces: Iterable[Arrivals], settings: Settings, stopped: Callable[[], bool] = lambda: False
) -> Generator[Conditioned]:
    """A whole feed, piece by piece; at its end what was still waiting.

    stopped: asked after each piece; True ends the feed there. An InputError of the feed comes
    out after all that was good before it.
    """
    conditioner = Conditioner(settings)
    broken: InputError | None = None
    try:
        for piece in pieces:
            yield conditioner.push(piece)
            if stopped():
                break
    except InputError as error:
        broken = error
    yield conditioner.finish()
    if broken is not None:
        raise broken


def _says_nothing(piece: Arrivals) -> bool:
    """Whether a piece only brings marks or counts, in a pause: it ends no stretch."""
    gap = piece.gap_before or piece.lossy
    return piece.times_ps.size == 0 and piece.begin_ps is None and not gap


class Conditioner:
    """Pieces as decoded to blocks of ordered tags in live time.

    Blocks come in stream order, each as soon as nothing can change it.
    """

    def __init__(self, settings: Settings) -> None:
        self._counters = Counters()
        self._live_end_ps: int | None = None
        self._last_tag_ps: int | None = None
        delays = [channel.delay_ps for channel in settings.channels.values()]
        self._least_delay_ps, self._largest_delay_ps = min(delays), max(delays)
        self._dead_times = np.array([c.dead_time_ps for c in settings.channels.values()], np.int64)
        self._last_kept = np.zeros(len(delays), np.int64)
        self._ever_kept = np.zeros(len(delays), np.uint8)
        self._order = Order(np.array(delays, np.int64))
        self._judge = Judge(settings, self._counters, self._order)
        self._stretch: Stretch | None = None
        self._vouched_to_ps: int | None = None  # raw end of the last complete interval
        self._in_progress: tuple[int, int] | None = None  # the interval that is not complete yet

    def push(self, piece: Arrivals) -> Conditioned:
        """The blocks that a piece completes."""
        if piece is IDLE:
            return self._state([])
        self._counters.arrived += piece.times_ps.size + sum(piece.dropped.values())
        for reason, count in piece.dropped.items():
            self._counters.drop(reason, count)
        blocks = [] if _says_nothing(piece) else list(self._taken(piece))
        shift = self._judge.offset_ps + self._largest_delay_ps
        marks = tuple(replace(mark, time_ps=mark.time_ps + shift) for mark in piece.marks)
        return replace(self._state(blocks), marks=marks, arrived_s=piece.arrived_s)

    def finish(self) -> Conditioned:
        """The blocks that were still waiting when the feed ended."""
        self._judge.end()
        return self._state(list(self._end_stretch()))

    def _state(self, blocks: list[Block]) -> Conditioned:
        self._counters.in_flight = len(self._order) + self._judge.pending
        counters = replace(self._counters, dropped=dict(self._counters.dropped))
        return Conditioned(
            blocks, counters, self._judge.latest_ps, self._live_end_ps, self._last_tag_ps
        )

    def _taken(self, piece: Arrivals) -> Iterator[Block]:
        if self._interrupts(piece):
            self._judge.end()
            yield from self._end_stretch()
        if piece.lossy:
            self._counters.drop("in_gap", piece.times_ps.size)
            return
        self._open_stretch(piece)
        for _ in self._judge.judge(piece):
            yield from self._end_stretch()
            self._open_stretch(piece)
        yield from self._release(piece)

    def _interrupts(self, piece: Arrivals) -> bool:
        """Whether nothing in `piece` may be correlated with what came before it."""
        if piece.gap_before or piece.lossy or self._stretch is None:
            return True
        vouched = isinstance(self._stretch, VouchedStretch)
        if piece.begin_ps is None:
            return vouched
        interval = self._judge.interval(piece)
        goes_on = interval == self._in_progress or interval[0] == self._vouched_to_ps
        return not (vouched and goes_on)

    def _open_stretch(self, piece: Arrivals) -> None:
        if self._stretch is not None:
            return
        before = -TIME_LIMIT_PS if self._live_end_ps is None else self._live_end_ps
        if piece.begin_ps is None:
            self._stretch = AssumedStretch(before)
        else:
            begin = self._judge.interval(piece)[0]
            self._stretch = VouchedStretch(max(begin + self._largest_delay_ps, before))

    def _release(self, piece: Arrivals) -> Iterator[Block]:
        known_to = self._judge.watermark_ps
        if piece.begin_ps is not None:
            begin, end = self._judge.interval(piece)
            self._vouched_to_ps = end if piece.complete else None
            known_to = begin if known_to is None else max(begin, known_to)
            known_to = end if piece.complete else min(end, known_to)
            self._in_progress = None if piece.complete else (begin, end)
        if known_to is not None:
            known_to += self._least_delay_ps
            times, channels = self._order.release(known_to)
            yield from self._emit(times, channels, known_to)

    def _end_stretch(self) -> Iterator[Block]:
        """Release what waits: an assumed stretch ends at its last tag, a vouched one where it
        was known to; a later tag lies in the gap."""
        times, channels = self._order.release_all()
        if isinstance(self._stretch, VouchedStretch):
            end = self._stretch.end_ps
            yield from self._emit(times, channels, -TIME_LIMIT_PS if end is None else end)
        elif self._stretch is not None:
            yield from self._emit(times, channels, TIME_LIMIT_PS)
        self._stretch = None
        self._vouched_to_ps = self._in_progress = None

    def _emit(
        self, times: NDArray[np.int64], channels: NDArray[np.uint8], known_to_ps: int
    ) -> Iterator[Block]:
        if self._stretch is None:
            return
        block, outside = self._stretch.block(times, channels, known_to_ps)
        self._counters.drop("in_gap", outside)
        if block is None:
            return
        if block.opens and self._live_end_ps is not None:
            self._counters.gaps += 1
            self._counters.gap_time_ps += block.begin_ps - self._live_end_ps
        self._live_end_ps = block.end_ps
        yield self._without_dead_time(block)

    def _without_dead_time(self, block: Block) -> Block:
        if self._dead_times.any():
            kept = fill_dead_time_cut(
                block.times_ps, block.channels, self._dead_times, self._last_kept, self._ever_kept
            )
            self._counters.drop("dead_time", block.times_ps.size - kept)
            block = Block(
                block.times_ps[:kept],
                block.channels[:kept],
                block.begin_ps,
                block.end_ps,
                block.opens,
            )
        self._counters.kept += block.times_ps.size
        if block.times_ps.size:
            self._last_tag_ps = int(block.times_ps[-1])
        return block
