"""An HDF5 file opened for reading, or one sentence about why that cannot be."""

from __future__ import annotations

import re
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import h5py
import numpy as np
from numpy.typing import NDArray

from tagstream.errors import InputError

_CUT_OFF = re.compile(r"truncated file: eof = (\d+).*stored_eof = (\d+)")


def open_hdf5(path: Path) -> h5py.File:
    """`path` open for reading, without a chunk cache: everything is read once, in order.

    Raises InputError when there is no such file, or it is empty, no HDF5, cut off, or not closed.
    """
    require_content(path)
    try:
        return h5py.File(path, "r", rdcc_nbytes=0)
    except OSError as error:
        raise InputError(f"{path}: {_reason(str(error))}") from None


@contextmanager
def reporting_damage(path: Path) -> Iterator[None]:
    """Turn what h5py raises wherever it meets broken structure, of many kinds, into InputError."""
    try:
        yield
    except (OSError, RuntimeError, KeyError, TypeError, ValueError) as error:
        text = " ".join(str(error).split())
        raise InputError(f"{path}: is damaged, or no file of this kind: {text}") from error


def require_content(path: Path) -> int:
    """The size of a file in bytes. Raises InputError unless it is a readable, non-empty file."""
    try:
        size = path.stat().st_size
    except FileNotFoundError:
        raise InputError(f"{path}: no such file") from None
    except OSError as error:
        raise InputError(f"{path}: cannot be read: {error.strerror}") from None
    if path.is_dir():
        raise InputError(f"{path}: is a folder; right would be a file")
    if not path.is_file():
        raise InputError(f"{path}: is no regular file")
    if size == 0:
        raise InputError(f"{path}: is empty (0 bytes)")
    return size


def _reason(text: str) -> str:
    """What a message of the HDF5 library means for a person."""
    if match := _CUT_OFF.search(text):
        found, expected = match.groups()
        return f"is cut off: {found} of {expected} bytes are there"
    if "signature not found" in text:
        return "is no HDF5 file"
    if "already open for write" in text or "unable to lock file" in text:
        return "was not closed: its writer still runs, or was killed"
    if "Permission denied" in text:
        return "cannot be read: permission denied"
    return f"cannot be opened as HDF5: {text}"


def nx_class(node: h5py.Group) -> str:
    """The NeXus class of a group, or an empty text."""
    return text_of(node.attrs.get("NX_class", ""))


def text_of(value: object) -> str:
    """An attribute or dataset as text, however its writer stored it."""
    if isinstance(value, np.ndarray) and value.size == 1:
        value = value.reshape(-1)[0]
    if isinstance(value, bytes):
        return value.decode("utf-8", "replace")
    return str(value)


def children(group: h5py.Group) -> Iterator[tuple[str, h5py.Group | h5py.Dataset]]:
    """The members of a group that can be opened; a broken link is not one."""
    for name in group:
        node = group.get(name)
        if node is not None:
            yield name, node


def read_values(dataset: h5py.Dataset, first: int, last: int) -> NDArray[Any]:
    """Values first..last - 1 of a 1-D dataset, in the byte order of this machine.

    Raises InputError when the file is damaged there.
    """
    last = min(last, dataset.shape[0])
    values = np.empty(last - first, dataset.dtype.newbyteorder("="))
    try:
        if values.size:
            dataset.read_direct(values, np.s_[first:last])
    except (OSError, RuntimeError) as error:
        raise InputError(
            f"{dataset.file.filename}: {dataset.name}: values {first} to {last - 1} cannot be"
            f" read: {error}"
        ) from None
    return values


def read_leading(dataset: h5py.Dataset, first: int, last: int) -> NDArray[Any]:
    """As `read_values`, but of a damaged stretch as many leading values as can be read.

    Raises InputError when not even the first can be.
    """
    while True:
        try:
            return read_values(dataset, first, last)
        except InputError:
            if last - first <= 1:
                raise
            last = first + (last - first) // 2


def require_column(group: h5py.Group, name: str, kinds: str, where: str) -> h5py.Dataset:
    """The 1-D dataset `name` of numbers; kinds: "iu" for integers, "iuf" for any.

    Raises InputError that names what is there instead.
    """
    node = group.get(name)
    if not isinstance(node, h5py.Dataset):
        names = ", ".join(found for found, _ in children(group)) or "nothing"
        raise InputError(f"{where}: has no dataset {name}; found {names}")
    right = "whole numbers" if kinds == "iu" else "numbers"
    if node.shape is None or len(node.shape) != 1:
        raise InputError(f"{where}/{name}: has shape {node.shape}; right would be one dimension")
    if node.dtype.kind not in kinds:
        raise InputError(f"{where}/{name}: holds {node.dtype}; right would be {right}")
    return node
