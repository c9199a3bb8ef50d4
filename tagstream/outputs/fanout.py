"""Several sinks as one: the results on disk, and those that may fail without ending a run."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

from tagstream.outputs import Row, RunHeader, Sink, Snapshot

FAILED = "output_failed"  # the event; once for each sink


class Fanout:
    """Hands everything to `first`, then to the others by name.

    `first` decides when a snapshot is due, and what it raises is raised. What another one raises
    is an event of the first, once; then it is counted in `failures`, and that sink is tried again
    with what comes next.
    """

    def __init__(self, first: Sink, others: Mapping[str, Sink]) -> None:
        self._first, self._others = first, dict(others)
        self.failures = dict.fromkeys(others, 0)

    @property
    def numbers(self) -> dict[str, int | float | str]:
        """For the health: how often each of the others failed, as <name>_failures."""
        return {f"{name}_failures": count for name, count in self.failures.items()}

    def add_row(self, row: Row) -> None:
        """Hand on a slice."""
        self._first.add_row(row)
        self._each(lambda sink: sink.add_row(row))

    def snapshot_due(self) -> bool:
        """Whether the first sink wants one."""
        return self._first.snapshot_due()

    def replace_snapshot(self, snapshot: Snapshot) -> None:
        """Hand on a snapshot."""
        self._first.replace_snapshot(snapshot)
        self._each(lambda sink: sink.replace_snapshot(snapshot))

    def renew(self, header: RunHeader) -> None:
        """Hand on a header."""
        self._first.renew(header)
        self._each(lambda sink: sink.renew(header))

    def event(self, name: str, stream_ps: int | None = None, **fields: Any) -> None:
        """Hand on an event."""
        self._first.event(name, stream_ps, **fields)
        self._each(lambda sink: sink.event(name, stream_ps, **fields))

    def close(self, snapshot: Snapshot) -> None:
        """Close all of them, the first one last, so that it hears of failures of the others."""
        try:
            self._each(lambda sink: sink.close(snapshot))
        finally:
            self._first.close(snapshot)

    def _each(self, hand: Callable[[Sink], None]) -> None:
        for name, sink in self._others.items():
            try:
                hand(sink)
            except Exception as error:
                self._note(name, error)

    def _note(self, name: str, error: Exception) -> None:
        self.failures[name] += 1
        if self.failures[name] == 1:
            self._first.event(FAILED, None, output=name, error=str(error) or type(error).__name__)
