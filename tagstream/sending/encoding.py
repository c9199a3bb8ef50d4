"""Tags to described records: the way back of `feeds.records`.

Only what a layout can hold is encoded: everything else is an error that says what does not fit.
Times become the nearest native tick.
"""

from __future__ import annotations

from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from tagstream.errors import SettingsError
from tagstream.sending.words import Words
from tagstream.settings.feeds import Marker, RecordLayout


class RecordEncoder:
    """Encodes one session. Raises SettingsError for a layout or tags that cannot be encoded."""

    def __init__(self, layout: RecordLayout) -> None:
        self._layout, self._words = layout, Words(layout)
        self._coarse, self._fine = layout.factors
        self._range = 2 ** layout.time_bits[1]
        self._rollover = _marker(layout, "rollover")
        self._lost = _marker(layout, "gap")
        self._step = self._range
        if self._rollover is not None:
            self._step = self._rollover.step or self._range
        self._epoch: int | None = None
        self._last: int | None = None
        self._check()

    def _check(self) -> None:
        fine = self._layout.fine
        if fine is not None and 2 ** fine.bits[1] * abs(self._fine) < self._coarse:
            _refuse("fine reaches less than one tick of time_bits, so most times cannot be encoded")
        if self._step > self._range:
            _refuse("a rollover means more than time_bits can count to, so times are left out")

    def gap(self) -> bytes:
        """The record of a gap; nothing where the layout knows none."""
        if self._lost is None:
            return b""
        return self._words.as_bytes(*self._words.of_marker(self._lost, np.zeros(1, np.int64)))

    def encode(self, times_ps: NDArray[np.int64], inputs: NDArray[np.uint16]) -> bytes:
        """The records of tags in time order, with those that tell of rollovers between them."""
        if times_ps.size == 0:
            return b""
        coarse, fine = self._counts(times_ps)
        self._check_inputs(inputs)
        if self._layout.wrap == "implicit":
            self._check_pauses(coarse)
            tags = self._words.of_tags(coarse % self._range, inputs, fine)
            return self._words.as_bytes(*tags)
        if self._rollover is None:
            self._check_range(coarse)
            return self._words.as_bytes(*self._words.of_tags(coarse, inputs, fine))
        tags = self._words.of_tags(coarse % self._step, inputs, fine)
        return self._with_rollovers(self._rollover, coarse // self._step, tags)

    def _counts(self, times_ps: NDArray[np.int64]) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
        """Counts of the time field and of the fine one."""
        ticks = _nearest(times_ps, self._layout.native_tick_ps)
        if self._fine >= 0:
            coarse = ticks // self._coarse
            rest = ticks - coarse * self._coarse
        else:
            coarse = -(-ticks // self._coarse)
            rest = coarse * self._coarse - ticks
        return coarse, rest // max(abs(self._fine), 1)

    def _with_rollovers(
        self,
        marker: Marker,
        epochs: NDArray[np.int64],
        tags: tuple[NDArray[np.uint64], NDArray[np.uint64]],
    ) -> bytes:
        first = int(epochs[0]) if self._epoch is None else self._epoch
        steps = np.diff(epochs, prepend=first)
        self._epoch = int(epochs[-1])
        if not steps.any():
            return self._words.as_bytes(*tags)
        most = 1 if marker.count is None else 2 ** marker.count[1] - 1
        records = -(-steps // most)  # before each tag
        places = np.arange(steps.size) + np.cumsum(records)
        counts = np.full(int(places[-1]) + 1, most)
        turned = np.flatnonzero(steps)
        counts[places[turned] - 1] = steps[turned] - (records[turned] - 1) * most
        low, high = self._words.of_marker(marker, counts)
        low[places], high[places] = tags
        return self._words.as_bytes(low, high)

    def _check_inputs(self, inputs: NDArray[np.uint16]) -> None:
        most, bits = int(inputs.max()), self._layout.channel_bits[1]
        if most >= 2**bits:
            _refuse(f"channel_bits of {bits} bits cannot hold input {most} of the recording")

    def _check_range(self, coarse: NDArray[np.int64]) -> None:
        if int(coarse.max()) >= self._range or int(coarse.min()) < 0:
            _refuse(
                f"the recording goes on after time_bits of {self._layout.time_bits[1]} bits are"
                " full, and nothing tells that the clock began again; right would be"
                ' wrap = "implicit" or a marker that means rollover'
            )

    def _check_pauses(self, coarse: NDArray[np.int64]) -> None:
        before = int(coarse[0]) if self._last is None else self._last
        self._last = int(coarse[-1])
        if int(np.diff(coarse, prepend=before).max()) > self._range // 2:
            _refuse(
                'with wrap = "implicit" tags must come within half the range of time_bits; the'
                " recording has a longer pause"
            )


def _marker(layout: RecordLayout, means: str) -> Marker | None:
    """A marker of that meaning; rather one with a count."""
    found = [marker for marker in layout.markers if marker.means == means]
    found.sort(key=lambda marker: marker.count is None)
    return found[0] if found else None


def _nearest(times_ps: NDArray[np.int64], tick: Fraction) -> NDArray[np.int64]:
    """Times as counts of a tick, rounded half up. Exact, as `TickScale` is."""
    num, den = tick.numerator, tick.denominator
    if (num, den) == (1, 1):
        return times_ps
    if int(np.abs(times_ps).max()) // num >= 2**62 // den:
        _refuse("the recording is longer than 64 bits of its native tick can count")
    quotient, rest = np.divmod(times_ps, np.int64(num))
    counts: NDArray[np.int64] = quotient * den + (2 * rest * den + num) // (2 * num)
    return counts


def _refuse(reason: str) -> None:
    raise SettingsError([f"[feed]: {reason}"])
