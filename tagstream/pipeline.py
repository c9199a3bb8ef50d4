"""The five stages joined: one step takes one piece of the feed all the way to the sink.

The only module that knows every stage. It has no threads and looks at no clock; slices and
spans are cut in stream time.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import asdict, replace
from enum import StrEnum
from fractions import Fraction
from itertools import chain
from typing import Any

import numpy as np

from tagstream import estimates
from tagstream.block import Block
from tagstream.conditioning import Conditioned
from tagstream.conditioning import kernels as conditioning_kernels
from tagstream.conditioning.ordering import kernels as ordering_kernels
from tagstream.counters import Counters, counters_of
from tagstream.errors import InputError, SettingsError
from tagstream.estimates import Estimate, Estimator, build_estimator
from tagstream.feeds import Feed, TimeBase
from tagstream.marks import RememberedMarks
from tagstream.outputs import GoingOn, Row, RunHeader, Sink, Snapshot
from tagstream.outputs.resume import ResumeState
from tagstream.recording.layout import Mark
from tagstream.settings import Settings, rules
from tagstream.settings.measures import CountRate, EstimateSettings, G2ZeroPulsed
from tagstream.tallies import SINGLES, build_tallies
from tagstream.tallies import kernels as tally_kernels
from tagstream.tallies.cross_correlation import sums_in
from tagstream.tallies.singles import Singles
from tagstream.tallies.slice_sums import SliceSums
from tagstream.tallies.slicer import cut_at_slices
from tagstream.tallies.spans import Spans, SpanSums
from tagstream.tallies.split import Splits
from tagstream.units import PS_PER_S
from tagstream.views import Views, header_of

# What takes time when it is first used: called, in any thread, before the first tag is read.
WARM_UPS = (
    conditioning_kernels.warm_up,
    ordering_kernels.warm_up,
    tally_kernels.warm_up,
    estimates.warm_up,
)


Number = int | float | str
NOTHING = Conditioned([], Counters(), None, None, None)  # what is known before the first piece


class State(StrEnum):
    """What a run is doing, as its readers see it."""

    STARTING = "starting"
    RUNNING = "running"
    STARVED = "starved"  # no tags for some seconds
    BEHIND = "behind"  # tags arrive faster than they are processed
    DEGRADED = "degraded"  # results cannot be written; tags are counted
    STOPPING = "stopping"
    FINISHED = "finished"
    STOPPED = "stopped"
    INPUT_BROKEN = "input_broken"
    FAILED = "failed"


class Pipeline:
    """Settings, a feed and a sink, joined. Call `step` until it says no, then `finish`.

    feed: what is known of it. stream: its tags, conditioned. open_sink: makes the sink. around:
    what is known of the run besides its tags, for the health; its "state" counts while the run
    goes on. first: of the stream, where one waits for it so that a feed that cannot be read
    leaves no empty run behind; a live run begins without. shown: how often a snapshot was handed
    to the sink. elsewhere: counters that are added to those of the stream. health: as last shown;
    a new mapping each time, so that any thread may read it. new_tags: that the last step brought.
    described: whether the feed has shown what it is.
    """

    def __init__(
        self,
        settings: Settings,
        settings_text: str,
        feed: Feed,
        stream: Iterator[Conditioned],
        open_sink: Callable[[RunHeader], Sink],
        around: Callable[[], Mapping[str, Number]] = dict,
        first: Conditioned | None = None,
    ) -> None:
        self.settings, self.feed, self.shown = settings, feed, 0
        self._settings_text, self._around = settings_text, around
        self.health: Mapping[str, Number] = {"state": str(State.STARTING)}
        self.elsewhere = Counters()
        self._gap_from_ps: int | None = None  # where an earlier process of this run stopped
        self._stream = stream if first is None else chain([first], stream)
        self._now = NOTHING if first is None else first
        self.described = first is not None
        self._unshown = False  # a slice has ended since
        self._arrived_s: float | None = None  # when the first tag that was not shown yet arrived
        self.new_tags = 0
        index = settings.channel_index
        tallies = build_tallies(settings.tallies, index)
        self._tally_names = [tally.name for tally in settings.tallies]
        axes = {name: axes for t in tallies for name, axes in t.axes.items()}
        self._views = Views(settings.tallies, axes)
        self._estimators = _estimators(settings)
        self._spans = Spans(settings.rolling)
        self._splits, self._marks = Splits(settings.tallies), RememberedMarks()
        self._slice: int | None = None
        self._slice_end_ps = 0
        self._last_seen_ps = np.zeros(len(index), np.int64)  # end of the last slice with tags
        singles = Singles(len(index), sorted(_clocks(settings)))
        self._slice_sums = SliceSums(singles, tallies, self._splits)
        self.sink = open_sink(self.header)
        if self.described:
            self._warn_of_bins()

    @property
    def arrived_s(self) -> float | None:
        """When the piece arrived that was taken last; None for feeds that are not live."""
        return self._now.arrived_s

    @property
    def counters(self) -> Counters:
        """What became of the tags of this run so far."""
        return self._now.counters.plus(self.elsewhere)

    def count_besides(self, elsewhere: Counters) -> None:
        """Add what an earlier process counted for this run; or negative, of an earlier run."""
        self.elsewhere = self.elsewhere.plus(elsewhere)

    def restart_spans(self) -> None:
        """Let the spans begin anew, all but that of the whole run; after a change at the table."""
        self._spans.restart()
        self.sink.event("spans_restarted", self._slice_end_ps)

    def reload(self, settings: Settings, settings_text: str) -> None:
        """Take over the estimates of other settings; tallies go on.

        Raises SettingsError, and changes nothing, where they need what is not counted.
        """
        if missing := _clocks(settings) - _clocks(self.settings):
            names = ", ".join(list(settings.channels)[index] for index in sorted(missing))
            raise SettingsError(
                [
                    f"[[estimate]] clock: the periods of {names} are not counted in this run;"
                    " right would be a new run"
                ]
            )
        self._estimators = _estimators(settings)
        self._settings_text = settings_text
        self.settings = settings
        self.sink.renew(self.header)
        self.sink.event("reload", self._slice_end_ps)

    def step(self) -> bool:
        """Take one piece of the feed all the way; False when there was none left.

        Raises InputError when the feed breaks; what came before it has been taken.
        """
        following = next(self._stream, None)
        if following is None:
            return False
        self.new_tags = following.counters.arrived - self._now.counters.arrived
        self._now = following
        if not self.described and following.counters.arrived:
            self.described = True
            self.sink.renew(self.header)
            self._warn_of_bins()
        if self._arrived_s is None:
            self._arrived_s = following.arrived_s
        self._take_marks(following.marks)
        self._take(following.blocks)
        if self._unshown and self.sink.snapshot_due():
            self.show()
        return True

    def show(self) -> None:
        """Hand a snapshot to the sink: also while no slice ends, so that the health is fresh."""
        self.sink.replace_snapshot(self._snapshot(State.RUNNING))
        self.shown += 1
        if self._unshown:
            self._arrived_s = None
        self._unshown = False

    def finish(self, state: State, **fields: Any) -> None:
        """End the last slice and close the sink, the second also if the first fails."""
        try:
            if self._slice is not None:
                self._end_slice(self._slice)
            self.sink.event("end", None, **{**self._health(state), **fields})
        finally:
            self.sink.close(self._snapshot(state))

    def _take(self, blocks: list[Block]) -> None:
        slice_ps = self.settings.rolling.slice_ps
        for block in blocks:
            if self._gap_from_ps is not None:
                gap_ps, self._gap_from_ps = block.begin_ps - self._gap_from_ps, None
                self.count_besides(Counters(gaps=1, gap_time_ps=gap_ps))
            if block.opens and self.counters.gaps:
                self.sink.event("gap", block.begin_ps, gaps=self.counters.gaps)
            for index, piece in cut_at_slices(block, slice_ps):
                if self._slice is not None and index != self._slice:
                    self._end_slice(self._slice)
                self._slice = index
                self._slice_sums.add(piece)
                if piece.end_ps == (index + 1) * slice_ps:
                    self._end_slice(index)

    def _take_marks(self, marks: tuple[Mark, ...]) -> None:
        for mark in marks:
            self.sink.event("mark", mark.time_ps, key=mark.key, value=mark.value)
        self._marks.add(marks)
        self._splits.mark(marks)

    def _end_slice(self, index: int) -> None:
        self._slice = None
        sums = self._slice_sums.take()
        singles = sums[SINGLES]
        self._spans.add(index, sums)
        self._end_slice_of_splits(index)
        slice_ps = self.settings.rolling.slice_ps
        self._last_seen_ps[singles["counts"] > 0] = self._slice_end_ps = (index + 1) * slice_ps
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
        self._unshown = True

    def _end_slice_of_splits(self, index: int) -> None:
        for name in self._splits.end_slice():
            key = self._splits[name].key
            self.sink.event(
                "split_full", index * self.settings.rolling.slice_ps, tally=name, key=key
            )

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
        self.health = self._health(state)
        return Snapshot(
            tuple(self._views.span(span) for span in spans),
            self._estimates(spans, profiles=True) if spans else {},
            self.health,
            splits=self._views.splits(self._splits),
            marks=self._marks.all(),
            arrived_s=self._arrived_s if self._unshown else None,
            going_on=self._going_on(),
        )

    def resume(self, state: ResumeState) -> None:
        """Go on where an earlier process stopped, before the first step."""
        going_on = state.going_on
        slices = going_on.first_slice, going_on.next_slice
        run = {name: sums_in(state.sums[name]) for name in self._tally_names}
        self._spans.restore(slices, {**run, SINGLES: going_on.singles})
        for name, parts in state.splits.items():
            self._splits.restore(name, {v: sums_in(arrays) for v, arrays in parts.items()})
        end_ps = going_on.next_slice * self.settings.rolling.slice_ps
        self._marks.add(state.marks)
        self._splits.mark(state.marks)
        self._splits.change(end_ps)
        self._slice_end_ps = end_ps
        self._last_seen_ps[:] = end_ps
        self._gap_from_ps = end_ps
        self.count_besides(counters_of(going_on.counters))

    def _going_on(self) -> GoingOn | None:
        """What `resume` needs; None before the first slice has ended."""
        slices = self._spans.slices
        if slices is None:
            return None
        run = next(iter(self._spans))
        position = getattr(self.feed, "position", {})
        counters = asdict(self.counters)
        return GoingOn(run.sums[SINGLES], *slices, counters, position)

    def _silent_s(self) -> dict[str, Number]:
        """Stream seconds since a slice had tags, by channel; so a lost clock is seen."""
        silent = (self._slice_end_ps - self._last_seen_ps) / PS_PER_S
        named = zip(self.settings.channels, silent.tolist(), strict=True)
        return {f"silent_{name}_s": seconds for name, seconds in named}

    def _health(self, state: State) -> dict[str, Number]:
        counters = self.counters
        now = self._now
        behind = (now.latest_ps or 0) - (now.live_end_ps or 0)
        around = dict(self._around())
        if state is not State.RUNNING:
            around.pop("state", None)
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
            **self._silent_s(),
            **around,
        }

    @property
    def header(self) -> RunHeader:
        """What is fixed for the run, as far as it is known."""
        base = self.feed.time_base if self.described else TimeBase(Fraction(1))
        units = {name: estimator.unit for name, estimator in self._estimators.items()}
        return header_of(self.settings, self._settings_text, base, units, self.feed.truth)

    def _warn_of_bins(self) -> None:
        """The tick of a recording is known only now; of other feeds `check` has told before."""
        for tally in self.settings.tallies:
            if text := rules.bin_warning(tally, self.feed.time_base.tick):
                self.sink.event("warning", text=text)


def first_of(stream: Iterator[Conditioned]) -> Conditioned:
    """The first piece with anything in it. Raises InputError when there is none."""
    marks: tuple[Mark, ...] = ()
    for first in stream:
        marks += first.marks
        if first.blocks or first.counters.arrived:
            return replace(first, marks=marks)
    raise InputError("the feed holds no tags; a feed with at least one tag would be right")


def _clocks(settings: Settings) -> set[int]:
    """The channels whose periods are measured."""
    return {
        settings.channel_index[estimate.clock]
        for estimate in settings.estimates
        if isinstance(estimate, G2ZeroPulsed) and estimate.clock is not None
    }


def _estimators(settings: Settings) -> dict[str, Estimator]:
    tallies = {tally.name: tally for tally in settings.tallies}
    return {
        estimate.name: build_estimator(
            _resolved(estimate, settings), settings.channel_index, tallies
        )
        for estimate in settings.estimates
    }


def _resolved(estimate: EstimateSettings, settings: Settings) -> EstimateSettings:
    """The settings of an estimate with what other sections say about it written in."""
    if isinstance(estimate, CountRate):
        dead_time_ps = rules.resolved_dead_time(estimate, settings.channels)
        return estimate.model_copy(update={"dead_time_ps": dead_time_ps})
    return estimate
