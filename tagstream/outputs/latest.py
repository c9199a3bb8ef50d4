"""latest.h5 as bytes: a whole, closed, plain HDF5 file built in memory.

Superblock 2 (libver v108), so that any HDF5 program opens it. The layout is in `layout`.
"""

from __future__ import annotations

from collections.abc import Mapping

import h5py
import numpy as np

from tagstream.estimates import Estimate
from tagstream.outputs import Arrays, RunHeader, Snapshot, SpanView
from tagstream.outputs import layout as at
from tagstream.outputs.histogram import write_histogram
from tagstream.outputs.marked import write_marks, write_splits
from tagstream.outputs.nodes import TEXT
from tagstream.outputs.nodes import make_group as _group
from tagstream.outputs.nodes import put as _put
from tagstream.outputs.nodes import put_texts as _put_texts
from tagstream.outputs.recent import RecentValues
from tagstream.outputs.resume import write_going_on
from tagstream.units import PS_PER_S

Meta = Mapping[str, str | int]


def latest_image(header: RunHeader, meta: Meta, snapshot: Snapshot, recent: RecentValues) -> bytes:
    """The content of latest.h5.

    meta: texts and integers that stand in /run as they are (start_time, run_uuid ...). recent:
    the values of the last hour.
    """
    with h5py.File(
        "latest.h5", "w", driver="core", backing_store=False, libver=("v108", "v110")
    ) as file:
        file.attrs["NX_class"] = "NXroot"
        file.attrs["default"] = at.ENTRY
        entry = _group(file, at.ENTRY, "NXentry")
        _write_entry(entry, header, meta)
        for span in snapshot.spans:
            for tally, arrays in span.tallies.items():
                _write_tally(entry, header, span, tally, arrays)
        write_splits(entry, snapshot.splits)
        if snapshot.going_on is not None:
            write_going_on(entry, snapshot.going_on)
        if snapshot.marks:
            write_marks(entry, snapshot.marks, header.origin_utc)
        _write_estimates(_group(entry, at.ESTIMATES, "NXcollection"), header, snapshot, recent)
        _write_channels(_group(entry, at.CHANNELS, "NXcollection"), header, snapshot)
        _write_health(_group(entry, at.HEALTH, "NXcollection"), snapshot.health)
        truth = _group(entry, at.TRUTH, "NXcollection") if header.truth else None
        for name, value in header.truth.items():
            _put(truth, name, value if isinstance(value, int | float | str) else str(value))
        if default := _default(entry, header):
            entry.attrs["default"] = default
        file.flush()
        return bytes(file.id.get_file_image())


def _write_entry(entry: h5py.Group, header: RunHeader, meta: Meta) -> None:
    _put(entry, "title", header.title)
    _put(entry, "settings", header.settings_text)
    _put(entry, "tick", header.tick)
    _put(entry, "slice_ps", header.slice_ps)
    _put_texts(entry, "spans", list(header.spans))
    if header.origin_ticks is not None:
        _put(entry, "origin_ticks", header.origin_ticks)
    if header.origin_utc is not None:
        _put(entry, "origin_utc", header.origin_utc)
    if header.recorded_uuid is not None:
        _put(entry, "recorded_uuid", header.recorded_uuid)
    for name, value in meta.items():
        if name != "version":
            _put(entry, name, value)
    entry["program_name"].attrs["version"] = meta["version"]


def _default(entry: h5py.Group, header: RunHeader) -> str | None:
    """What a viewer shows first: a histogram, else the history of an estimate, if any."""
    for tally in header.tallies:
        if tally in entry:
            return tally
    for estimate in header.estimates:
        entry[at.ESTIMATES].attrs["default"] = estimate
        return at.ESTIMATES
    return None


