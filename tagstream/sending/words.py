"""Fields to records and records to bytes, after a described layout."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tagstream.errors import SettingsError
from tagstream.settings.feeds import BitField, Marker, RecordLayout

Halves = tuple[NDArray[np.uint64], NDArray[np.uint64]]
_ONES = 2**64 - 1


class Words:
    """Makes records as integers of 128 bits, in two halves, and the bytes of them."""

    def __init__(self, layout: RecordLayout) -> None:
        self._layout = layout
        self._markers = [_conditions(marker) for marker in layout.markers]
        self._plain = self._bits_of_plain_tags()

    def of_tags(
        self, times: NDArray[np.int64], inputs: NDArray[np.uint16], fine: NDArray[np.int64]
    ) -> Halves:
        """Tags as records. Raises SettingsError for one that would read as a marker."""
        halves = _filled(self._plain, times.size)
        _place(halves, times, self._layout.time_bits)
        _place(halves, inputs, self._layout.channel_bits)
        if self._layout.fine is not None:
            _place(halves, fine, self._layout.fine.bits)
        for number, (mask, value) in enumerate(self._markers, 1):
            if _match(halves, mask, value).any():
                raise SettingsError(
                    [f"[[feed.marker]] {number}: a tag of the recording would read as this marker"]
                )
        return halves

    def of_marker(self, marker: Marker, counts: NDArray[np.int64]) -> Halves:
        """Records that mean what a marker means. Raises SettingsError when they would not."""
        number = next(i for i, known in enumerate(self._layout.markers) if known is marker)
        halves = _filled(self._markers[number][1], counts.size)
        if marker.count is not None:
            _place(halves, counts, marker.count)
        earlier = any(_match(halves, *known).any() for known in self._markers[:number])
        if earlier or not _match(halves, *self._markers[number]).all():
            raise SettingsError(
                [f"[[feed.marker]] {number + 1}: its records would read as another marker"]
            )
        return halves

    def as_bytes(self, low: NDArray[np.uint64], high: NDArray[np.uint64]) -> bytes:
        """Records as bytes, in the order of the layout."""
        whole = np.empty((low.size, 2), "<u8")
        whole[:, 0], whole[:, 1] = low, high
        octets = whole.view(np.uint8)[:, : self._layout.record_bytes]
        if self._layout.byte_order == "big":
            octets = octets[:, ::-1]
        return octets.tobytes()

    def _bits_of_plain_tags(self) -> int:
        """The bits that no field of a tag uses: such that no marker is made of them alone."""
        layout = self._layout
        fields = [layout.time_bits, layout.channel_bits]
        if layout.fine is not None:
            fields.append(layout.fine.bits)
        used = sum(_mask(field) for field in fields)
        free = (2 ** (8 * layout.record_bytes) - 1) & ~used
        for bits in (0, free):
            if not any(mask & bits == value for mask, value in self._markers if not mask & used):
                return bits
        return 0


def _conditions(marker: Marker) -> tuple[int, int]:
    """(mask, value) of a marker as whole integers."""
    mask = value = 0
    for first, bits, equals in marker.conditions:
        mask, value = mask | _mask((first, bits)), value | equals << first
    return mask, value


def _mask(field: BitField) -> int:
    first, bits = field
    return ((1 << bits) - 1) << first


def _filled(value: int, count: int) -> Halves:
    return np.full(count, value & _ONES, np.uint64), np.full(count, value >> 64, np.uint64)


def _place(halves: Halves, values: NDArray[np.integer], field: BitField) -> None:
    """Add `values` into the bits of a field, which are zero so far."""
    first, bits = field
    numbers = values.astype(np.uint64)
    if first < 64:
        halves[0][:] |= numbers << np.uint64(first)
        if first + bits > 64:
            halves[1][:] |= numbers >> np.uint64(64 - first)
    else:
        halves[1][:] |= numbers << np.uint64(first - 64)


def _match(halves: Halves, mask: int, value: int) -> NDArray[np.bool_]:
    """Which records have the bits `value` under `mask`."""
    low, high = halves
    right = (low & np.uint64(mask & _ONES)) == np.uint64(value & _ONES)
    matching: NDArray[np.bool_] = right & ((high & np.uint64(mask >> 64)) == np.uint64(value >> 64))
    return matching
