"""The five stages joined: one step takes one piece of the feed all the way to the sink.

The only module that knows every stage. It has no threads and looks at no clock; slices and
spans are cut in stream time.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from enum import StrEnum
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tagstream.block import Block
from tagstream.conditioning import Conditioned
from tagstream.counters import Counters
from tagstream.errors import InputError
from tagstream.estimates import Estimate, build_estimator
from tagstream.estimates.curves import g2_curves
from tagstream.feeds import Feed
from tagstream.outputs import Row, RunHeader, Sink, Snapshot, SpanView
from tagstream.settings import Settings, rules
from tagstream.settings.measures import CountRate, EstimateSettings, G2ZeroPulsed, TallySettings
from tagstream.tallies import SINGLES, Sums, build_tallies
from tagstream.tallies.singles import Singles
from tagstream.tallies.slicer import cut_at_slices
from tagstream.tallies.spans import Spans, SpanSums
from tagstream.units import PS_PER_S, format_time


class State(StrEnum):
    """What a run is doing, as its readers see it."""

    STARTING = "starting"
    RUNNING = "running"
    FINISHED = "finished"
    STOPPED = "stopped"
    INPUT_BROKEN = "input_broken"
    FAILED = "failed"


class Pipeline:
    """Settings, a feed and a sink, joined. Call `step` until it says no, then `finish`.

    feed: what is known of it. stream: its tags, conditioned. open_sink: makes the sink once the
    feed has shown what it is, so that a feed that cannot be read leaves no empty run behind.
    """

    def __init__(
        self,
        settings: Settings,
        settings_text: str,
        feed: Feed,
        stream: Iterator[Conditioned],
        open_sink: Callable[[RunHeader], Sink],
    ) -> None:
        self.settings = settings
        self.feed = feed
        self._stream = stream
        self._now = self._first()
        self._first_taken = False
        index = settings.channel_index
        tally_settings = {tally.name: tally for tally in settings.tallies}
        clocks = {
            index[e.clock]
            for e in settings.estimates
            if isinstance(e, G2ZeroPulsed) and e.clock is not None
        }
        self._singles = Singles(len(index), sorted(clocks))
        self._tallies = build_tallies(settings.tallies, index)
        self._axes = {name: axes for t in self._tallies for name, axes in t.axes.items()}
        self._estimators = {
            estimate.name: build_estimator(_resolved(estimate, settings), index, tally_settings)
            for estimate in settings.estimates
        }
        self._spans = Spans(settings.rolling)
        self._slice: int | None = None
        self.sink = open_sink(self._header(settings_text))
        self._warn_of_bins()

    @property
    def counters(self) -> Counters:
        """What became of the tags so far."""
        return self._now.counters

    def step(self) -> bool:
        """Take one piece of the feed all the way; False when there was none left.

        Raises InputError when the feed breaks; what came before it has been taken.
        """
        if self._first_taken:
            following = next(self._stream, None)
            if following is None:
                return False
            self._now = following
        self._first_taken = True
        self._take(self._now.blocks)
        return True

    def finish(self, state: State, **fields: Any) -> None:
        """End the last slice and close the sink, the second also if the first fails."""
        try:
            if self._slice is not None:
                self._end_slice(self._slice)
            self.sink.event("end", None, **{**self._health(state), **fields})
        finally:
            self.sink.close(self._snapshot(state))

    def _first(self) -> Conditioned:
        """The first piece with anything in it. Raises InputError when there is none."""
        for first in self._stream:
            if first.blocks or first.counters.arrived:
                return first
        raise InputError("the feed holds no tags; a feed with at least one tag would be right")

    def _take(self, blocks: list[Block]) -> None:
        slice_ps = self.settings.rolling.slice_ps
        for block in blocks:
            if block.opens and self.counters.gaps:
                self.sink.event("gap", block.begin_ps, gaps=self.counters.gaps)
            for index, piece in cut_at_slices(block, slice_ps):
                if self._slice is not None and index != self._slice:
                    self._end_slice(self._slice)
                self._slice = index
                self._singles.add(piece)
                for tally in self._tallies:
                    tally.add(piece)
                if piece.end_ps == (index + 1) * slice_ps:
                    self._end_slice(index)

    def _end_slice(self, index: int) -> None:
        self._slice = None
        singles = self._singles.take()
        sums: dict[str, Sums] = {SINGLES: singles}
        for tally in self._tallies:
            sums |= tally.take(singles)
        self._spans.add(index, sums)
        slice_ps = self.settings.rolling.slice_ps
        self.sink.add_row(
            Row(
                index,
                index * slice_ps,
                (index + 1) * slice_ps,
                int(singles["live_time_ps"]),
                singles["counts"],
                self._estimates(list(self._spans)),
            )
        )
        if self.sink.snapshot_due():
            self.sink.replace_snapshot(self._snapshot(State.RUNNING))

    def _estimates(
        self, spans: list[SpanSums], profiles: bool = False
    ) -> dict[str, tuple[Estimate, ...]]:
        if not spans[0].sums:
            return {}
        return {
            name: tuple(
                (estimator.with_profile if profiles else estimator)(span.sums) for span in spans
            )
            for name, estimator in self._estimators.items()
        }

    def _snapshot(self, state: State) -> Snapshot:
        spans = list(self._spans)
        if not spans[0].sums:
            spans = []
        return Snapshot(
            tuple(self._view(span) for span in spans),
            self._estimates(spans, profiles=True) if spans else {},
            self._health(state),
        )

    def _view(self, span: SpanSums) -> SpanView:
        singles = span.sums[SINGLES]
        tallies = {
            tally.name: self._arrays(span.sums[tally.name], tally)
            for tally in self.settings.tallies
        }
        live_time_ps = int(singles["live_time_ps"])
        rates = _rates(singles["counts"], live_time_ps)
        return SpanView(
            span.name, span.begin_ps, span.end_ps, live_time_ps, singles["counts"], rates, tallies
        )

    def _arrays(self, sums: Sums, tally: TallySettings) -> Mapping[str, NDArray[Any]]:
        return {**self._axes[tally.name], **sums, **g2_curves(sums, tally)}

    def _health(self, state: State) -> dict[str, int | float | str]:
        counters = self.counters
        now = self._now
        behind = (now.latest_ps or 0) - (now.live_end_ps or 0)
        return {
            "state": str(state),
            "received": counters.received,
            "kept": counters.kept,
            **{f"dropped_{reason}": count for reason, count in counters.dropped.items()},
            "in_flight": counters.in_flight,
            "gaps": counters.gaps,
            "gap_time_ps": counters.gap_time_ps,
            "largest_disorder_ps": counters.largest_disorder_ps,
            "backlog_blocks": 0,
            "lag_behind_s": max(behind, 0) / PS_PER_S,
            "last_tag_ps": now.last_tag_ps or 0,
        }

    def _header(self, settings_text: str) -> RunHeader:
        settings, base = self.settings, self.feed.time_base
        return RunHeader(
            title=settings.title,
            settings_text=settings_text,
            channels=tuple(settings.channels),
            spans=tuple(span.name for span in self._spans),
            tallies={
                t.name: {"kind": t.kind, "start": t.start, "stop": t.stop} for t in settings.tallies
            },
            estimates={name: estimator.unit for name, estimator in self._estimators.items()},
            slice_ps=settings.rolling.slice_ps,
            tick=format_time(base.tick),
            origin_ticks=base.origin_ticks,
            origin_utc=base.origin_utc,
            recorded_uuid=base.recorded_uuid,
            truth=self.feed.truth,
        )

    def _warn_of_bins(self) -> None:
        """The tick of a recording is known only now; of other feeds `check` has told before."""
        for tally in self.settings.tallies:
            if text := rules.bin_warning(tally, self.feed.time_base.tick):
                self.sink.event("warning", text=text)


def _resolved(estimate: EstimateSettings, settings: Settings) -> EstimateSettings:
    """The settings of an estimate with what other sections say about it written in."""
    if isinstance(estimate, CountRate):
        dead_time_ps = rules.resolved_dead_time(estimate, settings.channels)
        return estimate.model_copy(update={"dead_time_ps": dead_time_ps})
    return estimate


def _rates(counts: NDArray[Any], live_time_ps: int) -> NDArray[np.float64]:
    if live_time_ps == 0:
        return np.full(counts.size, np.nan)
    return np.asarray(counts / (live_time_ps / PS_PER_S))
