"""Results of a run that must not end because a disk is full: they pause, and go on later.

What takes room pauses first: the history, at `min_free`; its rows are kept in memory. latest.h5,
which takes none that lasts, is replaced as long as there is room for a few of it, so that readers
are told of the trouble; log.jsonl, the smallest, goes on longest. Whatever the operating system
refuses (a disk that is full, over its quota, read-only, broken) pauses that file alone.
"""

from __future__ import annotations

import sys
from collections import deque
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

from tagstream.errors import ResultsError
from tagstream.outputs import Row, RunHeader, Snapshot
from tagstream.outputs.disk import free_bytes
from tagstream.outputs.run_writer import RunWriter
from tagstream.units import format_bytes

ROWS_KEPT = 3600  # slices whose history is kept in memory meanwhile
LATEST_ROOM = 10_000_000  # latest.h5 pauses below this and a few times its size ...
LATEST_TIMES = 4
LOG_ROOM = 1_000_000  # ... and the log below this
MARGIN = 10  # after a pause there has to be a tenth more, so that it does not come and go


class Patient:
    """Hands on to a writer; while that cannot write, keeps rows and says so.

    min_free: bytes of the disk below which the history pauses, so that no file breaks. free:
    bytes left. Used by the thread that does all HDF5; `numbers` by anybody.
    """

    def __init__(
        self, writer: RunWriter, min_free: int, free: Callable[[Path], int] | None = None
    ) -> None:
        self._writer, self._min_free, self._free = writer, min_free, free or free_bytes
        self._rows: deque[Row] = deque()
        self._lost = self._skipped = 0
        self._trouble = ""  # why the history pauses
        self._latest_trouble = ""
        self._last_error = ""
        self._numbers: dict[str, int | float | str] = {}
        self._look()

    def numbers(self) -> dict[str, int | float | str]:
        """For the health: degraded (1 while results pause), history_rows_waiting and _lost,
        snapshots_skipped, last_disk_error, disk_free_bytes."""
        told = self._writer.numbers()
        skipped = self._skipped + int(told["snapshots_skipped"])
        return {**told, **self._numbers, "snapshots_skipped": skipped}

    def add_row(self, row: Row) -> None:
        """Write a slice, or keep it until it can be."""
        self._writer.remember(row)
        self._rows.append(row)
        self._write_rows()
        self._look()

    def snapshot_due(self) -> bool:
        """As the writer has it."""
        return self._writer.snapshot_due()

    def replace_snapshot(self, snapshot: Snapshot) -> None:
        """Write a snapshot, or skip it; rows that wait are tried first."""
        self._write_rows()
        if not self._trouble and (trouble := _refused(self._writer.flush)):
            self._pause(trouble)
        self._replace(snapshot)
        self._look()

    def renew(self, header: RunHeader) -> None:
        """Hand on; what could not be done is done when results go on."""
        if trouble := _refused(lambda: self._writer.renew(header)):
            self._pause(trouble)

    def event(self, name: str, stream_ps: int | None = None, **fields: Any) -> None:
        """Write to the log; to standard error while that cannot be."""
        self._writer.retry_log()
        refused = "no room"
        if self._room() >= min(LOG_ROOM, self._min_free):
            refused = _refused(lambda: self._writer.event(name, stream_ps, **fields))
        if refused:
            print(f"tagstream: {name} {fields}", file=sys.stderr)

    def close(self, snapshot: Snapshot) -> None:
        """Write what waits, whatever is to be kept free: there is no later. Raises ResultsError."""
        self._min_free = 0
        self._write_rows()
        if lost := len(self._rows):
            self._lost += lost
            self._rows.clear()
            self.event("rows_lost", rows=lost)
        self._look()
        self._writer.close(replace(snapshot, health={**snapshot.health, **self._at_the_end()}))

    def _at_the_end(self) -> dict[str, int | float | str]:
        known = self._numbers
        return {key: known[key] for key in ("history_rows_lost", "last_disk_error")}

    def _replace(self, snapshot: Snapshot) -> None:
        needed = self._room_for_latest()
        trouble = self._too_full(needed) if self._room() < needed else ""
        trouble = trouble or _refused(lambda: self._writer.replace_snapshot(snapshot))
        if trouble:
            self._skipped += 1
            self._note("latest.h5", trouble, again=bool(self._latest_trouble))
        self._latest_trouble = trouble

    def _write_rows(self) -> None:
        """All rows that wait, if they can be written; else they wait on, and the oldest go."""
        if self._writable() and (trouble := _refused(self._hand_over)):
            self._pause(trouble)
        while len(self._rows) > ROWS_KEPT:
            self._rows.popleft()
            self._lost += 1

    def _hand_over(self) -> None:
        while self._rows:
            self._writer.add_row(self._rows.popleft())

    def _writable(self) -> bool:
        """Whether there is room; after trouble the files are begun anew."""
        needed = self._min_free + (self._min_free // MARGIN if self._trouble else 0)
        if self._room() < needed:
            self._pause(self._too_full(self._min_free))
            return False
        if not self._trouble:
            return True
        if trouble := _refused(self._writer.begin_again):
            self._pause(trouble)
            return False
        self._trouble = ""
        told = {"rows_waiting": len(self._rows), "rows_lost": self._lost}
        self.event("results_resumed", **told, snapshots_skipped=self._skipped)
        return True

    def _room(self) -> int:
        return self._free(self._writer.folder.path)

    def _room_for_latest(self) -> int:
        return min(self._min_free, LATEST_ROOM + LATEST_TIMES * self._writer.image_bytes)

    def _too_full(self, needed: int) -> str:
        """For a person; a disk that does not answer has no room either."""
        room = self._room()
        free = f"{format_bytes(room)} free" if room else "no room, or the disk does not answer"
        return f"{free}; {format_bytes(needed)} are kept free ([results] min_free)"

    def _pause(self, why: str) -> None:
        self._rows.extendleft(reversed(self._writer.take_unwritten()))
        self._note("results", why, again=bool(self._trouble))
        self._trouble = why

    def _note(self, what: str, why: str, again: bool) -> None:
        """Tell of trouble when it begins, in the log, or by it, and on standard error."""
        self._last_error = why
        if not again:
            print(f"tagstream: {what} paused: {why}", file=sys.stderr)
            self.event("results_paused", what=what, why=why)

    def _look(self) -> None:
        degraded = bool(self._trouble or self._latest_trouble)
        self._numbers = {
            "degraded": int(degraded),
            "history_rows_waiting": len(self._rows),
            "history_rows_lost": self._lost,
            "last_disk_error": self._last_error,
            "disk_free_bytes": self._room(),
        }


def _refused(call: Callable[[], None]) -> str:
    """Why a call failed; nothing when it did not."""
    try:
        call()
    except ResultsError as error:
        return str(error)
    return ""
