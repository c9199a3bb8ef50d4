"""From checked settings to a run that is ready to step, each stage in its thread."""

from __future__ import annotations

import time
from collections.abc import Generator, Iterator
from contextlib import ExitStack, contextmanager
from dataclasses import dataclass
from pathlib import Path

from tagstream.conditioning import Conditioned, conditioned
from tagstream.feeds import Arrivals, Feed, build_feed, build_live_feed
from tagstream.feeds.paced import paced
from tagstream.feeds.resumed import from_time
from tagstream.load import Load
from tagstream.outputs.folder import RunFolder
from tagstream.pipeline import WARM_UPS, Pipeline, first_of
from tagstream.service import Requests, RunLoop, StopRequest
from tagstream.settings import Settings
from tagstream.settings.feeds import is_live
from tagstream.settings.load import LoadedSettings
from tagstream.supervision.receiving import LiveReceiving
from tagstream.supervision.receiving import Tap as Tapping
from tagstream.supervision.recording import Recording
from tagstream.supervision.resuming import Resumption
from tagstream.supervision.sinks import Announcing, Enduring, ResultsOnly
from tagstream.supervision.state import Around, Flow
from tagstream.threads import OneThread, TimedThread, ahead


@dataclass(frozen=True, slots=True)
class Plan:
    """What is to be run.

    name: of the run, absent that of the settings. pace: stream seconds per second of wall time,
    absent as fast as it can. serves: others listen to it and talk to it, and it may record; a
    replay does nothing of this. resumed: the run that goes on, absent a new one.
    """

    loaded: LoadedSettings
    feed: Feed
    name: str | None = None
    pace: float | None = None
    serves: bool = False
    resumed: Resumption | None = None

    @property
    def live(self) -> bool:
        """Whether tags come by themselves, so that a run begins before the first of them."""
        return self.serves and is_live(self.loaded.settings.feed)


def feed_of(settings: Settings, resumed: Resumption | None = None) -> Feed:
    """The feed that the settings describe."""
    slice_ps = settings.rolling.slice_ps
    if is_live(settings.feed):
        point = None if resumed is None else resumed.point
        return build_live_feed(settings.feed, slice_ps, settings.security, point)
    return build_feed(settings.feed, slice_ps)


def feed_of_recordings(paths: tuple[Path, ...], settings: Settings) -> Feed:
    """The segments of one run as one feed."""
    from tagstream.feeds.recorded import RecordingsFeed

    return RecordingsFeed(list(paths), settings.rolling.slice_ps)


class Threads:
    """The threads of a run.

    files does all HDF5; where the feed is a file it reads as well. receiving serves a live feed.
    """

    def __init__(self, load: Load) -> None:
        self.files = TimedThread("files", lambda seconds: load.add("files", seconds))
        self.receiving = OneThread("receiving")
        self.conditioning, self.counting = OneThread("conditioning"), OneThread("counting")

    def warm_up(self) -> None:
        """Let what takes time when first used be loaded, in all threads at once."""
        threads = (self.conditioning, self.counting, self.receiving, self.files)
        waiting = [t.submit(call) for t, call in zip(threads, WARM_UPS, strict=True)]
        for done in waiting:
            done.result()

    def close(self) -> None:
        """Let what was submitted end, the sources last: what uses them has closed them."""
        for thread in (self.counting, self.conditioning, self.receiving, self.files):
            thread.close()


@dataclass(frozen=True, slots=True)
class Started:
    """A run that is ready to step.

    began_s: when its feed began to be read, monotonic clock. receiving: marks are left there.
    requests: calls between two steps are left there.
    """

    loop: RunLoop
    sinks: ResultsOnly
    receiving: LiveReceiving
    requests: Requests
    threads: Threads
    began_s: float


