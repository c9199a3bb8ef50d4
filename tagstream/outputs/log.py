"""log.jsonl: what happened, one JSON object a line.

Fixed fields: utc, level ("info" or "warning"), event, stream_ps (null if none). Events:
start (a run began), warning (settings or tags that may surprise), gap (tags may have been lost;
`gaps` counts them so far), end (with the health at the end, and `error` if there was one).
Gaps that follow each other within a second of wall time are folded into one line with `folded`.
"""

from __future__ import annotations

import json
from collections.abc import Callable
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from tagstream.outputs.folder import cannot_write

FOLDED_EVENTS = ("gap",)
FOLD_S = 1.0
_WARNINGS = ("warning", "gap")


class EventLog:
    """Appends to log.jsonl, each line at once; repeated events are folded."""

    def __init__(self, path: Path, clock: Callable[[], float]) -> None:
        self._path, self._clock = path, clock
        self._last: dict[str, float] = {}
        self._folded: dict[str, tuple[int, int | None, dict[str, Any]]] = {}
        try:
            self._file = path.open("a", encoding="utf-8", buffering=1)
        except OSError as error:
            raise cannot_write(path, error) from error

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

    def close(self) -> None:
        """Write what was folded, and close the file."""
        self._unfold()
        self._file.close()

    def _unfold(self) -> None:
        for name, (count, stream_ps, fields) in self._folded.items():
            self._write(name, stream_ps, {**fields, "folded": count})
        self._folded.clear()

    def _write(self, name: str, stream_ps: int | None, fields: dict[str, Any]) -> None:
        line = {
            "utc": datetime.now(UTC).isoformat(timespec="milliseconds"),
            "level": "warning" if name in _WARNINGS else "info",
            "event": name,
            "stream_ps": stream_ps,
            **fields,
        }
        try:
            self._file.write(json.dumps(line) + "\n")
        except OSError as error:
            raise cannot_write(self._path, error) from error
