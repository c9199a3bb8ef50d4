"""A dataset that grows at its end."""

from __future__ import annotations

from typing import Any

import h5py
import numpy as np
from numpy.typing import ArrayLike, DTypeLike

from tagstream.errors import ResultsError


class AppendedColumn:
    """A 1-D dataset to which values are appended; they reach the file in whole chunks.

    Values that fill no chunk wait in memory until `flush`. `size` counts them too.
    """

    def __init__(self, group: h5py.Group, name: str, dtype: DTypeLike, chunk: int) -> None:
        self._dataset = group.create_dataset(
            name, (0,), maxshape=(None,), chunks=(chunk,), dtype=dtype
        )
        self._file_name = group.file.filename
        self._waiting = np.empty(chunk, dtype)
        self._filled = 0
        self._written = 0

    @property
    def size(self) -> int:
        return self._written + self._filled

    @property
    def attrs(self) -> Any:
        """The attributes of the dataset."""
        return self._dataset.attrs

    def append(self, values: ArrayLike) -> None:
        """Append n values of the type of the dataset."""
        values = np.atleast_1d(values)
        while values.size:
            room = self._waiting.size - self._written % self._waiting.size - self._filled
            part, values = values[:room], values[room:]
            self._waiting[self._filled : self._filled + part.size] = part
            self._filled += part.size
            if part.size == room:
                self.flush()

    def flush(self) -> None:
        """Write what waits. Raises ResultsError when that fails."""
        if self._filled == 0:
            return
        end = self._written + self._filled
        try:
            self._dataset.resize((end,))
            self._dataset[self._written : end] = self._waiting[: self._filled]
        except (OSError, RuntimeError) as error:
            raise ResultsError(f"{self._file_name}: cannot be written: {error}") from None
        self._written, self._filled = end, 0
