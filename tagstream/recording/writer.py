"""Writes a recording: the whole structure first, then tags are appended.

One thread. The file has a temporary name until it is closed whole, and never replaces another.
It grows in SWMR mode, so that after a crash all that was flushed can be read; see `recovery`.
"""

from __future__ import annotations

import os
from fractions import Fraction
from pathlib import Path
from types import TracebackType
from typing import Any

import h5py
import numpy as np
from numpy.typing import NDArray

from tagstream import units
from tagstream.errors import ResultsError
from tagstream.recording.appending import AppendedColumn
from tagstream.recording.completion import complete
from tagstream.recording.coverage import CoverageWriter, Row
from tagstream.recording.header import RecordingHeader, write_header
from tagstream.recording.kernels import fill_groups
from tagstream.recording.layout import (
    CHUNK_EVENTS,
    CHUNK_ROWS,
    COVERAGE,
    ENTRY,
    EVENTS,
    GAPS,
    MARK_DTYPE,
    MARK_TABLE,
    MARKS,
    SETTLED,
    Mark,
)
from tagstream.recording.marks import append_mark
from tagstream.recording.naming import give_name, make_file

MIN_FREE_BYTES = 32_000_000  # HDF5 cannot close a file on a full disk: stop before it is full


class RecordingWriter:
    """A recording that is being made.

    path: where it will be once closed; until then it is `path` with ".part" after its name.
    tick: native tick in ps. inputs_above_255: keep inputs as uint16 (uint8 else).
    header: what else is known; a new run without it.

    As a context manager it closes at the end; after an error what was added is made a whole,
    readable file too, but keeps its temporary name.
    Raises ResultsError when the file exists, cannot be made, or the disk is full.
    """

    def __init__(
        self,
        path: Path | str,
        *,
        tick: Fraction,
        inputs_above_255: bool = False,
        header: RecordingHeader | None = None,
    ) -> None:
        self.path = Path(path)
        self.header = header or RecordingHeader()
        self._closed = False
        self._file = make_file(self.path, self.part)
        entry = _group(self._file, ENTRY, "NXentry")
        entry.attrs["default"] = EVENTS
        write_header(entry, self.header, tick)
        self._most_input = 65535 if inputs_above_255 else 255
        self._make_events(_group(entry, EVENTS, "NXevent_data"))
        gaps = _group(entry, GAPS, "NXlog")
        self._coverage = CoverageWriter(_group(entry, COVERAGE, "NXcollection"), gaps)
        self._marks = AppendedColumn(entry, MARK_TABLE, MARK_DTYPE, 16)
        _group(entry, MARKS, "NXcollection")
        if self.header.origin_utc is not None:
            gaps["time"].attrs["start"] = self.header.origin_utc
        self._settled = entry.create_dataset(SETTLED, data=np.zeros(6, "<i8"), chunks=(6,))
        self._file.swmr_mode = True
        self._zeros_scratch = np.empty(CHUNK_EVENTS, np.int64)
        self._starts_scratch = np.empty(CHUNK_EVENTS, np.int64)
        self._offsets_scratch = np.empty(CHUNK_EVENTS, np.uint32)

    def _make_events(self, events: h5py.Group) -> None:
        id_dtype = "<u2" if self._most_input > 255 else "u1"
        self._ids = AppendedColumn(events, "event_id", id_dtype, CHUNK_EVENTS)
        self._offsets = AppendedColumn(events, "event_time_offset", "<u4", CHUNK_EVENTS)
        self._zeros = AppendedColumn(events, "event_time_zero", "<i8", CHUNK_ROWS)
        self._index = AppendedColumn(events, "event_index", "<i8", CHUNK_ROWS)
        self._cue_zeros = AppendedColumn(events, "cue_timestamp_zero", "<i8", CHUNK_ROWS)
        self._cue_index = AppendedColumn(events, "cue_index", "<i8", CHUNK_ROWS)
        self._next_cue = 0
        for column in (self._offsets, self._zeros, self._cue_zeros):
            column.attrs["units"] = "ps"
        if self.header.origin_utc is not None:
            self._zeros.attrs["offset"] = self.header.origin_utc
            self._cue_zeros.attrs["start"] = self.header.origin_utc

    @property
    def part(self) -> Path:
        """The temporary name."""
        return self.path.with_name(self.path.name + ".part")

    @property
    def count(self) -> int:
        """Tags added so far."""
        return self._ids.size

    def add(
        self,
        times_ps: NDArray[np.int64],
        inputs: NDArray[Any],
        begin_ps: int | None = None,
        end_ps: int | None = None,
        complete: bool = True,
        gap_before: bool = False,
        lossy: bool = False,
    ) -> None:
        """Append a piece of the stream, in arrival order.

        times_ps: int64, n; beyond +-units.BEYOND_LIMIT_PS they are kept as that. inputs: any
        integers, n. The others are as in `RecordedPiece`. Consecutive pieces of one interval
        are kept as one: how a stream was cut into pieces is not recorded.
        Raises ResultsError for an input the file cannot hold, and when the disk is full.
        """
        if times_ps.size != inputs.size or (begin_ps is None) != (end_ps is None):
            raise ValueError("as many inputs as times; begin_ps and end_ps both or neither")
        self._check_inputs(inputs)
        self._check_space()
        self._coverage.enter(
            Row(begin_ps, end_ps, complete, gap_before, lossy, first_event=self.count)
        )
        for first in range(0, times_ps.size, CHUNK_EVENTS):
            last = first + CHUNK_EVENTS
            self._add_tags(times_ps[first:last], inputs[first:last])

    def _add_tags(self, times_ps: NDArray[np.int64], inputs: NDArray[Any]) -> None:
        groups = fill_groups(
            times_ps,
            units.BEYOND_LIMIT_PS,
            self._zeros_scratch,
            self._starts_scratch,
            self._offsets_scratch,
            self._coverage.extent_ps,
        )
        if self.count >= self._next_cue:
            self._cue_zeros.append(self._zeros_scratch[0])
            self._cue_index.append(self.count)
            self._next_cue = self.count + CHUNK_EVENTS
        self._zeros.append(self._zeros_scratch[:groups])
        self._index.append(self._starts_scratch[:groups] + self.count)
        self._offsets.append(self._offsets_scratch[: times_ps.size])
        self._ids.append(inputs)

    def _check_inputs(self, inputs: NDArray[Any]) -> None:
        if inputs.dtype == np.uint8 or inputs.size == 0:
            return
        least, most = int(inputs.min()), int(inputs.max())
        if least < 0 or most > self._most_input:
            raise ResultsError(
                f"{self.path}: input {least if least < 0 else most} cannot be recorded; right"
                f" would be 0 to {self._most_input}"
            )

    def _check_space(self) -> None:
        free = os.statvfs(self.part.parent)
        if free.f_bavail * free.f_frsize < MIN_FREE_BYTES:
            raise ResultsError(
                f"{self.path}: less than {units.format_bytes(MIN_FREE_BYTES)} left on the disk;"
                f" what was recorded before is in {self.part}"
            )

    def add_mark(self, mark: Mark) -> None:
        """Append a mark. Raises ValueError for a key or text that does not fit."""
        append_mark(self._marks, mark)

    def flush(self) -> None:
        """Bring everything added so far to the file, the word of how much it is last."""
        self._coverage.end_row()  # an interval that is open goes on in a row of its own
        columns = (self._offsets, self._ids, self._zeros, self._index)
        for column in (*columns, self._cue_zeros, self._cue_index, self._marks):
            column.flush()
        self._coverage.flush()
        self._file.flush()
        sizes = (self.count, self._zeros.size, self._cue_zeros.size)
        self._settled[:] = np.array([*sizes, *self._coverage.sizes, self._marks.size], "<i8")
        self._file.flush()

    def close(self) -> None:
        """Finish the file and give it its name. Raises ResultsError if the name was taken."""
        if not self._closed:
            self._finish()
            give_name(self.part, self.path)

    def abandon(self) -> None:
        """Leave the file as it is on the disk, which takes nothing more; see `recovery`.

        HDF5 keeps trying to write what it still holds, and crashes the interpreter at its end.
        So that may go to the null device.
        """
        if self._closed:
            return
        self._closed = True
        null = os.open(os.devnull, os.O_RDWR)
        os.dup2(null, self._file.id.get_vfd_handle())
        os.close(null)
        self._file.close()

    def _finish(self) -> None:
        """Make a whole, closed file under the temporary name."""
        if self._closed:
            return
        self._closed = True
        self.flush()
        self._file.close()
        complete(self.part, self.header.origin_utc)

    def __enter__(self) -> RecordingWriter:
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        if error is None:
            self.close()
        else:
            self._finish()


def _group(parent: h5py.Group, name: str, nx_class: str) -> h5py.Group:
    group = parent.create_group(name)
    group.attrs["NX_class"] = nx_class
    return group
