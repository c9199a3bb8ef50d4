"""The sink of a run: its folder with latest.h5, history, settings and log."""

from __future__ import annotations

import os
import socket
import time
import uuid
from collections.abc import Callable
from datetime import UTC, datetime
from typing import Any

from tagstream._version import __version__
from tagstream.outputs import Row, RunHeader, Snapshot
from tagstream.outputs.atomic import replace_file
from tagstream.outputs.folder import RunFolder
from tagstream.outputs.history import History
from tagstream.outputs.latest import latest_image
from tagstream.outputs.log import EventLog
from tagstream.outputs.recent import RecentValues

SNAPSHOT_S = 1.0  # at most this often is latest.h5 replaced, in wall time


class RunWriter:
    """Writes a run into its folder, in one thread.

    latest.h5 stands, with the state "starting", before anything else happens. Raises
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
        self._log = EventLog(folder.path / "log.jsonl", clock)
        self.replace_snapshot(Snapshot((), {}, {"state": "starting"}))
        replace_file(folder.path / "settings.toml", header.settings_text.encode())
        self._history = History(folder.path / "history-0001.h5", header, clock)
        self.event("start", version=__version__, run_uuid=self._meta["run_uuid"])

    def add_row(self, row: Row) -> None:
        """Append a finished slice to the history."""
        self._recent.add(row)
        self._history.add(row)

    def snapshot_due(self) -> bool:
        """Whether latest.h5 is old enough to be replaced."""
        return self._clock() - self._replaced_at >= SNAPSHOT_S

    def replace_snapshot(self, snapshot: Snapshot) -> None:
        """Replace latest.h5."""
        self._replaced_at = self._clock()
        meta = {**self._meta, "updated_utc": _utc()}
        image = latest_image(self._header, meta, snapshot, self._recent)
        replace_file(self.folder.path / "latest.h5", image)

    def event(self, name: str, stream_ps: int | None = None, **fields: Any) -> None:
        """Write a line to log.jsonl."""
        self._log.event(name, stream_ps, fields)

    def close(self, snapshot: Snapshot) -> None:
        """Write everything that waits, the last snapshot, and give up the folder."""
        try:
            self._history.close()
            self._meta["end_time"] = _utc()
            self.replace_snapshot(snapshot)
        finally:
            self._log.close()
            self.folder.close()


def _utc() -> str:
    return datetime.now(UTC).isoformat(timespec="milliseconds")
