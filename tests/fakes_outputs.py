"""Small results, made by hand, for tests of what is written, read, printed and drawn."""

from __future__ import annotations

from dataclasses import dataclass
from math import nan
from typing import Any

import numpy as np

from tagstream.estimates import Estimate
from tagstream.outputs import Row, RunHeader, Snapshot, SpanView

SLICE_PS = 10**12
SPANS = ("run", "10 s")


@dataclass
class FakeClock:
    """A clock that stands still until it is told to move."""

    now: float = 100.0

    def __call__(self) -> float:
        return self.now


def make_header(**changes: Any) -> RunHeader:
    """Two channels, one tally, two estimates, the spans "run" and "10 s"."""
    fields: dict[str, Any] = {
        "title": "a run made by hand",
        "settings_text": 'title = "a run made by hand"\n',
        "channels": ("arm_a", "arm_b"),
        "spans": SPANS,
        "tallies": {"hbt": {"kind": "cross-correlation", "start": "arm_a", "stop": "arm_b"}},
        "estimates": {"g2_zero": "1", "rate_a": "Hz"},
        "slice_ps": SLICE_PS,
        "tick": "1 ps",
        "origin_ticks": 7,
        "origin_utc": "2026-12-01T10:00:00+00:00",
    }
    return RunHeader(**{**fields, **changes})


def make_estimate(**changes: Any) -> Estimate:
    """0.1 with an interval that is no short decimal, so that a lost bit would show."""
    fields: dict[str, Any] = {
        "value": 0.1,
        "lower": 1 / 11,
        "upper": 1 / 9,
        "level": 0.6827,
        "method": "made by hand",
        "unit": "1",
        "counts": 40,
    }
    return Estimate(
        **{"raw_value": 0.1, "raw_lower": 1 / 11, "raw_upper": 1 / 9, **fields, **changes}
    )


def make_estimates(step: int = 0, profile: bool = False) -> dict[str, tuple[Estimate, ...]]:
    """The estimates of the header: one number per span, other ones at each `step`."""
    arrays = make_profile() if profile else {}
    rate = make_estimate(value=1000.0 + step, lower=990.0, upper=1010.0, unit="Hz")
    none = make_estimate(value=nan, lower=nan, upper=nan, interval="none", reason="too few counts")
    return {
        "g2_zero": (make_estimate(value=0.1 + step / 3, profile=arrays), none),
        "rate_a": (rate, rate),
    }


def make_profile() -> dict[str, Any]:
    """Peak areas and a window scan, as the pulsed estimate keeps them."""
    number, width = np.arange(-3, 4), np.array([1000, 2000, 3000, 4000])
    area = np.where(number == 0, 0.1, 1.0)
    value = np.full(width.size, 0.1)
    return {
        "peak_number": number,
        "peak_area": area,
        "peak_area_lower": area - 0.03,
        "peak_area_upper": area + 0.04,
        "window_width_ps": width,
        "window_value": value,
        "window_lower": value - 0.01,
        "window_upper": value + 0.02,
    }


def make_row(index: int) -> Row:
    """Slice `index`. Every number in it says which slice it belongs to."""
    begin_ps = index * SLICE_PS
    counts = np.array([10 * index, 10 * index + 1], np.int64)
    end_ps = begin_ps + SLICE_PS
    return Row(index, begin_ps, end_ps, SLICE_PS - index, counts, make_estimates(index))


def make_tally(bins: int) -> dict[str, Any]:
    """A dip at zero lag in `bins` bins of 100 ps; pair_time_ps is the same for all bins."""
    lag = (np.arange(bins) - bins // 2) * 100.0
    counts = np.full(bins, 9, np.int64)
    counts[bins // 2] = 0
    g2 = counts / 9.0
    return {
        "lag": lag,
        "lag_edges": np.append(lag - 50.0, lag[-1] + 50.0),
        "counts": counts,
        "pair_time_ps": np.asarray(SLICE_PS, np.int64),
        "expected_pairs": np.full(bins, 9.0),
        "start_counts": np.asarray(3000, np.int64),
        "stop_counts": np.asarray(3001, np.int64),
        "live_time_ps": np.asarray(SLICE_PS, np.int64),
        "g2": g2,
        "g2_errors": np.full(bins, 1 / 3),
        "g2_lower": np.maximum(g2 - 0.31, 0.0),
        "g2_upper": g2 + 0.35,
    }


def make_view(name: str, bins: int = 11, tallies: tuple[str, ...] = ("hbt",)) -> SpanView:
    """One span of the header."""
    counts = np.array([2**53 + 1, 5], np.int64)  # the first is no float64
    rate_hz = counts / 1.0
    arrays = {tally: make_tally(bins) for tally in tallies}
    return SpanView(name, 0, SLICE_PS, SLICE_PS, counts, rate_hz, arrays)


def make_snapshot(step: int = 0, bins: int = 11, tallies: tuple[str, ...] = ("hbt",)) -> Snapshot:
    """All of the header, in the state "running"."""
    health: dict[str, int | float | str] = {
        "state": "running",
        "received": 20 + step,
        "kept": 18 + step,
        "dropped_late": 2,
        "dropped_dead_time": 0,
        "in_flight": 0,
        "gaps": 1,
        "gap_time_ps": 1_500_000_000_000,
        "largest_disorder_ps": 300,
        "backlog_blocks": 0,
        "lag_behind_s": 0.25,
        "last_tag_ps": 999_999_999_999,
    }
    views = tuple(make_view(name, bins, tallies) for name in SPANS)
    return Snapshot(views, make_estimates(step, profile=True), health)
