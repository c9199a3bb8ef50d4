"""Fixed-size binary records, described in the settings, to ticks and inputs.

`RecordDecoder` knows bytes alone, not where they come from. A rollover record moves the epoch;
it is not handed on by itself: a file that pauses keeps nobody waiting, and which tags are late
is judged by tags alone.
"""

from __future__ import annotations

import sys
from collections.abc import Iterator
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from tagstream.errors import InputError, SettingsError
from tagstream.feeds import PIECE_TAGS
from tagstream.feeds.kernels import (
    GAP,
    KEPT,
    LAST,
    LOST,
    NO_LAST,
    ROLLOVER,
    SKIP,
    STATE_SIZE,
    fill_decoded,
    fill_words,
)
from tagstream.feeds.ticks import SATURATED, TickFeed, TickPiece
from tagstream.recording.opening import require_content
from tagstream.settings.feeds import BitField, Marker, RecordLayout
from tagstream.settings.feeds import RecordsFeed as RecordsSettings

_MEANINGS = {"rollover": ROLLOVER, "gap": LOST, "skip": SKIP}
_NO_FIELD = [0, 0, 0, 0, 0]


class RecordDecoder:
    """Decodes a stream of records that arrives in pieces of any length.

    held: bytes at the end that make no whole record yet. gap_pending: a gap came after the
    last tag. Raises SettingsError when a marker can never match.
    """

    def __init__(self, layout: RecordLayout) -> None:
        self._layout = layout
        self._plain = layout.record_bytes == 8 and layout.byte_order == "little"
        self._fields = _field_rows(layout)
        rows = [
            _marker_row(marker, number, layout.time_bits[1])
            for number, marker in enumerate(layout.markers, 1)
        ]
        self._markers = np.array(rows, np.int64).reshape(len(rows), 12)
        self._input_dtype = np.uint8 if layout.channel_bits[1] <= 8 else np.uint16
        self._state = np.zeros(STATE_SIZE, np.int64)
        self._state[LAST] = NO_LAST
        self._rest = b""

    @property
    def held(self) -> int:
        return len(self._rest)

    @property
    def gap_pending(self) -> bool:
        return bool(self._state[GAP])

    def feed(self, data: bytes | memoryview) -> list[TickPiece]:
        """The tags whose records end in `data`, in order, split at gaps."""
        data = self._rest + data if self._rest else data
        size = self._layout.record_bytes
        whole = len(data) // size
        self._rest = bytes(data[whole * size :])
        low, high = self._words(data, whole)
        ticks, inputs = np.empty(whole, np.int64), np.empty(whole, self._input_dtype)
        pieces = []
        used = first = 0
        while used < whole:
            used += fill_decoded(
                low[used:],
                high[used:],
                self._fields,
                self._markers,
                self._state,
                ticks[first:],
                inputs[first:],
            )
            last = first + int(self._state[KEPT])
            if last > first:
                pieces.append(TickPiece(ticks[first:last], inputs[first:last], self.gap_pending))
                self._state[GAP] = 0
                first = last
        return pieces

    def _words(
        self, data: bytes | memoryview, whole: int
    ) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
        """The records as two halves of 64 bits; the upper one empty where there is none."""
        nothing = np.zeros(0, np.int64)
        if self._plain and sys.byteorder == "little":
            low = np.frombuffer(data, np.int64, whole)
            return (low if low.flags.aligned else low.copy()), nothing
        low, high = np.empty(whole, np.int64), np.empty(whole, np.int64)
        raw = np.frombuffer(data, np.uint8)
        big = self._layout.byte_order == "big"
        fill_words(raw, self._layout.record_bytes, big, low, high)
        low.setflags(write=False)  # as those of `frombuffer`: one compiled kernel serves both
        return low, high


