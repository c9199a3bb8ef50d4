"""Whole files put in place by a thread of their own, so that nobody waits for a slow disk."""

from __future__ import annotations

import time
from collections import deque
from collections.abc import Callable
from concurrent.futures import Future, ThreadPoolExecutor
from pathlib import Path

from tagstream.outputs.atomic import replace_file

KEPT = 3600  # latencies that percentiles are made of

Put = Callable[[Path, bytes], None]


class PlainFiles:
    """Puts files in place, one at a time; a new one while the last is under way is refused.

    put: writes one. clock: monotonic. busy: whether one is under way. What went wrong comes out
    at the next call.
    """

    def __init__(
        self, put: Put = replace_file, clock: Callable[[], float] = time.monotonic
    ) -> None:
        self._put, self._clock = put, clock
        self._pool = ThreadPoolExecutor(1, thread_name_prefix="plain-files")
        self._under_way: Future[None] | None = None
        self._latencies: deque[float] = deque(maxlen=KEPT)
        self._write_s = 0.0

    @property
    def busy(self) -> bool:
        return self._under_way is not None and not self._under_way.done()

    def put(self, path: Path, content: bytes, arrived_s: float | None = None) -> None:
        """Begin to put a file in place, after the last one is there.

        arrived_s: when the oldest tag arrived that it shows for the first time. Raises
        ResultsError when the last one could not be written.
        """
        self.settle()
        self._under_way = self._pool.submit(self._write, path, content, arrived_s)

    def settle(self) -> None:
        """Wait until the last one is in place. Raises ResultsError when it could not be."""
        under_way, self._under_way = self._under_way, None
        if under_way is not None:
            under_way.result()

    def close(self) -> None:
        """Wait for the last one, and end the thread. Raises ResultsError as `settle`."""
        try:
            self.settle()
        finally:
            self._pool.shutdown()

    def numbers(self) -> dict[str, float]:
        """For the health: write_s of the last file; latency_s from the arrival of a tag to its
        being on the disk, the last one, the median and the 99th percentile of the last hour."""
        found = {"write_s": round(self._write_s, 4)}
        if self._latencies:
            ordered = sorted(self._latencies)
            found["latency_s"] = round(self._latencies[-1], 4)
            found["latency_median_s"] = round(ordered[len(ordered) // 2], 4)
            found["latency_p99_s"] = round(
                ordered[min(len(ordered) * 99 // 100, len(ordered) - 1)], 4
            )
        return found

    def _write(self, path: Path, content: bytes, arrived_s: float | None) -> None:
        began = self._clock()
        self._put(path, content)
        ended = self._clock()
        self._write_s = ended - began
        if arrived_s is not None:
            self._latencies.append(ended - arrived_s)
