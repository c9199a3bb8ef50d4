"""Two datasets of an HDF5 file, by their paths."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import h5py
from numpy.typing import NDArray

from tagstream.errors import InputError
from tagstream.recording.opening import children, open_hdf5, read_leading, reporting_damage


class Hdf5Pair:
    """Two 1-D datasets of integers, of any length, chunking and compression.

    Raises InputError when one is missing, or is of another type or shape.
    """

    def __init__(self, path: Path, time_path: str, channel_path: str) -> None:
        self._file = open_hdf5(path)
        try:
            with reporting_damage(path):
                self._datasets = [self._dataset(path, name) for name in (time_path, channel_path)]
        except InputError:
            self._file.close()
            raise
        self.names = f"{path}: {time_path}", f"{path}: {channel_path}"
        self.lengths = self._datasets[0].shape[0], self._datasets[1].shape[0]

    def _dataset(self, path: Path, name: str) -> h5py.Dataset:
        node = self._file.get(name)
        if not isinstance(node, h5py.Dataset):
            what = "no dataset" if node is None else "a group, no dataset,"
            raise InputError(f"{path}: has {what} {name}; found {self._nearby(name)}")
        if node.shape is None or len(node.shape) != 1:
            raise InputError(f"{path}: {name} has shape {node.shape}; right would be one dimension")
        if node.dtype.kind not in "iu":
            raise InputError(
                f"{path}: {name} holds {node.dtype}; right would be whole numbers (times are"
                " counts of `tick`)"
            )
        return node

    def _nearby(self, name: str) -> str:
        """What there is in the deepest group on the way to `name`."""
        group: h5py.Group = self._file
        for part in name.strip("/").split("/"):
            below = group.get(part)
            if not isinstance(below, h5py.Group):
                break
            group = below
        names = [f"{group.name.rstrip('/')}/{found}" for found, _ in children(group)]
        return ", ".join(names[:10]) + (" ..." if len(names) > 10 else "") or "nothing"

    def read(self, column: int, first: int, last: int) -> NDArray[Any]:
        """As `ColumnPair.read`."""
        return read_leading(self._datasets[column], first, last)

    def close(self) -> None:
        """Close the file."""
        self._file.close()