class RecordsFile:
    """A file of records; a source of ticks."""

    def __init__(self, settings: RecordsSettings) -> None:
        self.path = settings.path
        self._settings = settings
        self._size = require_content(self.path)
        self._read = 0
        if self._size < settings.skip_bytes:
            raise InputError(
                f"{self.path}: has {self._size} bytes, fewer than skip_bytes ="
                f" {settings.skip_bytes}; right would be the length of its header"
            )

    def pieces(self) -> Iterator[TickPiece]:
        """As `TickSource.pieces`."""
        decoder, self._read = RecordDecoder(self._settings), 0
        with self.path.open("rb") as file:
            file.seek(self._settings.skip_bytes)
            while data := file.read(PIECE_TAGS * self._settings.record_bytes):
                self._read += len(data)
                yield from decoder.feed(data)
        if decoder.held:
            raise InputError(
                f"{self.path}: the last {decoder.held} bytes are no whole record of"
                f" {self._settings.record_bytes} bytes; the file is cut off, or record_bytes or"
                " skip_bytes is another"
            )
        if decoder.gap_pending:
            yield TickPiece(np.zeros(0, np.int64), np.zeros(0, np.uint8), gap_before=True)

    @property
    def progress(self) -> float:
        """As `TickSource.progress`."""
        return min((self._settings.skip_bytes + self._read) / self._size, 1.0)


@dataclass(frozen=True, slots=True)
class _Clock:
    """What the ticks of decoded records mean."""

    tick_ps: Fraction
    begin_ps: int | None
    end_ps: int | None

    @classmethod
    def of(cls, settings: RecordsSettings) -> _Clock:
        return cls(settings.native_tick_ps, settings.begin_ps, settings.end_ps)


class RecordsFeed(TickFeed):
    """A file of records, as the [feed] section describes it."""

    def __init__(self, settings: RecordsSettings, slice_ps: int) -> None:
        super().__init__(RecordsFile(settings), _Clock.of(settings), slice_ps)


def _field_rows(layout: RecordLayout) -> NDArray[np.int64]:
    """The table of fields of the decoding kernel."""
    coarse, fine = layout.factors
    after = 2 ** layout.time_bits[1] if layout.wrap == "implicit" else 0
    fine_row = _NO_FIELD if layout.fine is None else _field_row(layout.fine.bits)
    rows = [
        [*_field_row(layout.time_bits), coarse, after],
        [*_field_row(layout.channel_bits), 0, 0],
        [*fine_row, fine, 0],
    ]
    return np.array(rows, np.int64)


def _field_row(field: BitField) -> list[int]:
    """Shifts and masks that take a field out of the two halves of a record."""
    first, bits = field
    in_low = max(min(bits, 64 - first), 0)
    in_high = bits - in_low
    return [
        first if in_low else 0,
        2**in_low - 1,
        max(first - 64, 0),
        2**in_high - 1,
        in_low,
    ]


def _marker_row(marker: Marker, number: int, time_bits: int) -> list[int]:
    """Masks and values by which a record is recognised, and what it then means."""
    mask = value = 0
    for first, bits, equals in marker.conditions:
        more_mask, more_value = (2**bits - 1) << first, equals << first
        if (value ^ more_value) & mask & more_mask:
            raise SettingsError(
                [f"[[feed.marker]] {number}: no record can match, two of `where` contradict"]
            )
        mask, value = mask | more_mask, value | more_value
    step = min(marker.step or 2**time_bits, SATURATED)
    return [
        _MEANINGS[marker.means],
        *_halves(mask, value),
        step,
        int(marker.count is None),
        *(_NO_FIELD if marker.count is None else _field_row(marker.count)),
    ]


def _halves(mask: int, value: int) -> list[int]:
    """[mask, value] of bits 0 to 63, then of 64 to 127, as signed integers."""
    parts = [number >> shift & (2**64 - 1) for shift in (0, 64) for number in (mask, value)]
    return [part - 2**64 if part >= 2**63 else part for part in parts]
