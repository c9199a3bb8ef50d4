"""What a recording says of itself as a whole, written and read back."""

from __future__ import annotations

import json
import math
import uuid
from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import UTC, datetime, timedelta
from fractions import Fraction
from typing import Any

import h5py

from tagstream import units
from tagstream._version import __version__
from tagstream.recording.opening import text_of

_TEXT = h5py.string_dtype("utf-8")


def utc_now() -> str:
    """The wall time as ISO 8601."""
    return datetime.now(UTC).isoformat(timespec="microseconds")


@dataclass(frozen=True, slots=True)
class RecordingHeader:
    """What describes a recording besides its tick.

    origin_ticks: native count at stream time zero. origin_utc: wall time of stream time zero,
    ISO 8601. run_uuid: the same in all segments of a run. segment: 1 for the first file.
    truth: what a simulation knows of itself; anything that JSON can hold. not_recorded_s: stream
    time before this segment that the run counted but did not record.
    """

    title: str = ""
    origin_ticks: int | None = None
    origin_utc: str | None = None
    run_uuid: str = field(default_factory=lambda: str(uuid.uuid4()))
    segment: int = 1
    truth: Mapping[str, Any] = field(default_factory=dict)
    start_time: str = field(default_factory=utc_now)
    not_recorded_s: float = 0.0

    def moved(self, shift_ps: int, tick: Fraction) -> tuple[int | None, str | None]:
        """(origin_ticks, origin_utc) of the instant `shift_ps` after stream time zero."""
        ticks = self.origin_ticks
        if ticks is not None:
            ticks = math.ceil(ticks + shift_ps / tick)
        return ticks, None if self.origin_utc is None else moved_utc(self.origin_utc, shift_ps)


def moved_utc(utc: str, shift_ps: int) -> str | None:
    """An ISO 8601 time `shift_ps` later, to the microsecond; None if it is none."""
    try:
        moment = datetime.fromisoformat(utc) + timedelta(microseconds=shift_ps // 10**6)
    except (ValueError, OverflowError):
        return None
    return moment.isoformat(timespec="microseconds")


def write_header(entry: h5py.Group, header: RecordingHeader, tick: Fraction) -> None:
    """Write the datasets of NXentry that are known when a recording is made."""
    _write_text(entry, "title", header.title)
    _write_text(entry, "start_time", header.start_time)
    _write_text(entry, "program_name", "tagstream")
    entry["program_name"].attrs["version"] = __version__
    _write_text(entry, "entry_identifier_uuid", header.run_uuid)
    entry.create_dataset("segment", data=header.segment, dtype="<i8")
    _write_text(entry, "native_tick", units.format_time(tick))
    if header.origin_ticks is not None:
        _write_text(entry, "origin_ticks", str(header.origin_ticks))
    if header.origin_utc is not None:
        _write_text(entry, "origin_utc", header.origin_utc)
    if header.not_recorded_s:
        entry.create_dataset("not_recorded_s", data=header.not_recorded_s, dtype="<f8")
        entry["not_recorded_s"].attrs["units"] = "s"
    if header.truth:
        note = entry.create_group("truth")
        note.attrs["NX_class"] = "NXnote"
        _write_text(note, "type", "application/json")
        _write_text(note, "data", json.dumps(dict(header.truth), default=_plain))


def write_end(entry: h5py.Group) -> None:
    """Write what is known when a recording is closed."""
    _write_text(entry, "end_time", utc_now())


def read_header(entry: h5py.Group) -> tuple[RecordingHeader, Fraction]:
    """(header, tick in ps) of a recording of this program.

    Raises KeyError, ValueError or TypeError when something is missing or is no such thing.
    """
    ticks = _read_text(entry, "origin_ticks")
    truth = json.loads(_read_text(entry, "truth/data") or "{}")
    if not isinstance(truth, dict):
        raise ValueError("truth is no table of names and values")
    header = RecordingHeader(
        title=_read_text(entry, "title") or "",
        origin_ticks=None if ticks is None else int(ticks),
        origin_utc=_read_text(entry, "origin_utc"),
        run_uuid=_required(entry, "entry_identifier_uuid"),
        segment=int(entry["segment"][()]),
        truth=truth,
        start_time=_read_text(entry, "start_time") or "",
        not_recorded_s=float(entry["not_recorded_s"][()]) if "not_recorded_s" in entry else 0.0,
    )
    tick = _required(entry, "native_tick")
    try:
        return header, units.parse_time(tick)
    except ValueError as error:
        raise ValueError(f"native_tick is {tick!r}; right would be {error}") from None


def _write_text(group: h5py.Group, name: str, text: str) -> None:
    group.create_dataset(name, data=text, dtype=_TEXT)


def _read_text(group: h5py.Group, name: str) -> str | None:
    return text_of(group[name][()]) if name in group else None


def _required(group: h5py.Group, name: str) -> str:
    text = _read_text(group, name)
    if text is None:
        raise KeyError(f"{name} is missing")
    return text


def _plain(value: Any) -> Any:
    """Numbers and arrays of numpy as JSON knows them."""
    return value.tolist()
