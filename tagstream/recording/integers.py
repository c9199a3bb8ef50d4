"""Integers of any type, as other programs store them, to the types used here.

Each function converts as many values as are good and says how many that are, so that what
stands before a bad value is not lost.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

LARGEST_INPUT = 65535


def as_int64(values: NDArray[Any]) -> tuple[NDArray[np.int64], int]:
    """(int64, n; number of leading values that fit). values: n, any integer type."""
    if values.dtype.kind == "u" and values.dtype.itemsize == 8:
        good = _leading(values <= np.uint64(2**63 - 1))
        return values.astype(np.int64), good
    return values.astype(np.int64, copy=False), int(values.size)


def as_inputs(values: NDArray[Any]) -> tuple[NDArray[Any], int]:
    """(uint8 if `values` are, else uint16, n; number of leading values within 0..65535)."""
    if values.dtype == np.uint8 or values.dtype == np.uint16:
        return values, int(values.size)
    inside = (values >= 0) & (values <= LARGEST_INPUT)
    return values.astype(np.uint16), _leading(inside)


def _leading(good: NDArray[np.bool_]) -> int:
    """How many values are good before the first that is not."""
    return int(good.size if good.all() else np.argmin(good))