def _write_tally(
    entry: h5py.Group, header: RunHeader, span: SpanView, tally: str, arrays: Arrays
) -> None:
    group = _group(entry, at.tally_group(tally, span.name), "NXdata")
    write_histogram(group, entry[tally], arrays)  # the first span: its axes are shared by all
    _put(group, "begin_ps", span.begin_ps)
    _put(group, "end_ps", span.end_ps)
    group.attrs["span"] = span.name
    group.attrs["title"] = " ".join((tally, "over", span.name))
    for name, text in header.tallies[tally].items():
        group.attrs[name] = text


def _write_estimates(
    group: h5py.Group, header: RunHeader, snapshot: Snapshot, recent: RecentValues
) -> None:
    for name, unit in header.estimates.items():
        inner = _group(group, name, "NXcollection")
        inner.attrs["default"] = "history"
        _put(inner, "unit", unit)
        found = snapshot.estimates.get(name, ())
        _put_texts(inner, "spans", list(header.spans[: len(found)]))
        for key in at.ESTIMATE_NUMBERS:
            _put(inner, key, np.array([getattr(e, key) for e in found], np.float64))
            inner[key].attrs["units"] = "1" if key == "level" else unit
        _put(inner, "counts", np.array([e.counts for e in found], np.int64))
        for key in at.ESTIMATE_TEXTS:
            _put_texts(inner, key, [getattr(e, key) for e in found])
        _write_history(_group(inner, "history", "NXdata"), name, unit, recent)
        if found and found[0].profile:
            _write_profile(_group(inner, "profile", "NXdata"), found[0])


def _write_history(group: h5py.Group, name: str, unit: str, recent: RecentValues) -> None:
    time_s, value, lower, upper = recent.columns(name)
    for key, values in (("time", time_s), ("value", value), ("lower", lower), ("upper", upper)):
        _put(group, key, values)
    _put(group, "value_errors", (upper - lower) / 2)
    for key in ("value", "lower", "upper", "value_errors"):
        group[key].attrs["units"] = unit
    group["value"].attrs["long_name"] = name
    group.attrs["signal"] = "value"
    group.attrs["axes"] = np.array(["time"], dtype=TEXT)
    group.attrs["time_indices"] = 0
    group.attrs["span"] = recent.span
    group.attrs["title"] = f"{name} over {recent.span}"


def _write_profile(group: h5py.Group, estimate: Estimate) -> None:
    for name, values in estimate.profile.items():
        _put(group, name, values)
    if "peak_area" in estimate.profile:
        lower, upper = (estimate.profile[f"peak_area_{end}"] for end in ("lower", "upper"))
        _put(group, "peak_area_errors", (upper - lower) / 2)
        group.attrs["signal"] = "peak_area"
        group.attrs["axes"] = np.array(["peak_number"], dtype=TEXT)
        group.attrs["peak_number_indices"] = 0


def _write_channels(group: h5py.Group, header: RunHeader, snapshot: Snapshot) -> None:
    spans = snapshot.spans
    begin_ps, end_ps, live_time_ps = (
        np.array([getattr(span, key) for span in spans], np.int64)
        for key in ("begin_ps", "end_ps", "live_time_ps")
    )
    for index, name in enumerate(header.channels):
        inner = _group(group, name, "NXdetector")
        _put_texts(inner, "spans", [span.name for span in spans])
        _put(inner, "begin_ps", begin_ps)
        _put(inner, "end_ps", end_ps)
        _put(inner, "counts", np.array([span.counts[index] for span in spans], np.int64))
        _put(inner, "rate_hz", np.array([span.rate_hz[index] for span in spans], np.float64))
        _put(inner, "live_time_ps", live_time_ps)
        _put(inner, "live_time_s", live_time_ps / PS_PER_S)


def _write_health(group: h5py.Group, health: Mapping[str, int | float | str]) -> None:
    for name, value in health.items():
        _put(group, name, value)
    if "gap_time_ps" in health:
        _put(group, "gap_time_s", int(health["gap_time_ps"]) / PS_PER_S)
