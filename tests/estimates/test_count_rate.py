"""Rates against Knoll, with intervals that allow for dead time."""

from __future__ import annotations

from math import inf, isnan, sqrt
from typing import Any

import numpy as np
import pytest

from tagstream.errors import SettingsError
from tagstream.estimates import Estimate
from tests.estimates.made import S, estimator, sums, tally


def rate(counts: int, live_time_ps: int = S, **more: Any) -> Estimate:
    chosen = estimator(tally(), kind="count-rate", channel="a", **more)
    return chosen(sums([0], singles=(counts, 0, 0), live_time_ps=live_time_ps))


def corrected(counts: int, dead_time: str, **more: Any) -> Estimate:
    return rate(counts, dead_time_model="non-paralyzable", dead_time=dead_time, **more)


def test_counts_over_live_time() -> None:
    found = rate(10_000, 2 * S)
    assert (found.value, found.unit, found.counts) == (5_000, "Hz", 10_000)
    assert found.upper - found.value == pytest.approx(50, rel=0.01)
    assert found.raw_value == found.value
    assert found.interval == "two-sided"


def test_knoll() -> None:
    # Knoll, Radiation Detection and Measurement, ch. 4: n = m / (1 - m tau); 1e4/s at 50 us is 2e4.
    found = corrected(10_000, "50 us")
    assert found.value == pytest.approx(20_000)
    assert found.raw_value == 10_000
    assert "non-paralyzable" in found.method
    # 2e6/s at 50 ns is counted as 1818181.818/s.
    assert corrected(1_818_182, "50 ns").value == pytest.approx(2e6, rel=1e-6)


def test_dead_time_narrows_the_scatter() -> None:
    # Renewal theory: var N = N (1 - m tau)^2, so dn = dm / (1 - m tau)^2 = sqrt(N) / (1 - m tau).
    found = corrected(1_000_000, "500 ns")
    assert found.value == pytest.approx(2e6)
    assert found.upper - found.value == pytest.approx(sqrt(1e6) / 0.5, rel=0.01)


def test_the_interval_holds_for_a_simulated_dead_detector() -> None:
    rng = np.random.default_rng(11)
    true_rate, dead, hits = 1e6, 0.5e-6, 0
    for _ in range(400):
        gaps = dead + rng.exponential(1 / true_rate, 20_000)
        counts = int(np.searchsorted(np.cumsum(gaps), 0.01))
        found = estimator(
            tally(),
            kind="count-rate",
            channel="a",
            dead_time_model="non-paralyzable",
            dead_time="500 ns",
        )(sums([0], singles=(counts, 0, 0), live_time_ps=S // 100))
        hits += found.lower <= true_rate <= found.upper
    assert abs(hits / 400 - 0.6827) < 3 * sqrt(0.6827 * 0.3173 / 400)


def test_no_counts_are_an_upper_limit() -> None:
    found = rate(0)
    assert (found.value, found.lower, found.interval) == (0, 0, "upper-limit")
    assert found.upper == pytest.approx(1.1479, abs=1e-4)  # -ln(1 - 0.6827)


def test_few_counts_are_noted() -> None:
    assert rate(9).note == "only 9 counts"
    assert rate(1).note == "only 1 count"
    assert rate(10).note == ""


def test_what_cannot_be_said_has_a_reason() -> None:
    found = rate(0, live_time_ps=0)
    assert isnan(found.value)
    assert (found.interval, found.reason) == ("none", "no live time")
    found = corrected(2_000_000, "500 ns")
    assert found.interval == "none"
    assert "more than this dead time allows (500 ns)" in found.reason


def test_a_missing_dead_time_says_what_to_give() -> None:
    with pytest.raises(SettingsError, match=r"dead_time: missing; give dead_time here or in"):
        estimator(tally(), kind="count-rate", channel="a", dead_time_model="non-paralyzable")


def test_a_bound_beyond_the_dead_time_is_infinite() -> None:
    assert corrected(1, "800 ms").upper == inf
