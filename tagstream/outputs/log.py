"""log.jsonl: what happened, one JSON object a line.

Fixed fields: utc, level ("info", "warning" or "error"), event, stream_ps (null if none). Events,
with their own fields:

of a run         start (version, run_uuid), resume (the same, and last_written: when the process
                 before last wrote; the time since is a gap), recovered (text: what was mended),
                 resume_gap (gap_s: stream time that is missing, known when tags come again), end
                 (the health at the end, and `error` if there was one)
of tags          gap (tags may have been lost; gaps: so many so far), mark (key, value, in force
                 from stream_ps), split_full (tally has as many values of key as it may keep apart;
                 what comes beyond is "other"), spans_restarted
of settings      warning (text: settings or tags that may surprise), reload (others were taken
                 over), reload_refused (text: why not)
of alerts        alert_raised, alert_cleared (number of the section, what, value, compared, bound,
                 text; see `alerts`), alert_command_failed (number, error)
of outputs       results_paused (what, why), results_resumed (rows_waiting, rows_lost,
                 snapshots_skipped), rows_lost (rows of the history, at the end), output_failed
                 (output, such as "publish", and its first error)
of recordings    segment (path, tags), segment_removed (path), recording_paused (why),
                 recording_resumed (tags_not_recorded)

Gaps, and what else may come in crowds (FOLDED_EVENTS), are folded into one line a second; `folded`
says how many it stands for, the other fields are those of the last. When the file is large the
log goes on in a new one; the old ones are log-0001.jsonl and so on, the oldest first.
"""

from __future__ import annotations

import contextlib
import errno
import json
import os
from collections.abc import Callable
from datetime import UTC, datetime
from io import FileIO
from pathlib import Path
from typing import Any

from tagstream.outputs.folder import cannot_write

FOLDED_EVENTS = (
    *("gap", "results_paused", "results_resumed"),
    *("recording_paused", "recording_resumed"),
)
FOLD_S = 1.0
MOST_BYTES = 50_000_000  # of one file
_WARNINGS = ("warning", "gap", "split_full", "alert_raised", "reload_refused", "recovered")
_ERRORS = ("results_paused", "recording_paused", "alert_command_failed", "output_failed", "rows_lost")


class EventLog:
    """Appends to log.jsonl, each line at once; repeated events are folded."""

    def __init__(self, path: Path, clock: Callable[[], float]) -> None:
        self._path, self._clock = path, clock
        self._broken = False  # once told that lines cannot be written, the rest is let go
        self._last: dict[str, float] = {}
        self._folded: dict[str, tuple[int, int | None, dict[str, Any]]] = {}
        try:
            torn = _ends_torn(path)
            self._file = FileIO(path, "a")
            if torn:
                self._file.write(b"\n")
        except OSError as error:
            raise cannot_write(path, error) from error

    def begin_again(self) -> None:
        """Try to write again after lines could not be written."""
        self._broken = False

    def event(self, name: str, stream_ps: int | None, fields: dict[str, Any]) -> None:
        """Write one event, or fold it into the next line of its kind."""
        now = self._clock()
        if name in FOLDED_EVENTS:
            if now - self._last.get(name, -FOLD_S) < FOLD_S:
                count = self._folded[name][0] if name in self._folded else 0
                self._folded[name] = (count + 1, stream_ps, fields)
                return
            self._last[name] = now
        self._unfold()
        self._write(name, stream_ps, fields)

    def settle(self) -> None:
        """Write what has been folded for a second, so that it waits for no other event."""
        now = self._clock()
        if all(now - self._last[name] >= FOLD_S for name in self._folded):
            self._unfold()

    def close(self) -> None:
        """Write what was folded, and close the file."""
        try:
            self._unfold()
        finally:
            with contextlib.suppress(OSError):  # what it says has been said when writing
                self._file.close()

    def _unfold(self) -> None:
        folded, self._folded = self._folded, {}
        for name, (count, stream_ps, fields) in folded.items():
            self._write(name, stream_ps, {**fields, "folded": count})

    def _write(self, name: str, stream_ps: int | None, fields: dict[str, Any]) -> None:
        if self._broken:
            return
        line = {
            "utc": datetime.now(UTC).isoformat(timespec="milliseconds"),
            "level": _level(name, fields),
            "event": name,
            "stream_ps": stream_ps,
            **fields,
        }
        try:
            self._append((json.dumps(line, ensure_ascii=False) + "\n").encode(errors="replace"))
        except OSError as error:
            self._broken = True
            raise cannot_write(self._path, error) from error

    def _append(self, line: bytes) -> None:
        """The whole line or nothing of it: a part would spoil the line after it."""
        before = self._file.seek(0, os.SEEK_END)
        if self._file.write(line) != len(line):
            with contextlib.suppress(OSError):
                self._file.truncate(before)
            raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))
        if before + len(line) >= MOST_BYTES:
            self._rotate()

    def _rotate(self) -> None:
        """The file in use is given up only when the next one stands."""
        number = 1
        while (old := self._path.with_name(f"{self._path.stem}-{number:04d}.jsonl")).exists():
            number += 1
        with contextlib.suppress(FileNotFoundError):  # done before, when the next could not be made
            os.rename(self._path, old)
        full, self._file = self._file, FileIO(self._path, "a")
        full.close()


def _ends_torn(path: Path) -> bool:
    """Whether the last line is not whole: after a power cut."""
    if not path.exists():
        return False
    with path.open("rb") as file:
        file.seek(max(file.seek(0, os.SEEK_END) - 1, 0))
        return file.read() not in (b"", b"\n")


def _level(name: str, fields: dict[str, Any]) -> str:
    if name in _ERRORS or (name == "end" and "error" in fields):
        return "error"
    return "warning" if name in _WARNINGS else "info"
