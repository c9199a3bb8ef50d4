"""g2 bin by bin, with exact bounds."""

from __future__ import annotations

import numpy as np
import pytest

from tagstream.estimates.curves import g2_curves
from tests.estimates.made import counts, sums, tally


def test_curves() -> None:
    made = sums(counts(zero=9, plus_1=100), 50.0)["hbt"]
    found = g2_curves(made, tally())
    assert found["g2"][100] == pytest.approx(0.18)
    # Garwood 68.27 % on 9 counts.
    assert found["g2_lower"][100] * 50 == pytest.approx(6.056, abs=1e-3)
    assert found["g2_upper"][100] * 50 == pytest.approx(13.110, abs=1e-3)
    assert found["g2_errors"][100] == pytest.approx((13.110 - 6.056) / 100, abs=1e-4)
    assert found["g2_errors"][0] > 0  # no counts still have an uncertainty
    assert found["expected_pairs"].shape == (201,)
    empty = g2_curves(sums(counts(), 0.0)["hbt"], tally())
    assert np.isnan(empty["g2"]).all()


def test_bounds_are_those_of_the_counts_over_the_expected_pairs() -> None:
    expected = np.linspace(1.0, 3.0, 201)
    expected[7] = 0.0
    made = sums(np.arange(201), expected)["hbt"]
    found = g2_curves(made, tally(), 0.95)
    # Garwood 95 %: 5 counts (1.6235, 11.6683), 10 counts (4.7954, 18.3904), none (0, 3.6889).
    for bin_, lower, upper in ((5, 1.6235, 11.6683), (10, 4.7954, 18.3904), (0, 0.0, 3.6889)):
        assert found["g2_lower"][bin_] * expected[bin_] == pytest.approx(lower, abs=1e-4)
        assert found["g2_upper"][bin_] * expected[bin_] == pytest.approx(upper, abs=1e-4)
    unknown = [name for name, values in found.items() if np.isnan(values[7])]
    assert unknown == ["g2", "g2_lower", "g2_upper", "g2_errors"]
    assert np.isfinite(np.delete(found["g2"], 7)).all()


def test_one_channel_has_each_pair_twice_at_zero_lag_alone() -> None:
    made = sums(counts(zero=20, plus_1=10, minus_1=10), 10.0)["hbt"]
    found, two = g2_curves(made, tally(stop="a"), 0.95), g2_curves(made, tally(), 0.95)
    assert found["g2"][100] == 2.0
    assert found["g2_lower"][100] == pytest.approx(2 * 4.7954 / 10, abs=1e-4)  # of ten pairs
    assert found["g2_upper"][100] == pytest.approx(2 * 18.3904 / 10, abs=1e-4)
    for name in ("g2", "g2_lower", "g2_upper", "g2_errors"):
        kept = np.arange(201) != 100
        assert (found[name][kept] == two[name][kept]).all()
