"""A column of times and a column of inputs, wherever they are: CSV, HDF5 or a pair of arrays."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import Any, Protocol

import h5py
from numpy.typing import NDArray

from tagstream.errors import InputError, SettingsError
from tagstream.feeds import PIECE_TAGS
from tagstream.feeds.csv_columns import CsvColumns
from tagstream.feeds.hdf5_columns import Hdf5Pair
from tagstream.feeds.npy_columns import NpyPair
from tagstream.feeds.ticks import TickFeed, TickPiece, TickSource
from tagstream.recording.integers import as_inputs, as_int64
from tagstream.settings.feeds import ColumnsFeed

CSV_ENDINGS = (".csv", ".txt", ".tsv")
HDF5_ENDINGS = (".h5", ".hdf5", ".hdf", ".nxs", ".he5")


class ColumnPair(Protocol):
    """Two columns of whole numbers.

    names: what to call them in a message. lengths: of both. `read` gives the values first..last
    - 1 of one of them (0: times, 1: inputs), of a damaged stretch the leading good ones; it
    raises InputError when not even the first can be read.
    """

    names: tuple[str, str]
    lengths: tuple[int, int]

    def read(self, column: int, first: int, last: int) -> NDArray[Any]: ...

    def close(self) -> None: ...


class ArrayColumns:
    """A pair of columns; a source of ticks."""

    def __init__(self, path: Path, pair: type[Hdf5Pair] | type[NpyPair], settings: ColumnsFeed):
        self.path = path
        self._pair, self._names = pair, (settings.time_column, settings.channel_column)
        pair(
            path, *self._names
        ).close()  # what is wrong with the file as a whole is said before a run starts
        self._progress = 0.0

    def pieces(self) -> Iterator[TickPiece]:
        """As `TickSource.pieces`."""
        pair: ColumnPair = self._pair(self.path, *self._names)
        try:
            yield from self._read(pair)
        finally:
            pair.close()
        if pair.lengths[0] != pair.lengths[1]:
            raise InputError(
                f"{pair.names[0]} has {pair.lengths[0]} and {pair.names[1]} {pair.lengths[1]}"
                " values; right would be equal lengths"
            )

    def _read(self, pair: ColumnPair) -> Iterator[TickPiece]:
        count = min(pair.lengths)
        first = 0
        while first < count:
            raw_times = pair.read(0, first, min(first + PIECE_TAGS, count))
            raw_inputs = pair.read(1, first, first + raw_times.size)
            ticks, good = as_int64(raw_times[: raw_inputs.size])
            inputs, good_inputs = as_inputs(raw_inputs)
            last = min(good, good_inputs)
            if last:
                yield TickPiece(ticks[:last], inputs[:last])
            if last < raw_inputs.size:
                column, right = (0, "below 2**63") if last == good else (1, "0 to 65535")
                found = (raw_times, raw_inputs)[column][last]
                raise InputError(
                    f"{pair.names[column]}: value {first + last} is {found}; right would be {right}"
                )
            first += last
            self._progress = first / count

    @property
    def progress(self) -> float:
        """As `TickSource.progress`."""
        return self._progress


def open_columns(settings: ColumnsFeed, slice_ps: int) -> TickFeed:
    """The feed for a [feed] section of kind "columns".

    A folder holds a pair of .npy files; any file that is HDF5 is read as that, whatever its
    name; a name that ends in .csv, .txt or .tsv is delimited text.
    Raises SettingsError for another file, InputError for one that cannot be read.
    """
    return TickFeed(_source(settings), settings, slice_ps)


def _source(settings: ColumnsFeed) -> TickSource:
    path = settings.path
    ending = path.suffix.lower()
    if settings.time_column == settings.channel_column:
        raise SettingsError(
            [f"[feed] channel_column: {settings.channel_column} is the time_column too"]
        )
    if path.is_dir():
        return ArrayColumns(path, NpyPair, settings)
    if ending in HDF5_ENDINGS or (path.is_file() and h5py.is_hdf5(path)):
        return ArrayColumns(path, Hdf5Pair, settings)
    if ending in CSV_ENDINGS:
        return CsvColumns(settings)
    raise SettingsError(
        [
            f"[feed] path: {path} is neither a folder of two .npy files nor a file that ends in"
            f" {', '.join(CSV_ENDINGS + HDF5_ENDINGS)}"
        ]
    )
