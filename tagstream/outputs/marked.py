"""What marks leave in latest.h5: tallies apart for each value, and the marks themselves."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from math import nan

import h5py
import numpy as np

from tagstream.marks import value_text
from tagstream.outputs import SplitView
from tagstream.outputs import layout as at
from tagstream.outputs.histogram import write_histogram
from tagstream.outputs.nodes import make_group, put, put_texts
from tagstream.recording.layout import MARK_TABLE, MARKS, Mark
from tagstream.recording.marks import mark_rows, write_logs


def write_splits(entry: h5py.Group, splits: Mapping[str, SplitView]) -> None:
    """/run/<tally>/by_<key> for each tally that is split and has a first slice."""
    for tally, split in splits.items():
        if tally in entry:
            parts = make_group(entry[tally], at.split_group(split.key), "NXcollection")
            _write_split(parts, entry[tally], tally, split)


def _write_split(parts: h5py.Group, first: h5py.Group, tally: str, split: SplitView) -> None:
    parts.attrs["key"] = split.key
    parts.attrs["now"] = split.now
    values = list(split.parts)
    put_texts(parts, "value", [value_text(value) for value in values])
    numbers = [nan if isinstance(value, str) else value for value in values]
    put(parts, "number", np.array(numbers, np.float64))
    for number, (value, arrays) in enumerate(split.parts.items(), 1):
        group = make_group(parts, str(number), "NXdata")
        write_histogram(group, first, arrays)
        group.attrs["value"] = value
        group.attrs["title"] = f"{tally} at {split.key} = {value_text(value)}"


def write_marks(entry: h5py.Group, marks: Sequence[Mark], start: str | None) -> None:
    """/run/marks and /run/mark_table, as in a recording. start: ISO 8601, of stream time zero."""
    write_logs(make_group(entry, MARKS, "NXcollection"), list(marks), start)
    put(entry, MARK_TABLE, mark_rows(marks))
