"""One thread for all that reads and writes files, beside the one that counts.

HDF5 calls of one process wait for each other anyway. So the thread that reads ahead also
writes the results, between two reads, and the kernels never wait for a disk.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Callable, Generator
from concurrent.futures import Future, ThreadPoolExecutor
from typing import Any

from tagstream.feeds import Arrivals, Feed, TimeBase
from tagstream.outputs import Row, RunHeader, Sink, Snapshot

PIECES_AHEAD = 4  # enough to bridge the writing of a snapshot; few megabytes
CALLS_WAITING = 256  # rows and events; beyond this the counting waits for the disk


class Hdf5Thread:
    """Runs what it is given, in order. Close it at the end."""

    def __init__(self) -> None:
        self._pool = ThreadPoolExecutor(1, thread_name_prefix="hdf5")

    def submit(self, function: Callable[..., Any], *arguments: Any) -> Future[Any]:
        """Run a call when its turn comes."""
        return self._pool.submit(function, *arguments)

    def close(self) -> None:
        """Let what was submitted end."""
        self._pool.shutdown(wait=True)


class ReadAhead:
    """Another feed, read in the thread a few pieces ahead of where it is used."""

    def __init__(self, feed: Feed, thread: Hdf5Thread) -> None:
        self._feed, self._thread = feed, thread

    @property
    def time_base(self) -> TimeBase:
        return self._feed.time_base

    @property
    def truth(self) -> dict[str, Any]:
        return self._feed.truth

    @property
    def progress(self) -> float | None:
        return self._feed.progress

    def pieces(self) -> Generator[Arrivals]:
        source = self._feed.pieces()
        ahead = deque(self._thread.submit(next, source, None) for _ in range(PIECES_AHEAD))
        try:
            while (piece := ahead.popleft().result()) is not None:
                ahead.append(self._thread.submit(next, source, None))
                yield piece
        finally:
            for future in ahead:
                future.cancel()
            self._thread.submit(source.close)


class SinkInThread:
    """Another sink, used in the thread alone. What it raises comes out at the next call."""

    def __init__(
        self, open_sink: Callable[[RunHeader], Sink], header: RunHeader, thread: Hdf5Thread
    ) -> None:
        self._thread = thread
        self._sink: Sink = thread.submit(open_sink, header).result()
        self._waiting: deque[Future[Any]] = deque()
        self._snapshot: Future[Any] | None = None

    def add_row(self, row: Row) -> None:
        self._call(self._sink.add_row, row)

    def snapshot_due(self) -> bool:
        """Due, and the last one is written: a slow disk gets fewer snapshots, not a queue."""
        written = self._snapshot is None or self._snapshot.done()
        return written and self._sink.snapshot_due()

    def replace_snapshot(self, snapshot: Snapshot) -> None:
        self._snapshot = self._call(self._sink.replace_snapshot, snapshot)

    def event(self, name: str, stream_ps: int | None = None, **fields: Any) -> None:
        self._call(lambda: self._sink.event(name, stream_ps, **fields))

    def close(self, snapshot: Snapshot) -> None:
        self._call(self._sink.close, snapshot).result()

    def _call(self, function: Callable[..., Any], *arguments: Any) -> Future[Any]:
        future = self._thread.submit(function, *arguments)
        self._waiting.append(future)
        while self._waiting and (self._waiting[0].done() or len(self._waiting) > CALLS_WAITING):
            self._waiting.popleft().result()
        return future
