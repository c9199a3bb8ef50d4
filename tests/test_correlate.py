"""`tagstream.cross_correlation`: equal to its twin and to a general library; clear on bad input."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import tagstream
from tests import naive
from tests.strategies import sorted_times


@given(sorted_times(), sorted_times(), st.integers(1, 30), st.integers(1, 20))
def test_equals_its_twin(starts: list[int], stops: list[int], bin_ps: int, bins: int) -> None:
    lags, counts = tagstream.cross_correlation(starts, stops, bins * bin_ps, bin_ps)
    assert list(counts) == naive.histogram(starts, stops, bin_ps, bins)
    assert list(lags) == [k * bin_ps for k in range(-bins, bins + 1)]
    assert lags.dtype == counts.dtype == np.int64


@given(sorted_times(), st.integers(1, 30))
def test_one_array_twice_is_one_channel(times: list[int], bin_ps: int) -> None:
    array = np.array(times, np.int64)
    _, counts = tagstream.cross_correlation(array, array, 5 * bin_ps, bin_ps)
    assert list(counts) == naive.histogram_of_one(times, bin_ps, 5)


@pytest.mark.parametrize(
    ("starts", "max_lag", "bin_ps", "error", "words"),
    [
        ([1.5], 10, 5, TypeError, "float64"),
        ([2, 1], 10, 5, ValueError, r"start_ps\[1\] = 1"),
        ([[1]], 10, 5, ValueError, "2 dimensions"),
        ([1], 12, 5, ValueError, "multiple of bin_ps = 5"),
        ([1], 10, 0, ValueError, "bin_ps = 0"),
        (np.array([2**63], np.uint64), 10, 5, ValueError, "63 bits"),
        ([-(2**63) + 1, 5], 10, 5, ValueError, "further apart"),
    ],
)
def test_bad_input(
    starts: object, max_lag: int, bin_ps: int, error: type[Exception], words: str
) -> None:
    with pytest.raises(error, match=words):
        tagstream.cross_correlation(starts, [1], max_lag, bin_ps)  # type: ignore[arg-type]


def test_a_library_of_another_field_agrees_where_the_definitions_do() -> None:
    # pynapple (neuroscience) counts spikes of one unit around those of another. Its times are
    # floating-point seconds and its edges rounded, so integer seconds with half-second offsets
    # keep every lag well inside a bin; there the two definitions are the same.
    nap = pytest.importorskip("pynapple")
    rng = np.random.default_rng(7)
    a = np.sort(rng.integers(0, 4_000, 300))
    b = np.sort(rng.integers(0, 4_000, 300))
    group = nap.TsGroup({0: nap.Ts(a.astype(float)), 1: nap.Ts(b.astype(float))})
    theirs = nap.compute_crosscorrelogram(group, binsize=1.0, windowsize=10.0, norm=False)
    rate = theirs[(0, 1)].to_numpy()  # per reference event and second
    lags, ours = tagstream.cross_correlation(a, b, 10, 1)
    assert list(theirs.index) == [float(lag) for lag in lags]
    assert np.array_equal(np.rint(rate * a.size), ours)


def test_times_at_both_ends_of_int64() -> None:
    late = np.array([2**63 - 5, 2**63 - 1], np.int64)
    assert tagstream.cross_correlation(late, late, 100, 1)[1].sum() == 2
    assert tagstream.cross_correlation(late, late + 0, 100, 1)[1].sum() == 4
