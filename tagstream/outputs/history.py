"""history-0001.h5: one row per slice, readable while it grows.

HDF5 in SWMR mode (single writer, many readers). The whole skeleton is made before the switch;
afterwards rows are appended and nothing else, without compression. Two wide tables, so that a
row costs two writes: integers (int64) and numbers (float64). `numbers` is flushed first: a
reader that trusts the shorter length never sees half a row.
"""

from __future__ import annotations

import os
import time
from collections.abc import Callable
from pathlib import Path

import h5py
import numpy as np

from tagstream.errors import ResultsError
from tagstream.outputs import Row, RunHeader
from tagstream.outputs import layout as at
from tagstream.outputs.folder import cannot_write

CHUNK_VALUES = 4096  # 32 kB: each flush rewrites the last chunk
BATCH_ROWS = 64
FLUSH_S = 0.05  # slices of a live run are longer: each of their rows is written at once
SYNC_S = 10.0  # HDF5 never asks for it: how much a power cut may take


class History:
    """Appends rows, at once or, while they come faster than FLUSH_S, up to 64 together.

    The file appears under its name when it is ready for readers. After a failed write the rest
    is let go: the failure was told, and the run ends with it.
    """

    def __init__(self, path: Path, header: RunHeader, clock: Callable[[], float]) -> None:
        self._path, self._header, self._clock = path, header, clock
        self._flushed_at = self._synced_at = clock()
        self._open = True
        self._rows: list[Row] = []
        self._utc: list[float] = []
        integers = at.integer_columns(header.channels)
        numbers = at.number_columns(tuple(header.estimates), header.spans)
        if path.exists():
            raise ResultsError(f"{path}: exists already; a new run has a folder of its own")
        fresh = path.with_name(f"{path.name}.tmp")
        try:
            self._file = h5py.File(
                fresh, "x", libver=("v110", "v110"), rdcc_nbytes=1 << 16, locking=False
            )
        except OSError as error:
            raise cannot_write(path, error) from error
        try:
            self._file.attrs["NX_class"] = "NXroot"
            self._file.attrs["default"] = at.ENTRY
            entry = self._file.create_group(at.ENTRY)
            entry.attrs["NX_class"] = "NXentry"
            self._integers = _table(entry, at.HISTORY_INTEGERS, integers, "<i8")
            self._numbers = _table(entry, at.HISTORY_NUMBERS, numbers, "<f8")
            self._file.swmr_mode = True
            os.rename(fresh, path)
        except (OSError, RuntimeError) as error:
            self._give_up()
            fresh.unlink(missing_ok=True)
            raise cannot_write(path, error) from error

    @property
    def broken(self) -> bool:
        """Whether a write failed, so that the file takes nothing more."""
        return not self._open

    def add(self, row: Row) -> None:
        """Take a row; flush when a batch is full or the last flush is a while ago."""
        if not self._open:
            return
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
            self._sync()
        except (OSError, RuntimeError) as error:
            self._give_up()
            raise cannot_write(self._path, error) from error
        finally:
            self._rows.clear()
            self._utc.clear()

    def close(self) -> None:
        """Write the rest and close the file; from then on it is an ordinary one."""
        if not self._open:
            return
        self.flush()
        try:
            self._file.close()
        except (OSError, RuntimeError) as error:
            self._give_up()
            raise cannot_write(self._path, error) from error
        self._open = False

    def _sync(self) -> None:
        if self._clock() - self._synced_at >= SYNC_S:
            os.fsync(self._file.id.get_vfd_handle())
            self._synced_at = self._clock()

    def _give_up(self) -> None:
        """Close a file that cannot be written, leaving what is on the disk as it is.

        HDF5 keeps trying to write what it still holds, and crashes the interpreter at its end.
        So that may go to the null device.
        """
        self._open = False
        null = os.open(os.devnull, os.O_RDWR)
        os.dup2(null, self._file.id.get_vfd_handle())
        os.close(null)
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
