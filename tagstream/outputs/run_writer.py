"""The sink of a run: its folder with latest.h5, history, settings and log."""

from __future__ import annotations

import os
import socket
import time
import uuid
from collections.abc import Callable, Mapping
from contextlib import ExitStack, suppress
from dataclasses import replace
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from tagstream._version import __version__
from tagstream.errors import ResultsError
from tagstream.outputs import Row, RunHeader, Snapshot
from tagstream.outputs.atomic import replace_file
from tagstream.outputs.folder import RunFolder
from tagstream.outputs.history import History
from tagstream.outputs.latest import latest_image
from tagstream.outputs.log import EventLog
from tagstream.outputs.mounts import network_file_system
from tagstream.outputs.plain_files import PlainFiles, Put
from tagstream.outputs.recent import RecentValues

# latest.h5 is replaced at most once a second of wall time; a little less, so that slices of one
# second which end a moment early are not skipped, every other one.
SNAPSHOT_S = 0.9
BYTES_A_SECOND = 1_000_000  # of latest.h5: spares disks that wear, and the time of the HDF5 thread
NOT_HERE = "rows written there may reach readers late or not at all; a local disk is right"


class RunWriter:
    """Writes a run into its folder, in one thread; latest.h5 is put in place by another one.

    Before anything else happens latest.h5 stands, with the state "starting", and before the link
    points to the run. before: what the folder told of an earlier process of the same run; its
    latest.h5 stays until the first snapshot. Raises ResultsError when something cannot be
    written; what was written before stays whole.
    """

    def __init__(
        self,
        folder: RunFolder,
        header: RunHeader,
        clock: Callable[[], float] = time.monotonic,
        before: Mapping[str, Any] | None = None,
        put: Put = replace_file,
    ) -> None:
        self.folder, self._header, self._clock = folder, header, clock
        self._meta = _meta(before)
        self._period_s = SNAPSHOT_S
        self._recent = RecentValues(header.spans, header.slice_ps)
        self._files = PlainFiles(put, clock)
        with ExitStack() as opened:
            opened.callback(folder.close)
            opened.callback(self._files.close)
            self._log = EventLog(folder.path / "log.jsonl", clock)
            opened.callback(self._log.close)
            if before is None:
                self._write_latest(Snapshot((), {}, {"state": "starting"}))
                self._files.settle()
            self._replaced_at = clock()
            replace_file(folder.path / "settings.toml", header.settings_text.encode())
            self._history = History(_next_history(folder.path), header, clock)
            opened.callback(self._history.close)
            folder.announce()
            self._say_start(before)
            opened.pop_all()  # all stands: from here on `close` has to close them

    @property
    def run_uuid(self) -> str:
        """By which the run is known."""
        return str(self._meta["run_uuid"])

    def numbers(self) -> dict[str, int | float | str]:
        """For the health; from any thread."""
        return {"restarts": self._meta["restarts"], **self._files.numbers()}

    def add_row(self, row: Row) -> None:
        """Append a finished slice to the history."""
        self._recent.add(row)
        self._history.add(row)

    def snapshot_due(self) -> bool:
        """Whether latest.h5 is old enough to be replaced, and the last one is written."""
        return not self._files.busy and self._clock() - self._replaced_at >= self._period_s

    def replace_snapshot(self, snapshot: Snapshot) -> None:
        """Replace latest.h5; history and log are not behind it then."""
        self._history.flush()
        self._log.settle()
        self._write_latest(snapshot)

    def settle(self) -> None:
        """Wait until the last snapshot is on the disk. Raises ResultsError when it cannot be."""
        self._files.settle()

    def _write_latest(self, snapshot: Snapshot) -> None:
        self._replaced_at = self._clock()
        meta = {**self._meta, "updated_utc": _utc()}
        image = latest_image(self._header, meta, snapshot, self._recent)
        self._period_s = max(SNAPSHOT_S, snapshot_period_s(len(image)))
        self._files.put(self.folder.path / "latest.h5", image, snapshot.arrived_s)

    def renew(self, header: RunHeader) -> None:
        """Other columns of the history go into a next file; what is known of the run is told."""
        before, self._header = self._header, header
        if header.settings_text != before.settings_text:
            replace_file(self.folder.path / "settings.toml", header.settings_text.encode())
        if (header.estimates, header.spans) != (before.estimates, before.spans):
            self._history.close()
            self._begin_history()

    def begin_again(self) -> None:
        """After a failed write: go on in files that are not the broken ones."""
        self._log.begin_again()
        if self._history.broken:
            self._begin_history()

    def _begin_history(self) -> None:
        self._history = History(_next_history(self.folder.path), self._header, self._clock)

    def event(self, name: str, stream_ps: int | None = None, **fields: Any) -> None:
        """Write a line to log.jsonl."""
        self._log.event(name, stream_ps, fields)

    def _say_start(self, before: Mapping[str, Any] | None) -> None:
        about: dict[str, Any] = {"version": __version__, "run_uuid": self._meta["run_uuid"]}
        if before is None:
            self.event("start", **about)
        else:
            self.event("resume", **about, last_written=before.get("updated_utc"))
        if kind := network_file_system(self.folder.path):
            self.event("warning", text=f"{self.folder.path}: {kind}; {NOT_HERE}")

    def close(self, snapshot: Snapshot) -> None:
        """Write everything that waits, the last snapshot, and give up the folder.

        Raises ResultsError; then the last snapshot says "failed", if it can be written.
        """
        self._meta["end_time"] = _utc()
        with ExitStack() as last:
            last.callback(self.folder.close)
            last.callback(self._log.close)
            last.callback(self._files.close)
            try:
                self._history.close()
            except ResultsError:
                snapshot = replace(snapshot, health={**snapshot.health, "state": "failed"})
                raise
            finally:
                with suppress(ResultsError):  # of the one before; what counts is the last one
                    self._files.settle()
                self._write_latest(snapshot)


def snapshot_period_s(image_bytes: int) -> float:
    """How often a latest.h5 of so many bytes is replaced: about a megabyte a second."""
    return 0.9 * image_bytes / BYTES_A_SECOND


def _next_history(folder: Path) -> Path:
    """The next number that no file has."""
    numbers = [int(path.stem[-4:]) for path in folder.glob("history-[0-9][0-9][0-9][0-9].h5")]
    return folder / f"history-{max(numbers, default=0) + 1:04d}.h5"


def _meta(before: Mapping[str, Any] | None) -> dict[str, str | int]:
    """What stands in /run as it is; a run that goes on keeps its name, its start and its sums."""
    known = before or {}
    return {
        "program_name": "tagstream",
        "version": __version__,
        "run_uuid": str(known.get("run_uuid") or uuid.uuid4()),
        "start_time": str(known.get("start_time") or _utc()),
        "restarts": 0 if before is None else int(known.get("restarts", 0)) + 1,
        "host": socket.gethostname(),
        "pid": os.getpid(),
    }


def _utc() -> str:
    return datetime.now(UTC).isoformat(timespec="milliseconds")
