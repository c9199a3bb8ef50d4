"""The rows of /run/coverage: which interval each tag arrived with, written and read."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import h5py
import numpy as np
from numpy.typing import NDArray

from tagstream.errors import InputError
from tagstream.recording.appending import AppendedColumn
from tagstream.recording.layout import (
    CHUNK_ROWS,
    COMPLETE,
    GAP_BEFORE,
    LAYOUT,
    LOSSY,
    VOUCHED,
)
from tagstream.recording.opening import read_values, require_column

_COLUMNS = {"begin": "<i8", "end": "<i8", "first_event": "<i8", "flags": "u1"}


@dataclass(slots=True)
class Row:
    """An interval, or a piece of one. begin_ps, end_ps: None when nobody vouches."""

    begin_ps: int | None
    end_ps: int | None
    complete: bool
    gap_before: bool
    lossy: bool
    first_event: int

    def continued_by(self, other: Row) -> bool:
        """Whether `other` only adds tags: the same interval, still open, nothing lost between."""
        same = (self.begin_ps, self.end_ps, self.lossy) == (
            other.begin_ps,
            other.end_ps,
            other.lossy,
        )
        ended = self.begin_ps is not None and self.complete
        return same and not ended and not other.gap_before

    @property
    def flags(self) -> int:
        vouched = VOUCHED * (self.begin_ps is not None)
        return (
            vouched | GAP_BEFORE * self.gap_before | LOSSY * self.lossy | COMPLETE * self.complete
        )


class CoverageWriter:
    """Joins pieces of an interval to one row, and notes the gaps between rows."""

    def __init__(self, coverage: h5py.Group, gaps: h5py.Group) -> None:
        coverage.attrs["layout"] = LAYOUT
        self._columns = [
            AppendedColumn(coverage, name, dtype, CHUNK_ROWS) for name, dtype in _COLUMNS.items()
        ]
        self._gap_columns = [
            AppendedColumn(gaps, name, "<i8", CHUNK_ROWS) for name in ("time", "value")
        ]
        for column in (*self._columns[:2], *self._gap_columns):
            column.attrs["units"] = "ps"
        self._open: Row | None = None
        self._gap_pending = False
        self._covered_to: int | None = None
        self._last_tag: int | None = None
        self.extent_ps = _no_extent()  # of the tags of the open row; the kernel widens it

    def enter(self, row: Row) -> None:
        """Take the description of the piece whose tags come next."""
        if self._open is not None and self._open.continued_by(row):
            self._open.complete = row.complete
        else:
            self.end_row()
            self._open = row

    def end_row(self) -> None:
        """Close the open row, if there is one."""
        row, self._open = self._open, None
        if row is None:
            return
        low, high = (int(value) for value in self.extent_ps)
        tagged = low <= high
        begin, end = row.begin_ps, row.end_ps
        if begin is None or end is None:
            begin, end = (low, high) if tagged else (self._covered_to or 0,) * 2
        self._note_gap(row, begin, low if tagged else None)
        if row.lossy and end > begin:
            self._add_gap(begin, end)
        if row.begin_ps is not None or tagged:
            self._covered_to = end if self._covered_to is None else max(self._covered_to, end)
        self._last_tag = high if tagged else self._last_tag
        self.extent_ps[:] = _no_extent()
        for column, value in zip(
            self._columns, (begin, end, row.first_event, row.flags), strict=True
        ):
            column.append(value)

    def _note_gap(self, row: Row, begin: int, first_tag: int | None) -> None:
        """Note what is missing between what was covered before and this row."""
        if row.begin_ps is None and first_tag is None:
            self._gap_pending |= row.gap_before
            return
        marked = row.gap_before or self._gap_pending
        if self._covered_to is not None and begin > self._covered_to:
            if marked or row.begin_ps is not None:
                self._add_gap(self._covered_to, begin)
        elif marked and None not in (first_tag, self._last_tag):
            self._add_gap(self._last_tag, first_tag)
        self._gap_pending = False

    def _add_gap(self, begin: int | None, end: int | None) -> None:
        if begin is not None and end is not None and end > begin:
            for column, value in zip(self._gap_columns, (begin, end - begin), strict=True):
                column.append(value)

    @property
    def sizes(self) -> tuple[int, int]:
        """Rows and gaps so far, without an open row."""
        return self._columns[0].size, self._gap_columns[0].size

    def flush(self) -> None:
        """Bring the rows that are closed to the file."""
        for column in (*self._columns, *self._gap_columns):
            column.flush()


def _no_extent() -> NDArray[np.int64]:
    return np.array([2**63 - 1, -(2**63)], np.int64)


def read_rows(coverage: h5py.Group, events: int) -> Iterator[tuple[Row, int]]:
    """(row, index after its last tag) of each row, in order, in bounded memory.

    events: how many tags the recording has. Raises InputError at the first broken row.
    """
    where = f"{coverage.file.filename}: {coverage.name}"
    columns = [require_column(coverage, name, "iu", where) for name in _COLUMNS]
    sizes = [column.shape[0] for column in columns]
    rows, unequal = min(sizes), len(set(sizes)) > 1
    if unequal and sizes[2] == rows:
        rows = max(rows - 1, 0)  # where the last row ends is not known
    for first in range(0, rows, CHUNK_ROWS):
        last = min(first + CHUNK_ROWS, rows)
        begins, ends, flags = (read_values(columns[i], first, last).tolist() for i in (0, 1, 3))
        starts = [*read_values(columns[2], first, last + 1).tolist(), events]
        for i in range(last - first):
            row = _row(begins[i], ends[i], starts[i], flags[i])
            _check(row, starts[i + 1], events, first + i, where)
            yield row, starts[i + 1]
    if unequal:
        raise InputError(f"{where}: columns of {sizes} rows; right would be equal lengths")
    if rows == 0 and events:
        raise InputError(f"{where}: has no rows; right would be one for each interval")


def _row(begin: int, end: int, first_event: int, flags: int) -> Row:
    vouched = bool(flags & VOUCHED)
    return Row(
        begin if vouched else None,
        end if vouched else None,
        bool(flags & COMPLETE),
        bool(flags & GAP_BEFORE),
        bool(flags & LOSSY),
        first_event,
    )


def _check(row: Row, next_event: int, events: int, number: int, where: str) -> None:
    if number == 0 and row.first_event != 0:
        raise InputError(f"{where}/first_event[0] is {row.first_event}; right would be 0")
    if not row.first_event <= next_event <= events:
        raise InputError(
            f"{where}/first_event[{number + 1}] is {next_event}; right would be"
            f" {row.first_event} to {events}"
        )
    if row.begin_ps is not None and row.end_ps is not None and row.begin_ps > row.end_ps:
        raise InputError(
            f"{where}: row {number} begins at {row.begin_ps} ps and ends at {row.end_ps} ps;"
            " right would be an end that is not before the begin"
        )
