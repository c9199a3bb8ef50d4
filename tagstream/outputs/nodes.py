"""Groups and datasets of results, with the unit and label that `layout` knows for their names."""

from __future__ import annotations

from typing import Any

import h5py
import numpy as np

from tagstream.outputs import layout as at

TEXT = h5py.string_dtype("utf-8")


def make_group(parent: h5py.Group, name: str, nx_class: str) -> h5py.Group:
    """A group of a NeXus class."""
    group = parent.create_group(name)
    group.attrs["NX_class"] = nx_class
    return group


def put(group: h5py.Group, name: str, value: Any) -> None:
    """A dataset with the unit and the label that `layout` knows for its name."""
    if isinstance(value, str):
        group.create_dataset(name, data=value, dtype=TEXT)
        return
    array = np.asarray(value)
    dataset = group.create_dataset(name, data=array, dtype=array.dtype)
    if unit := at.unit_of(name):
        dataset.attrs["units"] = unit
    if name in at.LONG_NAMES:
        dataset.attrs["long_name"] = at.LONG_NAMES[name]


def put_texts(group: h5py.Group, name: str, texts: list[str]) -> None:
    """A dataset of texts."""
    group.create_dataset(name, data=np.array(texts, dtype=object), dtype=TEXT)
