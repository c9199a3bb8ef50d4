"""history-0001.h5: one row per slice, readable while it grows.

HDF5 in SWMR mode (single writer, many readers). The whole skeleton is made before the switch;
afterwards rows are appended and nothing else, without compression. Two wide tables, so that a
row costs two writes: integers (int64) and numbers (float64). `numbers` is flushed first: a
reader that trusts the shorter length never sees half a row.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from pathlib import Path

import h5py
import numpy as np

from tagstream.outputs import Row, RunHeader
from tagstream.outputs import layout as at
from tagstream.outputs.folder import cannot_write

CHUNK_VALUES = 4096  # 32 kB: each flush rewrites the last chunk
BATCH_ROWS = 64
FLUSH_S = 1.0
_POISONED: list[h5py.File] = []  # after a failed write, closing such a file would crash


class History:
    """Appends rows; they are in the file a second later, or 64 rows later, or at `close`."""

    def __init__(self, path: Path, header: RunHeader, clock: Callable[[], float]) -> None:
        self._path, self._header, self._clock = path, header, clock
        self._flushed_at = clock()
        self._rows: list[Row] = []
        self._utc: list[float] = []
        integers = at.integer_columns(header.channels)
        numbers = at.number_columns(tuple(header.estimates), header.spans)
        try:
            self._file = h5py.File(
                path, "x", libver=("v110", "v110"), rdcc_nbytes=1 << 16, locking=False
            )
            self._file.attrs["NX_class"] = "NXroot"
            self._file.attrs["default"] = at.ENTRY
            entry = self._file.create_group(at.ENTRY)
            entry.attrs["NX_class"] = "NXentry"
            self._integers = _table(entry, at.HISTORY_INTEGERS, integers, "<i8")
            self._numbers = _table(entry, at.HISTORY_NUMBERS, numbers, "<f8")
            self._file.swmr_mode = True
        except OSError as error:
            raise cannot_write(path, error) from error

    def add(self, row: Row) -> None:
        """Take a row; flush when a batch is full or a second has passed."""
        self._rows.append(row)
        self._utc.append(time.time())
        late = self._clock() - self._flushed_at >= FLUSH_S
        if late or len(self._rows) >= BATCH_ROWS:
            self.flush()

    def flush(self) -> None:
        """Write the rows that wait. Raises ResultsError; what was flushed before stays readable."""
        self._flushed_at = self._clock()
        if not self._rows:
            return
        integers = np.array([self._integer_row(row) for row in self._rows], np.int64)
        numbers = np.array(
            [self._number_row(row, utc) for row, utc in zip(self._rows, self._utc, strict=True)],
            np.float64,
        )
        try:
            _append(self._numbers, numbers)
            _append(self._integers, integers)
            self._file.flush()
        except (OSError, RuntimeError) as error:
            _POISONED.append(self._file)
            if isinstance(error, OSError) and error.errno:
                raise cannot_write(self._path, error) from error
            raise cannot_write(self._path, OSError(None, str(error))) from error
        self._rows.clear()
        self._utc.clear()

    def close(self) -> None:
        """Write the rest and close the file; from then on it is an ordinary one."""
        if self._file in _POISONED:
            return
        self.flush()
        self._file.close()

    def _integer_row(self, row: Row) -> list[int]:
        return [row.slice_index, row.begin_ps, row.end_ps, row.live_time_ps, *row.counts.tolist()]

    def _number_row(self, row: Row, utc: float) -> list[float]:
        values = [utc]
        for name in self._header.estimates:
            for estimate in row.estimates[name]:
                values += [estimate.value, estimate.lower, estimate.upper]
        return values


def _table(entry: h5py.Group, name: str, columns: list[str], dtype: str) -> h5py.Dataset:
    rows = max(4, CHUNK_VALUES // len(columns))
    width = len(columns)
    table = entry.create_dataset(
        name, shape=(0, width), maxshape=(None, width), chunks=(rows, width), dtype=dtype
    )
    table.attrs["columns"] = np.array(columns, dtype=f"S{max(map(len, columns))}")
    return table


def _append(table: h5py.Dataset, rows: np.ndarray[tuple[int, int], np.dtype[np.generic]]) -> None:
    before = table.shape[0]
    table.resize(before + rows.shape[0], axis=0)
    table[before:] = rows
    table.flush()
