"""A sink that keeps everything in memory, and runs without files."""

from __future__ import annotations

from typing import Any

from tagstream.conditioning import conditioned
from tagstream.feeds import Feed
from tagstream.outputs import Row, RunHeader, Snapshot
from tagstream.pipeline import Pipeline, State, first_of
from tagstream.settings import Settings


class MemorySink:
    """Keeps rows, events and the last snapshot."""

    def __init__(self, header: RunHeader) -> None:
        self.header = header
        self.rows: list[Row] = []
        self.events: list[tuple[str, dict[str, Any]]] = []
        self.snapshots: list[Snapshot] = []

    def add_row(self, row: Row) -> None:
        self.rows.append(row)

    def snapshot_due(self) -> bool:
        return False

    def replace_snapshot(self, snapshot: Snapshot) -> None:
        self.snapshots.append(snapshot)

    def renew(self, header: RunHeader) -> None:
        self.header = header

    def event(self, name: str, stream_ps: int | None = None, **fields: Any) -> None:
        self.events.append((name, fields))

    def close(self, snapshot: Snapshot) -> None:
        self.snapshots.append(snapshot)


def run_in_memory(settings: Settings, feed: Feed) -> MemorySink:
    """The whole pipeline, feed to sink."""
    sinks: list[MemorySink] = []

    def open_sink(header: RunHeader) -> MemorySink:
        sinks.append(MemorySink(header))
        return sinks[0]

    stream = conditioned(feed.pieces(), settings)
    pipeline = Pipeline(settings, "", feed, stream, open_sink, first=first_of(stream))
    while pipeline.step():
        pass
    pipeline.finish(State.FINISHED)
    return sinks[0]
