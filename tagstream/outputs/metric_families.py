"""What a run knows now as Prometheus metrics, made when somebody asks for them.

Names and units as in the conventions of Prometheus: base units, `_total` for what only grows.
Imported by `metrics` alone, for it needs the library.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, field

from prometheus_client.core import CounterMetricFamily, GaugeMetricFamily, InfoMetricFamily
from prometheus_client.metrics_core import Metric
from prometheus_client.registry import Collector

from tagstream._version import __version__
from tagstream.outputs import Row, RunHeader
from tagstream.units import PS_PER_S

STATES = (
    *("starting", "running", "starved", "behind", "degraded", "stopping"),
    *("finished", "stopped", "input_broken", "failed"),
)
# number of the health -> (metric, what it is, how many of its unit are one of the metric's)
COUNTERS = {
    "received": ("tagstream_tags_received", "Tags whose fate is decided: kept or dropped.", 1),
    "kept": ("tagstream_tags_kept", "Tags that were counted.", 1),
    "gaps": ("tagstream_gaps", "Gaps in live time.", 1),
    "gap_time_ps": ("tagstream_gap_seconds", "Stream time in gaps.", PS_PER_S),
}
GAUGES = {
    "in_flight": ("tagstream_tags_in_flight", "Tags that wait to be put in order.", 1),
    "largest_disorder_ps": ("tagstream_disorder_seconds", "Largest disorder seen.", PS_PER_S),
    "lag_behind_s": ("tagstream_lag_seconds", "Stream time received, not yet counted.", 1),
    "queued_s": ("tagstream_queue_seconds", "From arrival of a tag to its counting.", 1),
    "latency_s": ("tagstream_latency_seconds", "From arrival of a tag to results with it.", 1),
    "last_tag_age_s": ("tagstream_last_tag_age_seconds", "Since tags last came.", 1),
    "shed_fraction": ("tagstream_shed_ratio", "Part of slices left out because of load.", 1),
    "alerts_raised": ("tagstream_alerts_raised", "Alerts that are raised now.", 1),
}
_DROPPED, _SILENT = "dropped_", "silent_"


@dataclass(slots=True)
class Known:
    """What a run said last. Its parts are replaced whole, so another thread may read them."""

    header: RunHeader
    row: Row | None = None
    health: Mapping[str, int | float | str] = field(default_factory=lambda: {"state": "starting"})
    updated_s: float = 0.0  # Unix time


class RunCollector(Collector):
    """Makes all metrics of a run from what is known."""

    def __init__(self, known: Known) -> None:
        self._known = known

    def collect(self) -> Iterable[Metric]:
        """Called by the library for each request."""
        known = self._known
        yield InfoMetricFamily("tagstream_build", "The program.", {"version": __version__})
        yield _states(str(known.health.get("state")))
        yield GaugeMetricFamily(
            "tagstream_last_update_timestamp_seconds", "When the run last said so.", known.updated_s
        )
        yield from _of_health(known.health)
        if known.row is not None:
            yield _slice_end(known.row)
            if known.health.get("state") != "starved":  # a rate of the past is none of now
                yield _rates(known.header, known.row)
            yield from _estimates(known.header, known.row)


def _states(now: str) -> Metric:
    family = GaugeMetricFamily(
        "tagstream_state", "1 for the state of the run, 0 for the others.", labels=["state"]
    )
    for state in STATES:
        family.add_metric([state], float(state == now))
    return family


def _of_health(health: Mapping[str, int | float | str]) -> Iterator[Metric]:
    numbers = {k: v for k, v in health.items() if isinstance(v, int | float)}
    dropped = CounterMetricFamily(
        "tagstream_tags_dropped", "Tags that were not counted, by reason.", labels=["reason"]
    )
    silent = GaugeMetricFamily(
        "tagstream_silent_seconds", "Stream time since a channel had tags.", labels=["channel"]
    )
    other = GaugeMetricFamily(
        "tagstream_health", "Other numbers of the health, in the unit that ends their name.",
        labels=["name"],
    )  # fmt: skip
    for name, number in numbers.items():
        if name in COUNTERS:
            metric, what, unit = COUNTERS[name]
            yield CounterMetricFamily(metric, what, number / unit)
        elif name in GAUGES:
            metric, what, unit = GAUGES[name]
            yield GaugeMetricFamily(metric, what, number / unit)
        elif name.startswith(_DROPPED):
            dropped.add_metric([name.removeprefix(_DROPPED)], number)
        elif name.startswith(_SILENT) and name.endswith("_s"):
            silent.add_metric([name.removeprefix(_SILENT).removesuffix("_s")], number)
        else:
            other.add_metric([name], number)
    yield from (dropped, silent, other)


def _slice_end(row: Row) -> Metric:
    return GaugeMetricFamily(
        "tagstream_slice_end_seconds", "Stream time at the end of the newest slice.",
        row.end_ps / PS_PER_S,
    )  # fmt: skip


def _rates(header: RunHeader, row: Row) -> Metric:
    family = GaugeMetricFamily(
        "tagstream_rate_hertz", "Detections per second of live time, newest slice.",
        labels=["channel"],
    )  # fmt: skip
    live_s = row.live_time_ps / PS_PER_S
    for name, count in zip(header.channels, row.counts.tolist(), strict=True):
        if live_s:
            family.add_metric([name], count / live_s)
    return family


def _estimates(header: RunHeader, row: Row) -> Iterator[Metric]:
    """Value and interval; an estimate without a number has none here."""
    for key, metric, what in (
        ("value", "tagstream_estimate", "Value of an estimate, in its own unit."),
        ("lower", "tagstream_estimate_lower", "Lower end of its interval."),
        ("upper", "tagstream_estimate_upper", "Upper end of its interval."),
    ):
        family = GaugeMetricFamily(metric, what, labels=["name", "span"])
        for name, estimates in row.estimates.items():
            for span, estimate in zip(header.spans, estimates, strict=True):
                if estimate.interval != "none":
                    family.add_metric([name, span], getattr(estimate, key))
        yield family
