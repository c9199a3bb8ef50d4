"""Recording beside a run: pieces pass through, and are written by the thread that does all HDF5."""

from __future__ import annotations

from collections import deque
from collections.abc import Callable, Generator
from concurrent.futures import Future
from typing import Any

from tagstream.feeds import IDLE, Arrivals
from tagstream.outputs.patient import free_bytes
from tagstream.outputs.recorder import Recorded, Recorder
from tagstream.pipeline import Pipeline
from tagstream.recording import RecordingHeader
from tagstream.service import Requests
from tagstream.settings import Settings
from tagstream.supervision.sinks import ResultsOnly
from tagstream.threads import OneThread

MOST_BYTES = 256_000_000  # of pieces that wait for the disk; beyond this they are not recorded


class Recording:
    """The recording of one process: its recorder, and where it writes for each run."""

    def __init__(
        self, settings: Settings, sinks: ResultsOnly, files: OneThread, requests: Requests
    ) -> None:
        section = settings.recording
        assert section is not None
        self._settings, self._sinks, self._requests = section, sinks, requests
        self._pipeline: Pipeline | None = None
        self._recorder = Recorder(section, self._event, free_bytes)
        kind = WaitingTap if settings.conditioning.overload == "wait" else Tap
        self.tap = kind(self._recorder, files, self._into)
        self.numbers = self._recorder.numbers

    def follow(self, pipeline: Pipeline) -> None:
        """Record into the folder of this run from now on."""
        self._pipeline = pipeline
        self.tap.open()

    def close(self) -> None:
        """Close the open segment."""
        self.tap.close()

    def _into(self) -> Recorded | None:
        """Where to write; None while nothing is known of the feed."""
        pipeline = self._pipeline
        if pipeline is None or not pipeline.described:
            return None
        header, writer = pipeline.header, self._sinks.writer
        assert writer is not None
        folder = self._settings.folder
        place = writer.folder.path if folder is None else folder / writer.folder.path.name
        place.mkdir(parents=True, exist_ok=True)
        told = RecordingHeader(
            title=header.title,
            origin_ticks=header.origin_ticks,
            origin_utc=header.origin_utc,
            run_uuid=writer.run_uuid,
        )
        return Recorded(place, told, pipeline.feed.time_base.tick)

    def _event(self, name: str, **fields: Any) -> None:
        """Told by the thread that counts."""
        self._requests.ask(lambda: self._say(name, fields))

    def _say(self, name: str, fields: dict[str, Any]) -> None:
        if self._pipeline is not None:
            self._pipeline.sink.event(name, **fields)


class Tap:
    """Hands each piece to a recorder, in its thread, and lets it pass; waits for nobody.

    into: tells where to write, or None as long as that is not known; pieces wait for it.
    """

    def __init__(
        self, recorder: Recorder, thread: OneThread, into: Callable[[], Recorded | None]
    ) -> None:
        self._recorder, self._thread, self._into = recorder, thread, into
        self._waiting: deque[tuple[Future[None], int]] = deque()
        self._early: list[Arrivals] = []
        self._bytes = 0
        self._opened = False

    def open(self) -> None:
        """Another run has begun; its folder is asked for when the next piece is to be written."""
        self._thread.submit(self._forget).result()

    def __call__(self, pieces: Generator[Arrivals]) -> Generator[Arrivals]:
        """The same pieces."""
        try:
            for piece in pieces:
                self._hand(piece)
                yield piece
        finally:
            pieces.close()

    def close(self) -> None:
        """Close the open segment, after all that waits is written."""
        self._thread.submit(self._finish).result()

    def _hand(self, piece: Arrivals) -> None:
        while self._waiting and self._waiting[0][0].done():
            self._bytes -= self._waiting.popleft()[1]
        if piece is IDLE:
            self._thread.submit(self._recorder.idle)
            return
        size = 10 * piece.times_ps.size + 100
        if self._bytes + size > MOST_BYTES and not self._made_room():
            self._thread.submit(self._recorder.lose, piece)
            return
        self._bytes += size
        self._waiting.append((self._thread.submit(self._take, piece), size))

    def _made_room(self) -> bool:
        """Whether one may wait for the disk until a piece finds room; not here."""
        return False

    def _finish(self) -> None:
        early, self._early = self._early, []
        for piece in early:
            self._take(piece)
        self._recorder.close()

    def _forget(self) -> None:
        self._recorder.close()
        self._opened = False

    def _take(self, piece: Arrivals) -> None:
        self._early.append(piece)
        if not self._opened:
            into = self._into()
            if into is None:
                return
            self._recorder.open(into)
            self._opened = True
        early, self._early = self._early, []
        for waiting in early:
            self._recorder.take(waiting)


class WaitingTap(Tap):
    """The same where whoever sends can wait: for a slow disk too, so that all is recorded."""

    def _made_room(self) -> bool:
        while self._waiting and self._bytes > MOST_BYTES // 2:
            done, size = self._waiting.popleft()
            done.exception()  # the recorder tells of it itself
            self._bytes -= size
        return True
