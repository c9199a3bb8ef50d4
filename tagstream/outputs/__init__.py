"""Stage 5, outputs: numbers to files, in a layout that readers can rely on.

The pipeline hands over a `Row` for every slice and, when the sink says one is due, a
`Snapshot` of all that a monitor needs. Nothing here computes: no tags, no formulas.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any, Protocol

from numpy.typing import NDArray

from tagstream.estimates import Estimate
from tagstream.recording.layout import Mark

Arrays = Mapping[str, NDArray[Any]]


@dataclass(frozen=True, slots=True)
class RunHeader:
    """What is fixed for a run.

    spans: names, "run" first, then as in the settings ("10 s", "1 min").
    tallies: name -> {"kind": ..., and what describes it: "start", "stop"}.
    estimates: name -> unit of the value.
    tick: the native tick as text. recorded_uuid: of the run that made the recording replayed.
    truth: what a simulation knows, by name, else empty.
    """

    title: str
    settings_text: str
    channels: tuple[str, ...]
    spans: tuple[str, ...]
    tallies: Mapping[str, Mapping[str, str]]
    estimates: Mapping[str, str]
    slice_ps: int
    tick: str = "1 ps"
    origin_ticks: int | None = None
    origin_utc: str | None = None
    recorded_uuid: str | None = None
    truth: Mapping[str, Any] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Row:
    """One slice, final: nothing can change it any more.

    counts: detections per channel in this slice, int64, in the order of the header.
    estimates: name -> one estimate per span, in the order of the header's spans.
    """

    slice_index: int
    begin_ps: int
    end_ps: int
    live_time_ps: int
    counts: NDArray[Any]
    estimates: Mapping[str, tuple[Estimate, ...]]


@dataclass(frozen=True, slots=True)
class SpanView:
    """One span as a reader sees it.

    tallies: name -> arrays by name, complete: axes, counts, derived curves (g2, g2_errors,
        g2_lower, g2_upper), pair_time_ps, expected_pairs, and the scalars start_counts,
        stop_counts, live_time_ps as arrays of shape ().
    counts: detections per channel, int64. opening of assumed stretches not counted.
    rate_hz: per channel, float64, nan without live time.
    """

    name: str
    begin_ps: int
    end_ps: int
    live_time_ps: int
    counts: NDArray[Any]
    rate_hz: NDArray[Any]
    tallies: Mapping[str, Arrays]


@dataclass(frozen=True, slots=True)
class SplitView:
    """A tally over the whole run, apart for each value of a key of marks.

    now: the value in force. parts: value -> arrays as in `SpanView.tallies`, in the order in
        which values were first in force.
    """

    key: str
    now: float | str
    parts: Mapping[float | str, Arrays]


@dataclass(frozen=True, slots=True)
class GoingOn:
    """What a snapshot carries for a later start.

    singles: sums of the tally that every run has. first_slice, next_slice: of the run.
    counters: by name. position: of the feed, anything that JSON can hold.
    """

    singles: Arrays
    first_slice: int
    next_slice: int
    counters: Mapping[str, Any]
    position: Mapping[str, Any]


@dataclass(frozen=True, slots=True)
class Snapshot:
    """All that a monitor needs now.

    estimates: as in `Row`. health: received, kept, dropped_<reason>, gaps, gap_time_ps,
        backlog_blocks, lag_behind_s, last_tag_ps, state and the like; int, float or str.
    splits: by name of tally, those that are split. marks: the newest, in the order in which they
        were set.
    arrived_s: when the oldest tag arrived that no snapshot before has shown, monotonic clock;
        None where nothing new is shown, or tags do not arrive live.
    going_on: what a later start needs; None before the first slice has ended.
    """

    spans: tuple[SpanView, ...]
    estimates: Mapping[str, tuple[Estimate, ...]]
    health: Mapping[str, int | float | str]
    splits: Mapping[str, SplitView] = field(default_factory=dict)
    marks: tuple[Mark, ...] = ()
    arrived_s: float | None = None
    going_on: GoingOn | None = None


class Sink(Protocol):
    """Takes what the pipeline has to say, in stream order, in one thread.

    `renew`: more is known of the run than when it began, or its estimates are others now; rows
    that follow are of the new header.
    """

    def add_row(self, row: Row) -> None: ...

    def snapshot_due(self) -> bool: ...

    def replace_snapshot(self, snapshot: Snapshot) -> None: ...

    def renew(self, header: RunHeader) -> None: ...

    def event(self, name: str, stream_ps: int | None = None, **fields: Any) -> None: ...

    def close(self, snapshot: Snapshot) -> None: ...
