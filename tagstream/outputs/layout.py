"""What stands where in latest.h5: units and meaning of every dataset. No HDF5 here.

/                             NXroot, default = "run"
/run                          NXentry; default = the first tally, else /run/estimates
    title, start_time, end_time (at the end), program_name (version), settings
    run_uuid, updated_utc, host, pid, tick, slice_ps, spans; if known origin_ticks, origin_utc,
    recorded_uuid (of the run that is replayed)
/run/<tally>                  NXdata, span "run"; other spans /run/<tally>_<span>, as hbt_10s
/run/<tally>/by_<key>         of a tally that is split by a key of marks: @key, @now (the value in
    force); value (texts), number (float64, nan for texts), one entry for each value so far
    <n>                       NXdata like the tally itself, over the whole run, of the n-th value
                              (from 1): @value (number or text); axes are those of the tally
/run/estimates/<estimate>     one entry per span in: spans, value, lower, upper, level, counts,
    interval, method, reason, note, raw_value, raw_lower, raw_upper; unit
    history                   NXdata: the value over the last hour, for the shortest span
    profile                   NXdata: what the value of span "run" was made from
/run/channels/<channel>       per span: spans, begin_ps, end_ps, counts, rate_hz, live_time_ps,
    live_time_s
/run/health                   counters and state, scalars
/run/marks, /run/mark_table   the newest marks, as in a recording: logs by key, and one table
/run/truth                    what a simulation knows, scalars
"""

from __future__ import annotations

import re

ENTRY = "run"
ESTIMATES = "estimates"
CHANNELS = "channels"
HEALTH = "health"
TRUTH = "truth"
HISTORY_INTEGERS = "integers"
HISTORY_NUMBERS = "numbers"

UNITS = {
    "lag": "ps",
    "lag_edges": "ps",
    "time": "s",
}
SUFFIX_UNITS = {"_ps": "ps", "_s": "s", "_hz": "Hz"}
LONG_NAMES = {
    "lag": "lag = t(stop) - t(start) (ps)",
    "g2": "g2",
    "time": "stream time (s)",
    "peak_number": "number of the peak",
    "peak_area": "area / mean of side peaks",
}
ESTIMATE_NUMBERS = ("value", "lower", "upper", "level", "raw_value", "raw_lower", "raw_upper")
ESTIMATE_TEXTS = ("interval", "method", "reason", "note")
HISTORY_COLUMNS = ("value", "lower", "upper")
HOUR_S = 3600
MOST_HISTORY = 3600  # points of the history inside latest.h5


def unit_of(name: str) -> str | None:
    """The unit of a dataset: that of its suffix, as in live_time_ps; None for a plain number."""
    ends = (unit for suffix, unit in SUFFIX_UNITS.items() if name.endswith(suffix))
    return UNITS.get(name) or next(ends, None)


def span_suffix(span: str) -> str:
    """A span inside a name: "10 s" -> "10s"."""
    return re.sub(r"\s", "", span)


def tally_group(tally: str, span: str) -> str:
    """The group of a tally and span: "hbt", "hbt_10s"."""
    return tally if span == "run" else f"{tally}_{span_suffix(span)}"


def split_group(key: str) -> str:
    """The group, inside that of a tally, of its parts by value of `key`."""
    return f"by_{key}"


def integer_columns(channels: tuple[str, ...]) -> list[str]:
    """Columns of the integer table of the history."""
    return ["slice", "begin_ps", "end_ps", "live_time_ps", *(f"counts:{c}" for c in channels)]


def number_columns(estimates: tuple[str, ...], spans: tuple[str, ...]) -> list[str]:
    """Columns of the floating-point table of the history: utc in Unix seconds, then numbers."""
    return [
        "utc",
        *(number_column(e, s, c) for e in estimates for s in spans for c in HISTORY_COLUMNS),
    ]


def number_column(estimate: str, span: str, column: str) -> str:
    """Name of one column: "g2_zero:10s:value"."""
    return f"{estimate}:{span_suffix(span)}:{column}"
