"""Sums of the tallies as readers of the results see them: no state, no files."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tagstream.estimates.curves import g2_curves
from tagstream.feeds import TimeBase
from tagstream.outputs import RunHeader, SpanView, SplitView
from tagstream.settings import Settings
from tagstream.settings.measures import TallySettings
from tagstream.tallies import SINGLES, Sums
from tagstream.tallies.spans import SpanSums
from tagstream.tallies.split import Splits
from tagstream.units import PS_PER_S, format_time

Axes = Mapping[str, Mapping[str, NDArray[Any]]]


def header_of(
    settings: Settings,
    settings_text: str,
    base: TimeBase,
    units: Mapping[str, str],
    truth: Mapping[str, Any],
) -> RunHeader:
    """What is fixed for a run. units: of the estimates, by name."""
    spans = ("run", *(format_time(span) for span in settings.rolling.spans_ps))
    return RunHeader(
        title=settings.title,
        settings_text=settings_text,
        channels=tuple(settings.channels),
        spans=spans,
        tallies={tally.name: _described(tally) for tally in settings.tallies},
        estimates=units,
        slice_ps=settings.rolling.slice_ps,
        tick=format_time(base.tick),
        origin_ticks=base.origin_ticks,
        origin_utc=base.origin_utc,
        recorded_uuid=base.recorded_uuid,
        truth=truth,
    )


class Views:
    """Arrays of all tallies: what adds up, their axes, and the curves made of them.

    axes: by name of tally, the arrays that do not add up.
    """

    def __init__(self, tallies: list[TallySettings], axes: Axes) -> None:
        self._tallies = {tally.name: tally for tally in tallies}
        self._axes = axes

    def span(self, span: SpanSums) -> SpanView:
        """One span."""
        singles = span.sums[SINGLES]
        live_time_ps = int(singles["live_time_ps"])
        return SpanView(
            span.name,
            span.begin_ps,
            span.end_ps,
            live_time_ps,
            singles["counts"],
            _rates(singles["counts"], live_time_ps),
            {name: self._arrays(name, span.sums[name]) for name in self._tallies},
        )

    def splits(self, splits: Splits) -> dict[str, SplitView]:
        """The tallies that are split, by name."""
        return {
            name: SplitView(
                splits[name].key,
                splits.value(splits[name].key),
                {value: self._arrays(name, sums) for value, sums in splits[name].parts.items()},
            )
            for name in splits
        }

    def _arrays(self, name: str, sums: Sums) -> Mapping[str, NDArray[Any]]:
        return {**self._axes[name], **sums, **g2_curves(sums, self._tallies[name])}


def _described(tally: TallySettings) -> dict[str, str]:
    """What the results say of a tally besides its numbers."""
    described = {"kind": tally.kind, "start": tally.start, "stop": tally.stop}
    return described if tally.split_by is None else {**described, "split_by": tally.split_by}


def _rates(counts: NDArray[Any], live_time_ps: int) -> NDArray[np.float64]:
    if live_time_ps == 0:
        return np.full(counts.size, np.nan)
    return np.asarray(counts / (live_time_ps / PS_PER_S))
