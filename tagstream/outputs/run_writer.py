"""The sink of a run: its folder with latest.h5, history, settings and log."""

from __future__ import annotations

import os
import socket
import time
import uuid
from collections.abc import Callable
from contextlib import ExitStack
from dataclasses import replace
from datetime import UTC, datetime
from typing import Any

from tagstream._version import __version__
from tagstream.errors import ResultsError
from tagstream.outputs import Row, RunHeader, Snapshot
from tagstream.outputs.atomic import replace_file
from tagstream.outputs.folder import RunFolder
from tagstream.outputs.history import History
from tagstream.outputs.latest import latest_image
from tagstream.outputs.log import EventLog
from tagstream.outputs.recent import RecentValues

# latest.h5 is replaced at most once a second of wall time; a little less, so that slices of one
# second which end a moment early are not skipped, every other one.
SNAPSHOT_S = 0.9


class RunWriter:
    """Writes a run into its folder, in one thread.

    latest.h5 stands, with the state "starting", before anything else happens, and before the
    link points to the run. Raises
    ResultsError when something cannot be written; what was written before stays whole.
    """

    def __init__(
        self, folder: RunFolder, header: RunHeader, clock: Callable[[], float] = time.monotonic
    ) -> None:
        self.folder, self._header, self._clock = folder, header, clock
        self._meta: dict[str, str | int] = {
            "program_name": "tagstream",
            "version": __version__,
            "run_uuid": str(uuid.uuid4()),
            "start_time": _utc(),
            "host": socket.gethostname(),
            "pid": os.getpid(),
        }
        self._recent = RecentValues(header.spans, header.slice_ps)
        with ExitStack() as opened:
            opened.callback(folder.close)
            self._log = EventLog(folder.path / "log.jsonl", clock)
            opened.callback(self._log.close)
            self._write_latest(Snapshot((), {}, {"state": "starting"}))
            replace_file(folder.path / "settings.toml", header.settings_text.encode())
            self._history = History(folder.path / "history-0001.h5", header, clock)
            opened.callback(self._history.close)
            folder.announce()
            self.event("start", version=__version__, run_uuid=self._meta["run_uuid"])
            opened.pop_all()  # all stands: from here on `close` has to close them

    def add_row(self, row: Row) -> None:
        """Append a finished slice to the history."""
        self._recent.add(row)
        self._history.add(row)

    def snapshot_due(self) -> bool:
        """Whether latest.h5 is old enough to be replaced."""
        return self._clock() - self._replaced_at >= SNAPSHOT_S

    def replace_snapshot(self, snapshot: Snapshot) -> None:
        """Replace latest.h5; history and log are not behind it then."""
        self._history.flush()
        self._log.settle()
        self._write_latest(snapshot)

    def _write_latest(self, snapshot: Snapshot) -> None:
        self._replaced_at = self._clock()
        meta = {**self._meta, "updated_utc": _utc()}
        image = latest_image(self._header, meta, snapshot, self._recent)
        replace_file(self.folder.path / "latest.h5", image)

    def event(self, name: str, stream_ps: int | None = None, **fields: Any) -> None:
        """Write a line to log.jsonl."""
        self._log.event(name, stream_ps, fields)

    def close(self, snapshot: Snapshot) -> None:
        """Write everything that waits, the last snapshot, and give up the folder.

        Raises ResultsError; then the last snapshot says "failed", if it can be written.
        """
        self._meta["end_time"] = _utc()
        with ExitStack() as last:
            last.callback(self.folder.close)
            last.callback(self._log.close)
            try:
                self._history.close()
            except ResultsError:
                snapshot = replace(snapshot, health={**snapshot.health, "state": "failed"})
                raise
            finally:
                self._write_latest(snapshot)


def _utc() -> str:
    return datetime.now(UTC).isoformat(timespec="milliseconds")
