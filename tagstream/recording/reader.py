"""Reads a recording, or any NXevent_data group, in bounded memory.

Of a file that another program wrote nothing is vouched for, and its times count from the second
in which its first group begins, so that times since 1970 fit too.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from fractions import Fraction
from pathlib import Path
from types import TracebackType

import h5py

from tagstream.errors import InputError
from tagstream.recording.coverage import Row, read_rows
from tagstream.recording.event_data import EventData
from tagstream.recording.header import RecordingHeader, moved_utc, read_header
from tagstream.recording.layout import (
    CHUNK_EVENTS,
    COVERAGE,
    LAYOUT,
    MARK_TABLE,
    Mark,
    RecordedPiece,
)
from tagstream.recording.marks import read_marks
from tagstream.recording.opening import nx_class, open_hdf5, reporting_damage, text_of


class RecordingReader:
    """An open recording; close it, or use it as a context manager.

    group: path of the NXevent_data group; without it the first one in the file.
    header, tick (ps): of a recording as written; of another file as far as they are known.
    count: tags in the file. foreign: another program wrote it.
    Raises InputError when the file or the group cannot be read.
    """

    def __init__(self, path: Path | str, group: str | None = None) -> None:
        self.path = Path(path)
        self._file = open_hdf5(self.path)
        try:
            with reporting_damage(self.path):
                self._open(group)
        except InputError:
            self._file.close()
            raise

    def _open(self, group: str | None) -> None:
        events = _find_events(self._file, group)
        self._entry = events.parent
        coverage = self._entry.get(COVERAGE)
        self.foreign = not (isinstance(coverage, h5py.Group) and "layout" in coverage.attrs)
        self._coverage = None if self.foreign else coverage
        self._events = EventData(events, from_first=self.foreign)
        self.count = self._events.count
        self.header, self.tick = self._foreign_header() if self.foreign else self._own_header()

    def _own_header(self) -> tuple[RecordingHeader, Fraction]:
        layout = int(self._entry[COVERAGE].attrs["layout"])
        if layout != LAYOUT:
            raise InputError(f"{self.path}: layout {layout}; this version reads layout {LAYOUT}")
        try:
            return read_header(self._entry)
        except (KeyError, ValueError, TypeError) as error:
            raise InputError(
                f"{self.path}: {self._entry.name}: header is broken: {error}"
            ) from None

    def _foreign_header(self) -> tuple[RecordingHeader, Fraction]:
        tick, zero_ps, utc = self._events.tick, self._events.zero_ps, self._events.utc
        return RecordingHeader(
            title=self.path.name,
            origin_ticks=math.ceil(zero_ps / tick),
            origin_utc=None if utc is None else moved_utc(text_of(utc), zero_ps),
        ), tick

    def pieces(self) -> Iterator[RecordedPiece]:
        """The tags in arrival order, with their intervals, at most 2**18 tags in a piece.

        Raises InputError at the first broken place, after what was good before it.
        """
        with reporting_damage(self.path):
            for row, end in self._rows():
                yield from self._pieces_of(row, end)

    def _rows(self) -> Iterator[tuple[Row, int]]:
        if self._coverage is None:
            everything = Row(None, None, True, False, False, first_event=0)
            return iter([(everything, self._events.longest)])
        return read_rows(self._coverage, self._events.longest)

    def _pieces_of(self, row: Row, end: int) -> Iterator[RecordedPiece]:
        first, gap, vouched = row.first_event, row.gap_before, row.begin_ps is not None
        while True:
            times, inputs = self._events.take(first, min(end, first + CHUNK_EVENTS))
            first += times.size
            complete = not vouched or (first >= end and row.complete)
            yield RecordedPiece(times, inputs, row.begin_ps, row.end_ps, complete, gap, row.lossy)
            if first >= end:
                return
            gap = False

    def marks(self) -> list[Mark]:
        """The marks set during the run; none in a file of another program."""
        with reporting_damage(self.path):
            return read_marks(self._entry[MARK_TABLE]) if MARK_TABLE in self._entry else []

    def close(self) -> None:
        """Close the file."""
        self._file.close()

    def __enter__(self) -> RecordingReader:
        return self

    def __exit__(
        self,
        kind: type[BaseException] | None,
        error: BaseException | None,
        trace: TracebackType | None,
    ) -> None:
        self.close()


def _find_events(file: h5py.File, path: str | None) -> h5py.Group:
    """The group at `path`, or the first NXevent_data group. Raises InputError."""
    if path is None:
        found = file.visititems(_events_or_none)
        if found is None:
            raise InputError(
                f"{file.filename}: has no NXevent_data group; right would be a recording, or"
                " `group` with the path of such a group"
            )
        return found
    node = file.get(path)
    if not isinstance(node, h5py.Group):
        names: list[str] = []
        file.visititems(lambda name, found: names.append(f"/{name}") if _is_events(found) else None)
        raise InputError(
            f"{file.filename}: has no group {path}; NXevent_data groups:"
            f" {', '.join(names) or 'none'}"
        )
    return node


def _is_events(node: h5py.Group | h5py.Dataset) -> bool:
    return isinstance(node, h5py.Group) and nx_class(node) == "NXevent_data"


def _events_or_none(name: str, node: h5py.Group | h5py.Dataset) -> h5py.Group | None:
    return node if _is_events(node) else None
