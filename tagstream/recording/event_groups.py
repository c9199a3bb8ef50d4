"""The groups of an NXevent_data: a time zero and the index of its first tag, read in order."""

from __future__ import annotations

import h5py
import numpy as np
from numpy.typing import NDArray

from tagstream.errors import InputError
from tagstream.recording.opening import read_values
from tagstream.recording.time_columns import TimeColumn

BLOCK_GROUPS = 1 << 18


class EventGroups:
    """Reads groups block by block, checks them, and tells which one covers a tag.

    zero, index: the datasets, or None: without an index there must be one zero for all tags or
    one for each; without both, all times count from zero. events: number of tags.
    """

    def __init__(
        self,
        zero: h5py.Dataset | None,
        index: h5py.Dataset | None,
        events: int,
        where: str,
        *,
        from_first: bool,
    ) -> None:
        self._zero, self._index, self._events, self._where = zero, index, events, where
        self.times: TimeColumn | None = None
        if zero is not None:
            self.times = TimeColumn(zero, f"{where}/event_time_zero", from_first=from_first)
        self._count = self._whole_groups()
        self._next_group = 0
        self._error: InputError | None = None
        self._end = 0
        self._zeros_ps = self._starts = np.zeros(0, np.int64)

    def _whole_groups(self) -> int:
        """How many groups have a zero, a first tag and an end."""
        if self._zero is None:
            if self._index is not None:
                raise InputError(
                    f"{self._where}: has event_index but no event_time_zero; right would be both"
                )
            return 1
        zeros = int(self._zero.shape[0])
        if self._index is None:
            if zeros not in (1, self._events):
                raise InputError(
                    f"{self._where}: has no event_index, and {zeros} event_time_zero for"
                    f" {self._events} tags; right would be an event_index, one zero, or one a tag"
                )
            return zeros
        indices = int(self._index.shape[0])
        return zeros if indices >= zeros else max(indices - 1, 0)

    def covering(self, tag: int) -> tuple[NDArray[np.int64], NDArray[np.int64], int]:
        """(zeros in ps, first tags, end) of a block of groups that has `tag`; tags must rise.

        Raises InputError when the next group is broken or there is none.
        """
        while tag >= self._end:
            if self._error is not None:
                raise self._error
            self._read_block()
        first = int(np.searchsorted(self._starts, np.int64(tag), side="right")) - 1
        return self._zeros_ps[first:], self._starts[first:], self._end

    def _read_block(self) -> None:
        first, last = self._next_group, min(self._next_group + BLOCK_GROUPS, self._count)
        if first >= self._count:
            raise InputError(self._too_few_groups())
        bounds = self._bounds(first, last)
        good = self._good_groups(bounds, first)
        zeros, fine = self._zeros(first, last)
        if fine < good:
            good = fine
            self._error = InputError(
                f"{self._where}/event_time_zero[{first + fine}] is no time that fits; right would"
                " be a finite number"
            )
        self._zeros_ps, self._starts = zeros[:good], bounds[:good]
        self._end = int(bounds[good]) if good else self._end
        self._next_group = last

    def _bounds(self, first: int, last: int) -> NDArray[np.int64]:
        """The first tags of groups first..last - 1, and the end of the last one."""
        if self._index is None:
            starts = np.arange(first, last, dtype=np.int64)
        else:
            starts = read_values(self._index, first, last + 1).astype(np.int64)
        missing = last - first + 1 - starts.size
        return np.concatenate([starts, np.full(missing, self._events, np.int64)])

    def _good_groups(self, bounds: NDArray[np.int64], first: int) -> int:
        """How many groups have a good begin and end; remembers what is wrong with the next."""
        before = np.concatenate([[self._end if first else 0], bounds[:-1]])
        wrong = (bounds < before) | (bounds > self._events)
        wrong[0] |= first == 0 and bounds[0] != 0
        if not wrong.any():
            return int(bounds.size) - 1
        bad = int(np.argmax(wrong))
        right = "0" if first + bad == 0 else f"{before[bad]} to {self._events}"
        self._error = InputError(
            f"{self._where}/event_index[{first + bad}] is {bounds[bad]}; right would be {right}"
        )
        return max(bad - 1, 0)

    def _zeros(self, first: int, last: int) -> tuple[NDArray[np.int64], int]:
        if self._zero is None or self.times is None:
            return np.zeros(1, np.int64), 1
        return self.times.to_ps(read_values(self._zero, first, last))

    def _too_few_groups(self) -> str:
        zeros = 1 if self._zero is None else self._zero.shape[0]
        indices = zeros if self._index is None else self._index.shape[0]
        return (
            f"{self._where}: tag {self._end} of {self._events} belongs to no group; event_time_zero"
            f" has {zeros} and event_index {indices} values; right would be as many of both,"
            " for all tags"
        )
