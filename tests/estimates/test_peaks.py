"""Windows around peaks, in whole bins."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from tagstream.estimates.peaks import Comb, PulsedHistogram


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
