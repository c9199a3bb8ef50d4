"""Integers of any type to those used here."""

from __future__ import annotations

import numpy as np
import pytest

from tagstream.recording.integers import as_inputs, as_int64


@pytest.mark.parametrize("dtype", ["i1", "u1", "i2", "u4", "i8", "u8"])
def test_times_of_any_type_become_int64(dtype: str) -> None:
    values, good = as_int64(np.array([1, 100], dtype))
    assert (values.dtype, values.tolist(), good) == (np.dtype(np.int64), [1, 100], 2)


def test_an_unsigned_count_past_int64_ends_the_good_values() -> None:
    assert as_int64(np.array([5, 2**63 - 1, 2**63, 5], np.uint64))[1] == 2


@pytest.mark.parametrize(
    ("values", "dtype", "good"),
    [
        (np.array([0, 255], np.uint8), np.uint8, 2),
        (np.array([0, 65535], np.uint16), np.uint16, 2),
        (np.array([0, 65535, 65536, 1], np.int64), np.uint16, 2),
        (np.array([3, -1], np.int8), np.uint16, 1),
        (np.array([2**64 - 1], np.uint64), np.uint16, 0),
        (np.array([], np.int64), np.uint16, 0),
    ],
)
def test_inputs_are_0_to_65535(
    values: np.ndarray[tuple[int], np.dtype[np.int64]], dtype: type, good: int
) -> None:
    inputs, count = as_inputs(values)
    assert (inputs.dtype, count) == (np.dtype(dtype), good)
    assert inputs[:good].tolist() == values[:good].tolist()
