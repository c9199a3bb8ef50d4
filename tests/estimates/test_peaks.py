"""Windows around peaks, in whole bins."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tagstream.estimates.peaks import Comb, PulsedHistogram
from tests.estimates.made import comb_counts, estimator, exponential_comb, sums, tally


def test_the_lag_that_is_asked_for_is_enough_and_no_more() -> None:
    for width, period in ((5, Fraction(12_500)), (6, Fraction(12_300)), (7, Fraction(37_001, 3))):
        need = Comb(500, 0, period).needed_lag_ps(4, width) // 500
        fits = [
            2 in {p // 2 for p in Comb(500, k, period).sides(width, 2, 2)} for k in (need - 1, need)
        ]
        assert fits == [False, True]


@given(
    st.fractions(5, 40, max_denominator=97),
    st.integers(1, 9),
    st.integers(-8, 8),
)
def test_windows_lie_nearest_to_their_centres(
    bins_a_period: Fraction, width: int, position: int
) -> None:
    comb = Comb(100, 1_000, bins_a_period * 100)
    first = comb.first_bin(position, width) - 1_000
    centre = position * bins_a_period / 2
    offset = first + Fraction(width - 1, 2) - centre  # from the centre of the group
    assert Fraction(-1, 2) <= offset < Fraction(1, 2)


def test_areas_with_and_without_edges() -> None:
    counts = np.arange(21, dtype=np.int64)
    comb = Comb(100, 10, Fraction(500))
    flat = PulsedHistogram(counts, np.array(2.0), comb, 3, [2]).areas([0, 2], 3)
    edged = PulsedHistogram(counts, np.full(21, 2.0), comb, 3, [2]).areas([0, 2], 3)
    assert list(flat[0]) == list(edged[0]) == [9 + 10 + 11, 14 + 15 + 16]
    assert list(flat[1]) == list(edged[1]) == [6, 6]


@pytest.mark.parametrize("window", ["2.5 ns", "5 ns", "8 ns"])
def test_a_period_that_is_no_whole_number_of_bins(window: str) -> None:
    made = sums(exponential_comb(800, central=0.1, total=1e7, period_ps=13_157))
    chosen = estimator(
        tally("100 ps", "100 ns"),
        kind="g2-zero-pulsed",
        period="13.157 ns",
        window=window,
        side_peaks=6,
    )
    found = chosen(made)
    assert found.value == pytest.approx(0.1, rel=2e-3)
    assert found.note == ""


def test_peaks_at_fractions_of_bins_are_where_the_counts_are() -> None:
    # Peak n in bin round(n 131.57), counted by hand.
    made = comb_counts(dict.fromkeys(range(-7, 8), 10), 100, 1_000, period_ps=13_157)
    comb = Comb(100, 1_000, Fraction(13_157))
    peaks = PulsedHistogram(made, np.array(1.0), comb, 1, comb.sides(1, 1, 7))
    counts, expected = peaks.reference
    assert list(counts) == [10] * 14
    assert list(expected) == [1.0] * 14
    assert peaks.central == (10, 1.0)
    assert [comb.first_bin(2 * n, 1) - 1_000 for n in (-7, -1, 0, 1, 7)] == [
        *(-921, -132, 0),
        *(132, 921),
    ]


@given(st.fractions(3, 40, max_denominator=97), st.integers(1, 6))
def test_windows_of_neighbours_share_no_bin(bins_a_period: Fraction, width: int) -> None:
    comb = Comb(100, 300, bins_a_period * 100)
    if width > bins_a_period:
        width = int(bins_a_period)
    firsts = comb.first_bins(comb.peaks(width), width)
    assert (np.diff(firsts) >= width).all()
    assert firsts[0] >= 0
    assert firsts[-1] + width <= 601
    reach = 300 + Fraction(1, 2)
    outside = int((reach - Fraction(width, 2)) / bins_a_period) + 2
    assert not comb.fits(2 * outside, width)


@given(st.fractions(5, 40, max_denominator=97), st.integers(1, 9), st.integers(-8, 8))
def test_off_centre_is_at_most_half_a_bin(
    bins_a_period: Fraction, width: int, position: int
) -> None:
    comb = Comb(100, 1_000, bins_a_period * 100)
    (found,) = comb.off_centre_ps([position], width)
    middle = (comb.first_bin(position, width) - 1_000 + Fraction(width - 1, 2)) * 100
    assert found == pytest.approx(float(abs(middle - position * comb.period_ps / 2)), abs=1e-6)
    assert found <= 50 + 1e-6


def test_one_channel_halves_the_window_around_zero() -> None:
    counts = np.full(21, 6, np.int64)
    comb = Comb(100, 10, Fraction(500))
    peaks = PulsedHistogram(counts, np.array(2.0), comb, 3, [2], one_channel=True)
    assert peaks.central == (9, 3.0)
    assert list(peaks.reference[0]) == [18]
    assert list(peaks.areas([-2, 0, 2], 3)[1]) == [6, 3, 6]
