"""Results of a run that must not end because a disk is full: they pause, and go on later."""

from __future__ import annotations

import os
import sys
from collections import deque
from collections.abc import Callable
from pathlib import Path
from typing import Any

from tagstream.errors import ResultsError
from tagstream.outputs import Row, RunHeader, Snapshot
from tagstream.outputs.run_writer import RunWriter
from tagstream.units import format_bytes

ROWS_KEPT = 3600  # slices whose history is kept in memory meanwhile


class Patient:
    """Hands on to a writer; while that cannot write, keeps rows and says so.

    min_free: bytes of the disk below which nothing is written, so that no file breaks. free:
    bytes left. Used by the thread that does all HDF5; `numbers` by anybody.
    """

    def __init__(
        self, writer: RunWriter, min_free: int, free: Callable[[Path], int] | None = None
    ) -> None:
        self._writer, self._min_free, self._free = writer, min_free, free or free_bytes
        self._rows: deque[Row] = deque()
        self._lost = self._skipped = 0
        self._trouble = ""
        self._numbers: dict[str, int | float | str] = {}
        self._look()

    def numbers(self) -> dict[str, int | float | str]:
        """For the health: degraded (1 while results pause), history_rows_waiting and _lost,
        snapshots_skipped, last_disk_error, disk_free_bytes."""
        return {**self._numbers, **self._writer.numbers()}

    def add_row(self, row: Row) -> None:
        """Write a slice, or keep it until it can be."""
        self._keep(row)
        if self._writable():
            self._try(self._write_rows)
        self._look()

    def snapshot_due(self) -> bool:
        """As the writer has it."""
        return self._writer.snapshot_due()

    def replace_snapshot(self, snapshot: Snapshot) -> None:
        """Write a snapshot, or skip it."""
        if not (self._writable() and self._try(lambda: self._writer.replace_snapshot(snapshot))):
            self._skipped += 1
        self._look()

    def renew(self, header: RunHeader) -> None:
        """Hand on."""
        self._try(lambda: self._writer.renew(header))

    def event(self, name: str, stream_ps: int | None = None, **fields: Any) -> None:
        """Write to the log; to standard error while that cannot be."""
        if self._trouble or not self._try(lambda: self._writer.event(name, stream_ps, **fields)):
            print(f"tagstream: {name} {fields}", file=sys.stderr)

    def close(self, snapshot: Snapshot) -> None:
        """Write what waits, if it can be, and close. Raises ResultsError."""
        if self._rows and self._writable():
            self._try(self._write_rows)
        self._writer.close(snapshot)

    def _keep(self, row: Row) -> None:
        if len(self._rows) == ROWS_KEPT:
            self._rows.popleft()
            self._lost += 1
        self._rows.append(row)

    def _write_rows(self) -> None:
        """A row leaves when it is handed over: one that breaks the file is counted as lost."""
        while self._rows:
            row = self._rows.popleft()
            try:
                self._writer.add_row(row)
            except ResultsError:
                self._lost += 1
                raise

    def _writable(self) -> bool:
        """Whether there is room; after trouble the files are begun anew."""
        if self._room() < self._min_free:
            free = format_bytes(max(self._room(), 1))
            self._pause(f"{free} free, {format_bytes(self._min_free)} are kept free (min_free)")
            return False
        if not self._trouble:
            return True
        try:
            self._writer.begin_again()
        except ResultsError as error:
            self._pause(str(error))
            return False
        self._trouble = ""
        self._writer.event("results_resumed", rows_waiting=len(self._rows), rows_lost=self._lost)
        return True

    def _room(self) -> int:
        return self._free(self._writer.folder.path)

    def _try(self, call: Callable[[], None]) -> bool:
        try:
            call()
        except ResultsError as error:
            self._pause(str(error))
            return False
        return True

    def _pause(self, why: str) -> None:
        if not self._trouble:
            print(f"tagstream: results paused: {why}", file=sys.stderr)
        self._trouble = why

    def _look(self) -> None:
        self._numbers = {
            "degraded": int(bool(self._trouble)),
            "history_rows_waiting": len(self._rows) if self._trouble else 0,
            "history_rows_lost": self._lost,
            "snapshots_skipped": self._skipped,
            "last_disk_error": self._trouble or self._numbers.get("last_disk_error", ""),
            "disk_free_bytes": self._room(),
        }


def free_bytes(folder: Path) -> int:
    """What an ordinary user may still write on the disk of a folder; 0 when nobody can tell."""
    try:
        found = os.statvfs(folder)
    except OSError:
        return 0
    return found.f_bavail * found.f_frsize
