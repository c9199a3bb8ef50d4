"""Two columns of a CSV file, by the names in its first line.

The delimiter is the comma, semicolon or tab with which the first line has these names. Reading
stops at the first broken line, which may be the last thing a killed program wrote; what follows
it is not trusted.
"""

from __future__ import annotations

import csv
from collections.abc import Iterator
from io import BufferedReader

import numpy as np
from numpy.typing import NDArray

from tagstream.errors import InputError
from tagstream.feeds import PIECE_TAGS
from tagstream.feeds.kernels import BROKEN, LINES, POSITION, RESULT_SIZE, fill_rows
from tagstream.feeds.ticks import TickPiece
from tagstream.recording.opening import require_content
from tagstream.settings.feeds import ColumnsFeed as ColumnsSettings

READ_BYTES = 1 << 22
LONGEST_LINE = 1 << 16
DELIMITERS = ",;\t"
_BOM = b"\xef\xbb\xbf"


class CsvColumns:
    """A CSV file; a source of ticks."""

    def __init__(self, settings: ColumnsSettings) -> None:
        self.path = settings.path
        self._settings = settings
        self._size = require_content(self.path)
        self._used = 0
        self._line = 0  # lines used so far

    def pieces(self) -> Iterator[TickPiece]:
        """As `TickSource.pieces`."""
        with self.path.open("rb") as file:
            shape = self._shape(self._header(file))
            for text in self._texts(file):
                yield from self._rows(text, shape)

    @property
    def progress(self) -> float:
        """As `TickSource.progress`."""
        return min(self._used / self._size, 1.0)

    def _header(self, file: BufferedReader) -> str:
        line = file.readline(LONGEST_LINE)
        self._used, self._line = len(line), 1
        if len(line) == LONGEST_LINE:
            raise InputError(f"{self.path}: the first line is no line of column names")
        try:
            text = line.removeprefix(_BOM).decode("utf-8")
        except UnicodeDecodeError as error:
            raise InputError(
                f"{self.path}: byte {error.start} is no UTF-8; right would be text whose first"
                " line names the columns"
            ) from None
        return text.rstrip("\r\n")

    def _shape(self, header: str) -> NDArray[np.int64]:
        """What `fill_rows` needs to know. Raises InputError unless both columns are there."""
        wanted = self._settings.time_column, self._settings.channel_column
        for delimiter in DELIMITERS:
            names = _names(header, delimiter)
            if all(names.count(name) == 1 for name in wanted):
                columns = [names.index(name) for name in wanted]
                return np.array([ord(delimiter), len(names), *columns], np.int64)
        found = header.replace("\t", " ")
        raise InputError(
            f"{self.path}: the first line does not name {wanted[0]} and {wanted[1]} once each;"
            f" found {found[:200] if found.isprintable() else repr(found[:100])}"
        )

    def _texts(self, file: BufferedReader) -> Iterator[bytes]:
        """The rest of the file in pieces that end with a line."""
        rest = b""
        while data := file.read(READ_BYTES):
            end = data.rfind(b"\n") + 1
            if end:
                yield rest + data[:end]
                rest = data[end:]
            else:
                rest += data
            if len(rest) > LONGEST_LINE:
                raise InputError(
                    f"{self.path}, line {self._line + 1}: is longer than {LONGEST_LINE} bytes;"
                    " right would be lines of text"
                )
        if rest:
            yield rest + b"\n"

    def _rows(self, text: bytes, shape: NDArray[np.int64]) -> Iterator[TickPiece]:
        raw = np.frombuffer(text, np.uint8)
        result = np.zeros(RESULT_SIZE, np.int64)
        while raw.size:
            ticks, inputs = np.empty(PIECE_TAGS, np.int64), np.empty(PIECE_TAGS, np.uint16)
            rows = fill_rows(raw, shape, ticks, inputs, result)
            used = int(result[POSITION])
            self._used, self._line = self._used + used, self._line + int(result[LINES])
            raw = raw[used:]
            if rows:
                yield TickPiece(ticks[:rows], inputs[:rows])
            if result[BROKEN]:
                raise InputError(self._broken(raw.tobytes(), shape))

    def _broken(self, text: bytes, shape: NDArray[np.int64]) -> str:
        line = text.split(b"\n", 1)[0].rstrip(b"\r")
        found = line[:60].decode("utf-8", "replace") + ("..." if len(line) > 60 else "")
        return (
            f"{self.path}, line {self._line + 1}: found {found!r}; right would be {shape[1]}"
            f" columns with whole numbers in {self._settings.time_column} and, from 0 to 65535, in"
            f" {self._settings.channel_column}"
        )


def _names(header: str, delimiter: str) -> list[str]:
    try:
        return [name.strip() for name in next(csv.reader([header], delimiter=delimiter), [])]
    except csv.Error:
        return []
