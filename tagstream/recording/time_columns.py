"""Columns of times as any NeXus writer stores them, to int64 ps."""

from __future__ import annotations

import math
from fractions import Fraction
from typing import Any

import h5py
import numpy as np
from numpy.typing import NDArray

from tagstream import units
from tagstream.errors import InputError
from tagstream.recording.integers import as_int64
from tagstream.recording.opening import text_of

_NAMES = {
    "picosecond": "ps",
    "nanosecond": "ns",
    "microsecond": "us",
    "millisecond": "ms",
    "second": "s",
    "sec": "s",
    "minute": "min",
    "hour": "h",
    "hr": "h",
    "day": "d",
}


def unit_of(dataset: h5py.Dataset, where: str) -> Fraction:
    """The unit of a column in ps. Raises InputError when it is missing or no time."""
    if "units" not in dataset.attrs:
        raise InputError(f'{where}: has no units; right would be an attribute such as "ns"')
    text = text_of(dataset.attrs["units"])
    name = text.strip()
    singular = name[:-1] if name.endswith("s") and name[:-1] in _NAMES else name
    try:
        return units.parse_time(f"1 {_NAMES.get(singular, name)}")
    except ValueError:
        raise InputError(
            f"{where}: units are {text!r}; right would be a time such as ps, ns, us, ms, s"
        ) from None


class TimeColumn:
    """Converts the values of one column.

    unit: in ps. whole: the stored type is an integer; floats are rounded half up to ps.
    zero_ps: what is subtracted, a multiple of a second, so that times since 1970 fit too.
    """

    def __init__(self, dataset: h5py.Dataset, where: str, *, from_first: bool = False) -> None:
        self.unit = unit_of(dataset, where)
        self.whole = dataset.dtype.kind in "iu"
        first = dataset[0].item() if from_first and dataset.size else 0
        near = math.isfinite(first) and abs(first) < 2**63
        self._scale = units.TickScale(self.unit, math.floor(first) if near else 0, units.PS_PER_S)

    @property
    def zero_ps(self) -> int:
        return self._scale.origin_ps

    def to_ps(self, values: NDArray[Any]) -> tuple[NDArray[np.int64], int]:
        """(int64 ps after `zero_ps`, n; number of leading values that are times)."""
        if self.whole:
            ticks, good = as_int64(values)
            return self._scale.to_ps(ticks), good
        finite = np.isfinite(values)
        good = int(values.size if finite.all() else np.argmin(finite))
        return self._floats_to_ps(np.where(finite, values, 0).astype(np.float64)), good

    def _floats_to_ps(self, values: NDArray[np.float64]) -> NDArray[np.int64]:
        """Whole units exactly, the fraction of a unit rounded half up to ps."""
        whole = np.clip(np.floor(values), -(2.0**62), 2.0**62)
        times = self._scale.to_ps(whole.astype(np.int64))
        rest = np.floor((values - np.floor(values)) * float(self.unit) + 0.5).astype(np.int64)
        inside = np.abs(times) <= units.TIME_LIMIT_PS
        times[inside] += rest[inside]
        return times
