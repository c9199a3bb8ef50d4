"""Stage 1, feeds: bytes to tags.

A feed decodes; it does not order, delay, name or judge. It hands on tags as they arrived, in
pieces of bounded size, with the intervals for which its source vouches. It knows nothing of
channels' meaning or of who consumes.
"""

from __future__ import annotations

from collections.abc import Callable, Generator, Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from importlib import import_module
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

from tagstream.recording.layout import Mark

IDLE_S = 0.1  # a live feed says at least this often that it is there
PIECE_TAGS = 1 << 18  # tags a feed hands on at a time: large for the kernels, small for memory


@dataclass(frozen=True, slots=True)
class Arrivals:
    """A piece of the stream as decoded, in arrival order.

    times_ps: int64, n, picoseconds since the origin of the feed; beyond 106 days it is
        units.BEYOND_LIMIT_PS.
    inputs: uint8 or uint16, n, the numbers of the inputs.
    begin_ps, end_ps: the half-open interval of which the source vouches that all its tags are
        here; both None when the source says nothing.
    complete: this piece is the last of its interval (an interval may come in many pieces).
    gap_before: tags may have been lost just before this piece.
    lossy: tags of this interval itself were lost; all of it is a gap.
    dropped: tags that the feed itself let go since the piece before, by reason.
    marks: keys and values that were set since the piece before; times as those of the tags.
    arrived_s: when the first of it arrived, monotonic clock; None for feeds that are not live.
    """

    times_ps: NDArray[np.int64]
    inputs: NDArray[Any]
    begin_ps: int | None = None
    end_ps: int | None = None
    complete: bool = True
    gap_before: bool = False
    lossy: bool = False
    dropped: Mapping[str, int] = field(default_factory=dict)
    marks: tuple[Mark, ...] = ()
    arrived_s: float | None = None


# What a live feed yields while nothing arrives, so that whoever waits for it can look around.
# It says nothing about the stream: it ends no stretch and covers no time.
IDLE = Arrivals(np.zeros(0, np.int64), np.zeros(0, np.uint8))


@dataclass(frozen=True, slots=True)
class TimeBase:
    """What the times of a feed mean.

    tick: the native tick in ps. origin_ticks: the native count at stream time zero, None for
    feeds whose source counts from zero. origin_utc: the wall time of the origin, ISO 8601, if
    known. recorded_uuid: of the run that made a recording, if it is one of this program.
    """

    tick: Fraction
    origin_ticks: int | None = None
    origin_utc: str | None = None
    recorded_uuid: str | None = None


class Feed(Protocol):
    """Where tags come from.

    `pieces` yields Arrivals until the source ends; it raises InputError after it has yielded
    what was good. `time_base` is valid once the first piece was yielded. `truth` is what a
    simulation knows, else an empty dict. `progress` is the fraction of the source consumed so
    far, or None when its length is unknown.
    """

    def pieces(self) -> Generator[Arrivals]: ...

    @property
    def time_base(self) -> TimeBase: ...

    @property
    def truth(self) -> dict[str, Any]: ...

    @property
    def progress(self) -> float | None: ...


class LiveFeed(Feed, Protocol):
    """A feed whose tags arrive while they are made.

    `pieces` yields at least every IDLE_S: `IDLE` when nothing arrived. Closing it closes its
    sockets. It never raises for what a peer does: that is counted. `link` counts what came over
    the line: integers, numbers and texts by name, a new mapping at each change. `position` is
    what `resumed` of the builder needs to go on after a restart; anything that JSON can hold.
    """

    @property
    def link(self) -> Mapping[str, int | float | str]: ...

    @property
    def position(self) -> dict[str, Any]: ...


@dataclass(frozen=True, slots=True)
class ResumePoint:
    """Where a run that is resumed had come to.

    end_ps: end of its last slice, stream time. origin_ticks, origin_utc: as in `TimeBase`.
    position: of the feed. stopped_utc: when its results were last written, ISO 8601.
    """

    end_ps: int
    origin_ticks: int | None
    origin_utc: str | None
    position: Mapping[str, Any]
    stopped_utc: str


# kind -> "module:class"; imported when built, so that a feed costs only those who use it.
_KINDS = {
    "recording": "tagstream.feeds.recorded:RecordingFeed",
    "columns": "tagstream.feeds.columns:open_columns",
    "records": "tagstream.feeds.records:RecordsFeed",
    "simulation": "tagstream.feeds.simulated:SimulationFeed",
}
# The same for live feeds, whose builders take (settings, slice_ps, security, resumed).
_LIVE_KINDS = {
    "zmq": "tagstream.feeds.messages_feed:MessagesFeed",
    "tcp": "tagstream.feeds.tcp:TcpFeed",
    "stdin": "tagstream.feeds.stdin:StdinFeed",
    "records": "tagstream.feeds.growing:GrowingFeed",
}


def build_feed(settings: Any, slice_ps: int) -> Feed:
    """The feed for a [feed] section; the origin of its times is rounded down to a slice."""
    module, name = _KINDS[settings.kind].split(":")
    builder: Callable[[Any, int], Feed] = getattr(import_module(module), name)
    return builder(settings, slice_ps)


def build_live_feed(
    settings: Any, slice_ps: int, security: Any = None, resumed: ResumePoint | None = None
) -> LiveFeed:
    """The live feed for a [feed] section.

    security: the [security] section, or None. resumed: where the run had come to, if it goes on.
    """
    module, name = _LIVE_KINDS[settings.kind].split(":")
    builder: Callable[..., LiveFeed] = getattr(import_module(module), name)
    return builder(settings, slice_ps, security, resumed)
