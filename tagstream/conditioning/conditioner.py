"""The chain of conditioning: pieces of a feed in, blocks out."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from tagstream.block import Block
from tagstream.conditioning.judge import Judge
from tagstream.conditioning.kernels import fill_dead_time_cut
from tagstream.conditioning.order import Order
from tagstream.conditioning.stretch import AssumedStretch, Stretch, VouchedStretch
from tagstream.counters import Counters
from tagstream.feeds import Arrivals
from tagstream.settings import Settings
from tagstream.units import TIME_LIMIT_PS


class Conditioner:
    """Pieces as decoded to blocks of ordered tags in live time.

    Blocks come in stream order, each as soon as nothing can change it. `counters` say what
    became of every tag.
    """

    def __init__(self, settings: Settings, counters: Counters) -> None:
        self.counters = counters
        self.last_tag_ps: int | None = None
        delays = [channel.delay_ps for channel in settings.channels.values()]
        self._least_delay_ps, self._largest_delay_ps = min(delays), max(delays)
        self._dead_times = np.array([c.dead_time_ps for c in settings.channels.values()], np.int64)
        self._last_kept = np.zeros(len(delays), np.int64)
        self._ever_kept = np.zeros(len(delays), np.uint8)
        self._order = Order()
        self._judge = Judge(settings, counters, self._order)
        self._stretch: Stretch | None = None
        self._vouched_to_ps: int | None = None  # raw end of the last complete interval
        self.live_end_ps: int | None = None  # end of the last block

    def push(self, piece: Arrivals) -> Iterator[Block]:
        """The blocks that a piece completes."""
        self.counters.arrived += piece.times_ps.size
        if self._interrupts(piece):
            yield from self._end_stretch()
        if piece.lossy:
            self.counters.drop("in_gap", piece.times_ps.size)
            return
        self._open_stretch(piece)
        for _ in self._judge.judge(piece):
            yield from self._end_stretch()
            self._open_stretch(piece)
        yield from self._release(piece)
        self.counters.in_flight = len(self._order) + self._judge.pending

    def finish(self) -> Iterator[Block]:
        """The blocks that were still waiting when the feed ended."""
        self._judge.end()
        yield from self._end_stretch()
        self.counters.in_flight = 0

    def _interrupts(self, piece: Arrivals) -> bool:
        """Whether nothing in `piece` may be correlated with what came before it."""
        if piece.gap_before or piece.lossy or self._stretch is None:
            return True
        vouched = isinstance(self._stretch, VouchedStretch)
        if piece.begin_ps is None:
            return vouched
        begins_anew = self._vouched_to_ps is not None
        return not vouched or (
            begins_anew and self._judge.interval(piece)[0] != self._vouched_to_ps
        )

    def _open_stretch(self, piece: Arrivals) -> None:
        if self._stretch is not None:
            return
        before = -TIME_LIMIT_PS if self.live_end_ps is None else self.live_end_ps
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
            known_to = end if piece.complete else known_to
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
        self._vouched_to_ps = None

    def _emit(
        self, times: NDArray[np.int64], channels: NDArray[np.uint8], known_to_ps: int
    ) -> Iterator[Block]:
        if self._stretch is None:
            return
        block, outside = self._stretch.block(times, channels, known_to_ps)
        self.counters.drop("in_gap", outside)
        if block is None:
            return
        if block.opens and self.live_end_ps is not None:
            self.counters.gaps += 1
            self.counters.gap_time_ps += block.begin_ps - self.live_end_ps
        self.live_end_ps = block.end_ps
        yield self._without_dead_time(block)

    def _without_dead_time(self, block: Block) -> Block:
        if self._dead_times.any():
            kept = fill_dead_time_cut(
                block.times_ps, block.channels, self._dead_times, self._last_kept, self._ever_kept
            )
            self.counters.drop("dead_time", block.times_ps.size - kept)
            block = Block(
                block.times_ps[:kept],
                block.channels[:kept],
                block.begin_ps,
                block.end_ps,
                block.opens,
            )
        self.counters.kept += block.times_ps.size
        if block.times_ps.size:
            self.last_tag_ps = int(block.times_ps[-1])
        return block
