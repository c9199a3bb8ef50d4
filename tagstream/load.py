"""How busy each stage is: seconds of work, added up per piece, read by whoever wants to know.

A stage is a thread, and writes its own sum alone; others only read it. What a stage waits for
(its source, room in a queue) is not work. How long receiving waited for room in the queue to
the next stage is kept beside: "blocked". Near 1, more comes than is processed.
"""

from __future__ import annotations

import time
from collections import deque
from collections.abc import Callable, Generator, Iterator, Mapping
from contextlib import contextmanager
from typing import TypeVar

T = TypeVar("T")
U = TypeVar("U")
Clock = Callable[[], float]

OF_WHAT_IS_KEPT = ("conditioning", "counting", "files")  # leaving tags out eases these alone
STAGES = ("receiving", *OF_WHAT_IS_KEPT)
BLOCKED = "blocked"
RECENT_S = 10.0


class Load:
    """Busy seconds by stage since the start, and blocked ones.

    clock: wall time, monotonic. cpu_clock: processor time of the thread that asks.
    """

    def __init__(self, clock: Clock = time.monotonic, cpu_clock: Clock = time.thread_time) -> None:
        self._clock, self._cpu_clock = clock, cpu_clock
        self._busy = dict.fromkeys((*STAGES, BLOCKED), 0.0)

    def totals(self) -> Mapping[str, float]:
        """Seconds by stage, and "blocked"; a copy."""
        return dict(self._busy)

    def of_what_is_kept(self) -> Mapping[str, float]:
        """Seconds of the stages after the place where slices are left out."""
        return {stage: self._busy[stage] for stage in OF_WHAT_IS_KEPT}

    def add(self, stage: str, seconds: float) -> None:
        """Count work of a stage; from its own thread alone."""
        self._busy[stage] += seconds

    @contextmanager
    def busy(self, stage: str) -> Iterator[None]:
        """All that is done inside is work of the stage."""
        began = self._clock()
        try:
            yield
        finally:
            self.add(stage, self._clock() - began)

    def timed(
        self, stage: str, source: Iterator[T], work: Callable[[Iterator[T]], Generator[U]]
    ) -> Generator[U]:
        """What `work` makes of `source`; the time in which it waits for `source` is no work."""
        waited = 0.0

        def awaited() -> Generator[T]:
            nonlocal waited
            while True:
                began = self._clock()
                item = next(source, None)
                waited += self._clock() - began
                if item is None:
                    return
                yield item

        results = work(awaited())
        try:
            while True:
                began, waited = self._clock(), 0.0
                result = next(results, None)
                self.add(stage, self._clock() - began - waited)
                if result is None:
                    return
                yield result
        finally:
            results.close()

    def consumed(self, stage: str, source: Generator[T]) -> Generator[T]:
        """The items of a source; what is done between one and the next is work of the stage."""
        try:
            while (item := next(source, None)) is not None:
                began = self._clock()
                yield item
                self.add(stage, self._clock() - began)
        finally:
            source.close()

    def timed_cpu(self, stage: str, source: Generator[T]) -> Generator[T]:
        """The items of a source that itself waits for others, such as a socket: processor time
        counts, which does not pass while it waits. Until the next item is asked for it is
        blocked."""
        try:
            while True:
                began = self._cpu_clock()
                item = next(source, None)
                self.add(stage, self._cpu_clock() - began)
                if item is None:
                    return
                handed_on = self._clock()
                yield item
                self.add(BLOCKED, self._clock() - handed_on)
        finally:
            source.close()


class RecentLoad:
    """Busy fraction of each stage, and "blocked", over the last ten seconds or so; for one reader.

    Call `look` about once a second.
    """

    def __init__(self, load: Load, clock: Clock = time.monotonic) -> None:
        self._load, self._clock = load, clock
        self._seen = deque([(clock(), load.totals())])

    def look(self) -> dict[str, float]:
        """Stage -> fraction of wall time in which it worked, 0 to 1; and "blocked"."""
        now, totals = self._clock(), self._load.totals()
        self._seen.append((now, totals))
        while len(self._seen) > 2 and now - self._seen[1][0] >= RECENT_S:
            self._seen.popleft()
        then, before = self._seen[0]
        passed = now - then
        if passed <= 0:
            return dict.fromkeys(totals, 0.0)
        return {stage: min((totals[stage] - before[stage]) / passed, 1.0) for stage in totals}


def limiting(fractions: Mapping[str, float]) -> str:
    """The busiest stage: the one that limits how much can be processed."""
    return max(STAGES, key=lambda stage: fractions[stage])
