"""Marks: keys and values that were set during the run, as one table and as NeXus logs."""

from __future__ import annotations

import math
from collections import defaultdict

import h5py
import numpy as np

from tagstream.recording.appending import AppendedColumn
from tagstream.recording.layout import MARK_DTYPE, Mark


def append_mark(table: AppendedColumn, mark: Mark) -> None:
    """Append one row. Raises ValueError for a key or text that does not fit."""
    key = mark.key.encode()
    text = mark.value.encode() if isinstance(mark.value, str) else b""
    if not 0 < len(key) <= 32 or "/" in mark.key or key == b".":
        raise ValueError(f"key {mark.key!r}: right would be 1 to 32 bytes without /")
    if len(text) > 64:
        raise ValueError(f"value of {mark.key}: {len(text)} bytes; right would be at most 64")
    number = math.nan if isinstance(mark.value, str) else float(mark.value)
    table.append(np.array([(mark.time_ps, key, number, text)], MARK_DTYPE))


def read_marks(table: h5py.Dataset) -> list[Mark]:
    """All marks in the order in which they were set."""
    return [
        Mark(int(time), key.decode(), text.decode() if math.isnan(number) else float(number))
        for time, key, number, text in table[()].tolist()
    ]


def write_logs(logs: h5py.Group, marks: list[Mark], start: str | None) -> None:
    """One log per key: NXlog where all values are numbers, else NXtextlog. start: ISO 8601."""
    by_key: dict[str, list[Mark]] = defaultdict(list)
    for mark in marks:
        by_key[mark.key].append(mark)
    for key, entries in by_key.items():
        log = logs.create_group(key)
        times = log.create_dataset("time", data=[m.time_ps for m in entries], dtype="<i8")
        times.attrs["units"] = "ps"
        if start is not None:
            times.attrs["start"] = start
        if any(isinstance(mark.value, str) for mark in entries):
            log.attrs["NX_class"] = "NXtextlog"
            texts = [str(mark.value) for mark in entries]
            log.create_dataset("value", data=texts, dtype=h5py.string_dtype("utf-8"))
        else:
            log.attrs["NX_class"] = "NXlog"
            log.create_dataset("value", data=[mark.value for mark in entries], dtype="<f8")
