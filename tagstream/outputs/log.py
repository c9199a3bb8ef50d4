"""log.jsonl: what happened, one JSON object a line.

Fixed fields: utc, level ("info" or "warning"), event, stream_ps (null if none). Events:
start (a run began), warning (settings or tags that may surprise), gap (tags may have been lost;
`gaps` counts them so far), mark (`key`, `value`, in force from stream_ps), split_full (`tally` has
as many values of `key` as it may keep apart; what comes beyond is "other"), alert_raised and
alert_cleared (`number` of the section, `what`, `value`, `compared`, `bound`, `text`; see `alerts`),
alert_command_failed (`number`, `error`), output_failed (`output`, such as "publish", whose first
`error` this is), end (with the health at the end, and `error` if there was one).
Gaps that follow each other within a second of wall time are folded into one line; `folded` says
how many it stands for, the other fields are those of the last.
"""

from __future__ import annotations

import contextlib
import json
import os
from collections.abc import Callable
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from tagstream.outputs.folder import cannot_write

FOLDED_EVENTS = ("gap",)
FOLD_S = 1.0
MOST_BYTES = 50_000_000  # then the log goes on in a new file; the old one is log-0001.jsonl ...
_WARNINGS = (
    *("warning", "gap", "split_full"),
    *("alert_raised", "alert_command_failed", "output_failed"),
)


class EventLog:
    """Appends to log.jsonl, each line at once; repeated events are folded."""

    def __init__(self, path: Path, clock: Callable[[], float]) -> None:
        self._path, self._clock = path, clock
        self._broken = False  # once told that lines cannot be written, the rest is let go
        self._last: dict[str, float] = {}
        self._folded: dict[str, tuple[int, int | None, dict[str, Any]]] = {}
        try:
            self._file = path.open("a", encoding="utf-8", buffering=1)
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
            "level": "warning" if name in _WARNINGS else "info",
            "event": name,
            "stream_ps": stream_ps,
            **fields,
        }
        try:
            self._file.write(json.dumps(line, ensure_ascii=False) + "\n")
            if self._file.tell() >= MOST_BYTES:
                self._rotate()
        except OSError as error:
            self._broken = True
            raise cannot_write(self._path, error) from error

    def _rotate(self) -> None:
        number = 1
        while (old := self._path.with_name(f"{self._path.stem}-{number:04d}.jsonl")).exists():
            number += 1
        self._file.close()
        os.rename(self._path, old)
        self._file = self._path.open("a", encoding="utf-8", buffering=1)
