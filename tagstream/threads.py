"""Stages in threads of their own, with bounded queues between them.

Three threads share the work: one reads the feed and writes the results (HDF5 calls of one
process wait for each other anyway, so all of them live there), one conditions, one counts. Which
thread runs when changes nothing: each stage takes the pieces of the one before it in order.
"""

from __future__ import annotations

import time
from collections import deque
from collections.abc import Callable, Generator
from concurrent.futures import Future, ThreadPoolExecutor
from typing import Any, TypeVar

from tagstream.outputs import Row, RunHeader, Sink, Snapshot

T = TypeVar("T")
PIECES_AHEAD = 4  # enough to bridge the writing of a snapshot; few megabytes
CALLS_WAITING = 256  # rows and events; beyond this the counting waits for the disk


class OneThread:
    """Runs what it is given, in order. Close it at the end."""

    def __init__(self, name: str) -> None:
        self._pool = ThreadPoolExecutor(1, thread_name_prefix=name)

    def submit(self, function: Callable[..., Any], *arguments: Any) -> Future[Any]:
        """Run a call when its turn comes."""
        return self._pool.submit(function, *arguments)

    def close(self) -> None:
        """Let what was submitted end."""
        self._pool.shutdown(wait=True)


class TimedThread(OneThread):
    """The same; the seconds that each call takes are told."""

    def __init__(self, name: str, worked: Callable[[float], None]) -> None:
        super().__init__(name)
        self._worked = worked

    def submit(self, function: Callable[..., Any], *arguments: Any) -> Future[Any]:
        """Run a call when its turn comes."""
        return super().submit(self._timed, function, *arguments)

    def _timed(self, function: Callable[..., Any], *arguments: Any) -> Any:
        began = time.monotonic()
        try:
            return function(*arguments)
        finally:
            self._worked(time.monotonic() - began)


def ahead(source: Generator[T], thread: OneThread) -> Generator[T]:
    """What `source` yields, made in `thread` a few items ahead of where it is used.

    What it raises comes out after the items before it.
    """
    waiting = deque(thread.submit(next, source, None) for _ in range(PIECES_AHEAD))
    try:
        while (item := waiting.popleft().result()) is not None:
            waiting.append(thread.submit(next, source, None))
            yield item
    finally:
        for future in waiting:
            future.cancel()
        thread.submit(source.close)


class SinkInThread:
    """Another sink, used in the thread alone. What it raises comes out at the next call."""

    def __init__(
        self, open_sink: Callable[[RunHeader], Sink], header: RunHeader, thread: OneThread
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

    def renew(self, header: RunHeader) -> None:
        self._call(self._sink.renew, header)

    def event(self, name: str, stream_ps: int | None = None, **fields: Any) -> None:
        self._call(lambda: self._sink.event(name, stream_ps, **fields))

    def close(self, snapshot: Snapshot) -> None:
        """Close the other sink whatever was raised before, then raise the first of it."""
        closed = self._thread.submit(self._sink.close, snapshot)
        failed = [error for f in (*self._waiting, closed) if (error := f.exception()) is not None]
        self._waiting.clear()
        if failed:
            raise failed[0]

    def _call(self, function: Callable[..., Any], *arguments: Any) -> Future[Any]:
        future = self._thread.submit(function, *arguments)
        self._waiting.append(future)
        while self._waiting and (self._waiting[0].done() or len(self._waiting) > CALLS_WAITING):
            self._waiting.popleft().result()
        return future
