"""Tags in arrival order to good tags with channel and delay; jumps in time are found here."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tagstream.conditioning import kernels as k
from tagstream.conditioning.ordering.kernels import FIRST
from tagstream.conditioning.ordering.order import Order
from tagstream.counters import Counters
from tagstream.feeds import Arrivals
from tagstream.settings import Channel, Settings
from tagstream.units import TIME_LIMIT_PS

EVERYWHERE = (-TIME_LIMIT_PS, TIME_LIMIT_PS)


class Judge:
    """Decides each tag's fate from the tags before it; see `kernels.fill_judged`.

    Good tags go to `order`, with channel and delay.
    """

    def __init__(self, settings: Settings, counters: Counters, order: Order) -> None:
        self._counters = counters
        self._order = order
        self._slice_ps = settings.rolling.slice_ps
        self._disorder_ps = settings.conditioning.max_disorder_ps
        self._jump_ps = settings.conditioning.max_jump_ps
        self._channels_of = {
            np.dtype(np.uint8): channel_table(settings.channels, 1 << 8),
            np.dtype(np.uint16): channel_table(settings.channels, 1 << 16),
        }
        self._delays_ps = np.zeros(256, np.int64)
        for index, channel in enumerate(settings.channels.values()):
            self._delays_ps[index] = channel.delay_ps
        self._state = np.zeros(k.STATE_SIZE, np.int64)
        self._state[k.SHUFFLED] = FIRST
        self._pending_times = np.zeros(k.CONFIRMATIONS + 1, np.int64)
        self._pending_inputs = np.zeros(k.CONFIRMATIONS + 1, np.int64)

    @property
    def pending(self) -> int:
        """Tags that are far from all others and not yet believed."""
        return int(self._state[k.PENDING])

    @property
    def offset_ps(self) -> int:
        """What is added to the times of the feed since a new session began; 0 before."""
        return int(self._state[k.OFFSET])

    @property
    def latest_ps(self) -> int | None:
        """The latest good time so far; None before the first tag."""
        return int(self._state[k.LATEST]) if self._state[k.STARTED] else None

    @property
    def watermark_ps(self) -> int | None:
        """No good tag will come from before this raw time; None before the first tag."""
        if not self._state[k.STARTED]:
            return None
        return int(self._state[k.LATEST]) - self._disorder_ps

    def interval(self, piece: Arrivals) -> tuple[int, int]:
        """The vouched interval of a piece in stream time; everything if there is none."""
        if piece.begin_ps is None or piece.end_ps is None:
            return EVERYWHERE
        offset = int(self._state[k.OFFSET])
        return piece.begin_ps + offset, piece.end_ps + offset

    def judge(self, piece: Arrivals) -> Iterator[None]:
        """Send the good tags of a piece to the order. Yields where time has jumped and tags may
        be missing: the caller then takes from the order what came before."""
        vouched = piece.begin_ps is not None
        interval = self.interval(piece)
        times, inputs = piece.times_ps, piece.inputs
        while True:
            used = self._run(times, inputs, interval, vouched)
            if self.pending <= k.CONFIRMATIONS:
                break
            times, inputs = times[used:], inputs[used:]
            yield from self._confirmed(vouched)
        if vouched and piece.complete and self.pending:
            yield from self._confirmed(vouched)

    def end(self) -> None:
        """The stream ends or is interrupted here: what was never confirmed is dropped."""
        self._drop_pending()

    def _run(
        self,
        times: NDArray[np.int64],
        inputs: NDArray[Any],
        interval: tuple[int, int],
        vouched: bool,
    ) -> int:
        held = len(self._order)
        out_times, out_channels = self._order.room(times.size)
        counts = np.zeros(k.COUNT_SIZE, np.int64)
        counts[k.KEPT] = held
        limits = (self._disorder_ps, self._jump_ps, TIME_LIMIT_PS, *interval, vouched)
        used = k.fill_judged(
            times,
            inputs,
            np.array(limits, np.int64),
            self._channels_of[inputs.dtype],
            self._delays_ps,
            self._state,
            self._pending_times,
            self._pending_inputs,
            out_times,
            out_channels,
            counts,
        )
        unordered, shuffled_ps = bool(counts[k.UNORDERED]), int(self._state[k.SHUFFLED])
        self._order.take(int(counts[k.KEPT]), unordered, shuffled_ps)
        for reason, slot in _REASONS.items():
            self._counters.drop(reason, int(counts[slot]))
        largest = int(self._state[k.DISORDER])
        self._counters.largest_disorder_ps = max(self._counters.largest_disorder_ps, largest)
        return used

    def _confirmed(self, vouched: bool) -> Iterator[None]:
        """Take the pending tags as good: time jumped.

        Forwards, tags may be missing in between, unless the source vouches for the interval.
        Backwards, a new session of the source began: stream time goes on at the next slice. A
        source that vouches for an interval cannot go back in it, so there the tags are late.
        """
        back = bool(self._state[k.PENDING_BACK])
        if back and vouched:
            self._drop_pending()
            return
        count = self.pending
        times = self._pending_times[:count].copy()
        inputs = self._pending_inputs[:count].astype(np.uint16)
        if back:
            next_slice = (int(self._state[k.LATEST]) // self._slice_ps + 1) * self._slice_ps
            offset = next_slice - int(times.min())
            if max(abs(offset), next_slice) > TIME_LIMIT_PS:
                self._drop_pending("overflow")
                return
            self._state[k.OFFSET] = offset
        self._state[k.STARTED] = 0
        self._state[k.PENDING] = 0
        if vouched:
            self._take_one_by_one(times, inputs)
        else:
            yield
            self._run(times, inputs, EVERYWHERE, vouched)

    def _take_one_by_one(self, times: NDArray[np.int64], inputs: NDArray[np.uint16]) -> None:
        """Take tags between which long pauses may lie: each is the first of its own time."""
        latest = int(times.max()) + int(self._state[k.OFFSET])
        for i in range(times.size):
            self._state[k.STARTED] = 0
            self._run(times[i : i + 1], inputs[i : i + 1], EVERYWHERE, vouched=True)
        self._state[k.LATEST] = self._state[k.SHUFFLED] = latest

    def _drop_pending(self, reason: str | None = None) -> None:
        far = "late" if self._state[k.PENDING_BACK] else "jump"
        self._counters.drop(reason or far, self.pending)
        self._state[k.PENDING] = 0


_REASONS = {
    "late": k.LATE,
    "jump": k.JUMP,
    "overflow": k.OVERFLOW,
    "outside_interval": k.OUTSIDE,
    "unlisted_input": k.UNLISTED,
}


def channel_table(channels: Mapping[str, Channel], inputs: int) -> NDArray[np.uint8]:
    """Channel index by input number, uint8, for inputs below `inputs`."""
    table = np.full(inputs, k.UNLISTED_INPUT, np.uint8)
    for index, channel in enumerate(channels.values()):
        if channel.input < inputs:
            table[channel.input] = index
    return table
