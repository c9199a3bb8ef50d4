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
