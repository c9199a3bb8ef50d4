"""From checked settings to a pipeline that is ready to step."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

from tagstream.errors import SettingsError
from tagstream.feeds import Feed, build_feed
from tagstream.feeds.paced import PacedFeed
from tagstream.hdf5_thread import Hdf5Thread, ReadAhead, SinkInThread
from tagstream.outputs import RunHeader
from tagstream.outputs.folder import RunFolder
from tagstream.outputs.run_writer import RunWriter
from tagstream.pipeline import Pipeline
from tagstream.settings import Settings
from tagstream.settings.feeds import LIVE_KINDS
from tagstream.settings.load import LoadedSettings


@dataclass(frozen=True, slots=True)
class Plan:
    """What is to be run. name: of the run, absent that of the settings; pace: see PacedFeed."""

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


def start(
    plan: Plan, wait: Callable[[float], bool], thread: Hdf5Thread
) -> tuple[Pipeline, RunFolder]:
    """Open the feed, make the run folder, and join the stages.

    wait: sleeps for so many seconds, True when a stop was asked for. thread: reads and writes
    files. Raises InputError when the
    feed has nothing good, before a folder is made; ResultsError when none can be made.
    """
    settings = plan.loaded.settings
    feed: Feed = ReadAhead(plan.feed, thread)
    if plan.pace is not None:
        feed = PacedFeed(feed, plan.pace, wait)
    folders: list[RunFolder] = []

    def open_sink(header: RunHeader) -> RunWriter:
        folder = RunFolder.create(settings.results.folder, plan.name or settings.results.name)
        folders.append(folder)
        return RunWriter(folder, header)

    def open_in_thread(header: RunHeader) -> SinkInThread:
        return SinkInThread(open_sink, header, thread)

    pipeline = Pipeline(settings, plan.loaded.to_toml(), feed, open_in_thread)
    for text in plan.loaded.warnings:
        pipeline.sink.event("warning", text=text)
    return pipeline, folders[0]
