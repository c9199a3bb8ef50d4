"""A folder with two .npy files, one of times and one of inputs."""

from __future__ import annotations

from dataclasses import dataclass
from io import BufferedReader
from pathlib import Path
from tokenize import TokenError
from typing import Any

import numpy as np
from numpy.lib import format as npy
from numpy.typing import NDArray

from tagstream.errors import InputError
from tagstream.recording.opening import require_content


class NpyPair:
    """Two 1-D arrays of integers, read piece by piece: they may be larger than the memory.

    Raises InputError when a file is missing or no .npy file, or its array is of another type or
    shape. Of a file that is cut off, what is there can be read.
    """

    def __init__(self, path: Path, time_name: str, channel_name: str) -> None:
        self._files = [_open(path / name) for name in (time_name, channel_name)]
        self.names = str(path / time_name), str(path / channel_name)
        self.lengths = self._files[0].length, self._files[1].length

    def read(self, column: int, first: int, last: int) -> NDArray[Any]:
        """As `ColumnPair.read`."""
        array = self._files[column]
        size = array.dtype.itemsize
        array.file.seek(array.begin + first * size)
        data = array.file.read((last - first) * size)
        values = np.frombuffer(data, array.dtype, len(data) // size)
        if values.size == 0:
            raise InputError(
                f"{self.names[column]}: is cut off: {first} of {array.length} values are there"
            )
        return values.astype(array.dtype.newbyteorder("="))

    def close(self) -> None:
        """Close the files."""
        for array in self._files:
            array.file.close()


@dataclass(frozen=True, slots=True)
class _Array:
    file: BufferedReader
    dtype: np.dtype[Any]
    length: int
    begin: int  # of the first value, in bytes


def _open(path: Path) -> _Array:
    require_content(path)
    file = path.open("rb")
    try:
        shape, _, dtype = _header(file)
    except (ValueError, EOFError, SyntaxError, TypeError, TokenError) as error:
        file.close()
        text = " ".join(str(error).split())[:200]
        raise InputError(f"{path}: is no .npy file: {text}") from None
    problem = None
    if len(shape) != 1:
        problem = f"has shape {shape}; right would be one dimension"
    elif dtype.kind not in "iu":
        problem = f"holds {dtype}; right would be whole numbers (times are counts of `tick`)"
    if problem is not None:
        file.close()
        raise InputError(f"{path}: {problem}")
    return _Array(file, dtype, shape[0], file.tell())


def _header(file: BufferedReader) -> tuple[tuple[int, ...], bool, np.dtype[Any]]:
    version = npy.read_magic(file)
    readers = {(1, 0): npy.read_array_header_1_0, (2, 0): npy.read_array_header_2_0}
    if version not in readers:
        raise ValueError(f"version {version}; right would be 1.0 or 2.0")
    return readers[version](file)
