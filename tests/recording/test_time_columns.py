"""Units and number types of other writers."""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction
from pathlib import Path

import h5py
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tagstream.errors import InputError
from tagstream.recording.time_columns import TimeColumn, unit_of
from tagstream.units import BEYOND_LIMIT_PS, TIME_LIMIT_PS


@pytest.fixture
def file(tmp_path: Path) -> Iterator[h5py.File]:
    with h5py.File(tmp_path / "units.h5", "w") as opened:
        yield opened


def column(file: h5py.File, first: float, dtype: str, unit: object = "ns") -> h5py.Dataset:
    if "times" in file:
        del file["times"]
    dataset = file.create_dataset("times", data=[first], dtype=dtype)
    if unit is not None:
        dataset.attrs["units"] = unit
    return dataset


@pytest.mark.parametrize(
    ("text", "unit_ps"),
    [
        ("ps", 1),
        ("ns", 1000),
        ("nanoseconds", 1000),
        (b"us", 10**6),
        ("µs", 10**6),
        ("microsecond", 10**6),
        ("ms", 10**9),
        (" second ", 10**12),
        ("s", 10**12),
        ("hr", 3600 * 10**12),
    ],
)
def test_units_are_times(file: h5py.File, text: str | bytes, unit_ps: int) -> None:
    assert unit_of(column(file, 0, "i8", text), "x") == Fraction(unit_ps)


@pytest.mark.parametrize(
    ("unit", "words"), [("parsec", "units are 'parsec'"), (None, "has no units")]
)
def test_other_units_are_refused(file: h5py.File, unit: str | None, words: str) -> None:
    with pytest.raises(InputError, match=f"a.h5/event_time_zero: {words}.*ns"):
        unit_of(column(file, 0, "i8", unit), "a.h5/event_time_zero")


@given(first=st.integers(-(2**63), 2**63 - 1), others=st.lists(st.integers(-(2**63), 2**63 - 1)))
def test_integers_are_exact_or_beyond_the_limit(
    tmp_path_factory: pytest.TempPathFactory, first: int, others: list[int]
) -> None:
    with h5py.File(tmp_path_factory.mktemp("units") / "a.h5", "w") as file:
        times = TimeColumn(column(file, first, "i8", "ns"), "x", from_first=True)
    ps, good = times.to_ps(np.array([first, *others], np.int64))
    assert good == 1 + len(others)
    assert times.zero_ps % 10**12 == 0
    for got, ticks in zip(ps.tolist(), [first, *others], strict=True):
        exact = ticks * 1000 - times.zero_ps
        if abs(exact) < TIME_LIMIT_PS - 10**12:  # within a second of it, either may be said
            assert got == exact
        elif abs(exact) > TIME_LIMIT_PS:
            assert got == (BEYOND_LIMIT_PS if exact > 0 else -BEYOND_LIMIT_PS)


@given(st.lists(st.floats(-(2.0**40), 2.0**40), min_size=1))
def test_floats_are_rounded_half_up_to_ps(
    tmp_path_factory: pytest.TempPathFactory, values: list[float]
) -> None:
    """float64 fractions of a microsecond resolve far less than a ps: half a ps off at most."""
    with h5py.File(tmp_path_factory.mktemp("units") / "a.h5", "w") as file:
        times = TimeColumn(column(file, values[0], "f8", "us"), "x", from_first=True)
    ps, good = times.to_ps(np.array(values))
    assert good == len(values)
    for got, value in zip(ps.tolist(), values, strict=True):
        exact = Fraction(value) * 10**6 - times.zero_ps
        if abs(exact) <= TIME_LIMIT_PS:
            assert abs(got - exact) <= Fraction(1, 2) + Fraction(1, 10**6)


@pytest.mark.parametrize(
    ("values", "good"),
    [
        (np.array([1.0, np.nan, 2.0]), 1),
        (np.array([np.inf]), 0),
        (np.array([1, 2**63], np.uint64), 1),
        (np.array([1, 2**63 - 1], np.uint64), 2),
    ],
)
def test_what_is_no_time_ends_the_good_values(
    file: h5py.File, values: np.ndarray[tuple[int], np.dtype[np.float64]], good: int
) -> None:
    times = TimeColumn(column(file, 0, values.dtype.str), "x")
    assert times.to_ps(values)[1] == good
