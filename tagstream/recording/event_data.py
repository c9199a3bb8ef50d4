"""The tags of an NXevent_data group, decoded bite by bite."""

from __future__ import annotations

import math
from fractions import Fraction
from typing import Any

import h5py
import numpy as np
from numpy.typing import NDArray

from tagstream import units
from tagstream.errors import InputError
from tagstream.recording.event_groups import EventGroups
from tagstream.recording.integers import as_inputs
from tagstream.recording.kernels import fill_times
from tagstream.recording.opening import read_leading, require_column
from tagstream.recording.time_columns import TimeColumn

BITE_TAGS = 1 << 20  # four chunks of a recording at a time read faster than one


class EventData:
    """Tags in stored order.

    from_first: time zero is the second of the first group, not that of the file. count: tags;
    longest: values of the longest column, the same unless the file is broken.
    Raises InputError when a needed dataset is missing or of a wrong type.
    """

    def __init__(self, group: h5py.Group, *, from_first: bool) -> None:
        self.where = f"{group.file.filename}: {group.name}"
        self._ids = require_column(group, "event_id", "iu", self.where)
        self._offsets = require_column(group, "event_time_offset", "iuf", self.where)
        lengths = self._ids.shape[0], self._offsets.shape[0]
        self.count, self.longest = min(lengths), max(lengths)
        self._offset_times = TimeColumn(self._offsets, f"{self.where}/event_time_offset")
        zero = _optional(group, "event_time_zero", "iuf", self.where)
        index = _optional(group, "event_index", "iu", self.where)
        self._groups = EventGroups(zero, index, self.longest, self.where, from_first=from_first)
        self.utc = None if zero is None else zero.attrs.get("offset", zero.attrs.get("start"))
        self._begin = self._end = 0
        self._times = np.zeros(0, np.int64)
        self._inputs: NDArray[Any] = np.zeros(0, np.uint8)
        self._error: InputError | None = None

    @property
    def tick(self) -> Fraction:
        """The longest tick in ps of which all times are multiples; 1 ps for floats."""
        columns = [c for c in (self._groups.times, self._offset_times) if c is not None]
        if not all(column.whole for column in columns):
            return Fraction(1)
        return Fraction(math.gcd(*(int(column.unit) for column in columns)))

    @property
    def zero_ps(self) -> int:
        """Time zero of `take`, in ps after that of the file."""
        return 0 if self._groups.times is None else self._groups.times.zero_ps

    def take(self, first: int, last: int) -> tuple[NDArray[np.int64], NDArray[Any]]:
        """Times (ps, int64) and inputs (uint8 or uint16) from tag `first` on, at most to `last`.

        At least one if first < last, fewer than asked where a bite ends. Call in rising order.
        The arrays are views that stay valid. Raises InputError at the first tag that cannot be
        had.
        """
        if first >= last:
            return np.zeros(0, np.int64), as_inputs(np.zeros(0, self._ids.dtype))[0]
        if first >= self._end:
            if self._error is not None:
                raise self._error
            self._read_bite(first)
            if first >= self._end and self._error is not None:
                raise self._error
        part = slice(first - self._begin, min(last, self._end) - self._begin)
        return self._times[part], self._inputs[part]

    def _read_bite(self, first: int) -> None:
        if first >= self.count:
            raise InputError(
                f"{self.where}: event_id has {self._ids.shape[0]} and event_time_offset"
                f" {self._offsets.shape[0]} values; right would be equal lengths"
            )
        zeros, starts, groups_end = self._groups.covering(first)
        last = min(first + BITE_TAGS, groups_end, self.count)
        raw_ids = read_leading(self._ids, first, last)
        raw_offsets = read_leading(self._offsets, first, first + raw_ids.size)
        offsets, good = self._offsets_ps(raw_offsets)
        self._inputs, good_ids = as_inputs(raw_ids)
        if good < raw_offsets.size:
            self._note(first + good, "event_time_offset", raw_offsets[good], "a time that fits")
        if good_ids < min(good, raw_ids.size):
            good = good_ids
            self._note(first + good, "event_id", raw_ids[good], "0 to 65535")
        self._times = np.empty(good, np.int64)
        fill_times(offsets[:good], zeros, starts, first, units.TIME_LIMIT_PS, self._times)
        self._begin, self._end = first, first + good

    def _offsets_ps(self, raw: NDArray[Any]) -> tuple[NDArray[Any], int]:
        """Offsets in ps, uint32 or int64, and how many of them are good."""
        if raw.dtype == np.uint32 and self._offset_times.unit == 1:
            return raw, int(raw.size)
        return self._offset_times.to_ps(raw)

    def _note(self, tag: int, name: str, found: Any, right: str) -> None:
        self._error = InputError(f"{self.where}/{name}[{tag}] is {found}; right would be {right}")


def _optional(group: h5py.Group, name: str, kinds: str, where: str) -> h5py.Dataset | None:
    return require_column(group, name, kinds, where) if name in group else None
