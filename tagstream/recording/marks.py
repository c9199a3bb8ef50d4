"""Marks: keys and values that were set during the run, as one table and as NeXus logs."""

from __future__ import annotations

import math
from collections import defaultdict
from collections.abc import Sequence
from typing import Any

import h5py
import numpy as np
from numpy.typing import NDArray

from tagstream.marks import key_problem, value_problem
from tagstream.recording.appending import AppendedColumn
from tagstream.recording.layout import MARK_DTYPE, Mark


def append_mark(table: AppendedColumn, mark: Mark) -> None:
    """Append one row. Raises ValueError for a key or text that does not fit."""
    if problem := key_problem(mark.key) or value_problem(mark.key, mark.value):
        raise ValueError(problem)
    table.append(mark_rows([mark]))


def mark_rows(marks: Sequence[Mark]) -> NDArray[Any]:
    """Marks as rows of the table."""
    return np.array([_row(mark) for mark in marks], MARK_DTYPE)


def _row(mark: Mark) -> tuple[int, bytes, float, bytes]:
    if isinstance(mark.value, str):
        return mark.time_ps, mark.key.encode(), math.nan, mark.value.encode()
    return mark.time_ps, mark.key.encode(), float(mark.value), b""


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
