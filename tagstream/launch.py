"""From checked settings to a pipeline that is ready to step."""

from __future__ import annotations

import time
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path

from tagstream import estimates
from tagstream.conditioning import conditioned
from tagstream.conditioning import kernels as conditioning_kernels
from tagstream.conditioning.ordering import kernels as ordering_kernels
from tagstream.errors import SettingsError
from tagstream.feeds import Feed, build_feed
from tagstream.feeds.paced import paced
from tagstream.outputs import RunHeader
from tagstream.outputs.folder import RunFolder
from tagstream.outputs.run_writer import RunWriter
from tagstream.pipeline import Pipeline
from tagstream.service import StopRequest
from tagstream.settings import Settings
from tagstream.settings.feeds import LIVE_KINDS
from tagstream.settings.load import LoadedSettings
from tagstream.tallies import kernels as tally_kernels
from tagstream.threads import OneThread, SinkInThread, ahead


@dataclass(frozen=True, slots=True)
class Plan:
    """What is to be run. name: of the run, absent that of the settings; pace: stream seconds
    per second of wall time, absent as fast as it can."""

    loaded: LoadedSettings
    feed: Feed
    name: str | None = None
    pace: float | None = None


def feed_of(settings: Settings) -> Feed:
    """The feed that the settings describe. Raises SettingsError for one this version lacks."""
    kind = settings.feed.kind
    if kind in LIVE_KINDS:
        raise SettingsError(
            [
                f'[feed] kind: "{kind}" is a live feed, which this version does not receive;'
                " right would be recording, columns, records or simulation"
            ]
        )
    return build_feed(settings.feed, settings.rolling.slice_ps)


def feed_of_recordings(paths: tuple[Path, ...], settings: Settings) -> Feed:
    """The segments of one run as one feed."""
    from tagstream.feeds.recorded import RecordingsFeed

    return RecordingsFeed(list(paths), settings.rolling.slice_ps)


@dataclass(frozen=True, slots=True)
class Started:
    """A run that is ready to step. began_s: when its feed began to be read, monotonic clock."""

    pipeline: Pipeline
    folder: RunFolder
    began_s: float


@contextmanager
def started(plan: Plan, stop: StopRequest) -> Iterator[Started]:
    """The feed open, the run folder made and the stages joined, each in its thread.

    Kernels are loaded or compiled before the first tag is read. Raises InputError when the feed
    has nothing good, before a folder is made; ResultsError when none can be made.
    """
    settings = plan.loaded.settings
    files, conditioning = OneThread("files"), OneThread("conditioning")
    folders: list[RunFolder] = []
    warm = [
        conditioning.submit(kernels.warm_up) for kernels in (conditioning_kernels, ordering_kernels)
    ]
    warm.append(files.submit(estimates.warm_up))
    tally_kernels.warm_up()
    for done in warm:
        done.result()

    def open_writer(header: RunHeader) -> RunWriter:
        folder = RunFolder.create(settings.results.folder, plan.name or settings.results.name)
        folders.append(folder)
        return RunWriter(folder, header)

    def open_sink(header: RunHeader) -> SinkInThread:
        return SinkInThread(open_writer, header, files)

    began_s = time.monotonic()
    pieces = ahead(plan.feed.pieces(), files)
    if plan.pace is not None:
        pieces = paced(pieces, plan.pace, stop.wait)
    stream = ahead(conditioned(pieces, settings, lambda: stop.requested), conditioning)
    try:
        pipeline = Pipeline(settings, plan.loaded.to_toml(), plan.feed, stream, open_sink)
        for text in plan.loaded.warnings:
            pipeline.sink.event("warning", text=text)
        yield Started(pipeline, folders[0], began_s)
    finally:
        stream.close()
        conditioning.submit(pieces.close)
        conditioning.close()
        files.close()