@contextmanager
def started(plan: Plan, stop: StopRequest) -> Iterator[Started]:
    """The feed open, the run folder made and the stages joined, each in its thread.

    Kernels are loaded or compiled before the first tag is read. Raises InputError when a feed
    that ends has nothing good, before a folder is made; ResultsError when none can be made.
    """
    settings = plan.loaded.settings
    with ExitStack() as opened:
        load, flow = Load(), Flow(time.monotonic)
        threads = Threads(load)
        opened.callback(threads.close)
        threads.warm_up()
        requests = Requests()
        sinks = _sinks(plan, threads.files, requests)
        opened.callback(sinks.close)
        recording = _recording(plan, threads.files, sinks, requests)
        if recording is not None:
            opened.callback(recording.close)
        receiving = LiveReceiving(settings, plan.feed, load, plan.live, _tap(plan, recording))
        began_s = time.monotonic()
        stream = _stream(plan, threads, receiving, stop)
        opened.callback(stream.close)
        sources = [receiving.numbers, flow.numbers, sinks.numbers] if plan.serves else []
        if recording is not None:
            sources.append(recording.numbers)
        around = Around(sources, lambda: stop.requested)

        def make(first: Conditioned | None = None) -> Pipeline:
            text = plan.loaded.to_toml()
            made = Pipeline(settings, text, plan.feed, stream, sinks.open, around, first)
            for warning in (*plan.loaded.warnings, *getattr(plan.feed, "notes", ())):
                made.sink.event("warning", text=warning)
            if recording is not None:
                recording.follow(made)
            return made

        first = make(None if plan.live else first_of(stream))
        if plan.resumed is not None:
            first.resume(plan.resumed.state)
            sinks.restore(plan.resumed.state.alerts)
            for text in plan.resumed.done:
                first.sink.event("recovered", text=text)
            first.show()
        loop = RunLoop(first, make, requests, lambda p: flow.counted(p.arrived_s, p.new_tags))
        yield Started(loop, sinks, receiving, requests, threads, began_s)


def _sinks(plan: Plan, files: OneThread, requests: Requests) -> ResultsOnly:
    settings, resumed = plan.loaded.settings, plan.resumed
    held = [] if resumed is None else [resumed.folder]

    def open_folder() -> RunFolder:
        name = plan.name or settings.results.name
        return held.pop() if held else RunFolder.create(settings.results.folder, name)

    if not plan.serves:
        return ResultsOnly(settings, open_folder, files)
    before = None if resumed is None else resumed.state.about
    kind = Enduring if plan.live else Announcing
    return kind(settings, open_folder, files, before, requests.ask)


def _recording(
    plan: Plan, files: OneThread, sinks: ResultsOnly, requests: Requests
) -> Recording | None:
    settings = plan.loaded.settings
    if settings.recording is None or not plan.serves:
        return None
    return Recording(settings, sinks, files, requests)


def _tap(plan: Plan, recording: Recording | None) -> Tapping:
    """What pieces pass before conditioning; of a file, first what was counted before goes."""

    def tap(pieces: Generator[Arrivals]) -> Generator[Arrivals]:
        if plan.resumed is not None and not plan.live:
            pieces = from_time(pieces, plan.resumed.point.end_ps)
        return pieces if recording is None else recording.tap(pieces)

    return tap


def _stream(
    plan: Plan, threads: Threads, receiving: LiveReceiving, stop: StopRequest
) -> Generator[Conditioned]:
    """Conditioned pieces, made in the thread for that a few ahead of where they are used."""
    settings = plan.loaded.settings
    pieces = ahead(receiving.pieces(), threads.receiving if plan.live else threads.files)
    if plan.pace is not None:
        pieces = paced(pieces, plan.pace, stop.wait)

    def condition(source: Iterator[Arrivals]) -> Generator[Conditioned]:
        return conditioned(source, settings, lambda: stop.requested)

    work = _closing(receiving.load.timed("conditioning", pieces, condition), pieces)
    return receiving.load.consumed("counting", ahead(work, threads.conditioning))


def _closing(work: Generator[Conditioned], source: Generator[Arrivals]) -> Generator[Conditioned]:
    """The same work; its source is closed with it, in the thread that used it."""
    try:
        yield from work
    finally:
        work.close()
        source.close()
