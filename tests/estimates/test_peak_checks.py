"""What the notes and profiles of pulsed histograms tell, and when they stay silent."""

from __future__ import annotations

import numpy as np
import pytest

from tests.estimates.made import comb_counts, estimator, exponential_comb, pulsed, sums, tally


def test_near_peaks_that_are_high_are_told() -> None:
    # A blinking emitter: near peaks are no fair reference.
    areas = {0: 50, **{n: 650 if abs(n) <= 2 else 500 for n in range(-9, 10) if n}}
    found = pulsed(comb_counts(areas))
    assert found.note.startswith("side peaks not flat: near/far 1.3 (p ")
    assert found.profile["flatness_chi2"] > 3 * found.profile["flatness_ndf"]


def test_far_peaks_that_are_missing_are_told() -> None:
    found = pulsed(comb_counts({0: 50, **dict.fromkeys((-2, -1, 1, 2), 500)}))
    assert found.note.startswith("side peaks not flat: near/far infinite (p ")


def test_flat_peaks_are_seldom_told_not_to_be() -> None:
    rng = np.random.default_rng(8)
    told = 0
    for _ in range(400):
        areas = {n: int(rng.poisson(500)) for n in range(-9, 10) if n}
        told += "not flat" in pulsed(comb_counts({0: 50, **areas})).note
    assert told <= 6  # 0.003 x 400 = 1.2 expected


def test_overlapping_peaks_read_high_and_are_told() -> None:
    # Lifetime 3 ns, period 12.5 ns, a perfect emitter: 0.040 in 3 ns, 0.126 in the whole period.
    made = sums(exponential_comb(3_000, central=0.0, total=1e6))
    for window, value in (("3 ns", 0.040), ("12.5 ns", 0.126)):
        chosen = estimator(
            tally("100 ps", "100 ns"),
            kind="g2-zero-pulsed",
            period="12.5 ns",
            window=window,
            side_peaks=6,
        )
        found = chosen(made)
        assert found.value == pytest.approx(value, abs=0.002)
        assert "peaks overlap, or background: valleys at" in found.note


def test_separate_peaks_are_not_told_to_overlap() -> None:
    made = sums(exponential_comb(800, central=0.1, total=1e5))
    chosen = estimator(
        tally("100 ps", "100 ns"),
        kind="g2-zero-pulsed",
        period="12.5 ns",
        window="6 ns",
        side_peaks=6,
    )
    found = chosen.with_profile(made)
    assert found.note == ""
    assert found.value == pytest.approx(0.1, abs=0.001)
    scan = found.profile["window_value"]
    assert scan == pytest.approx(np.full(scan.size, 0.1), abs=0.003)  # alike and apart: flat


def test_narrow_light_moves_with_the_window() -> None:
    # Laser leakage is narrow: a narrow window gives it too much weight.
    counts = exponential_comb(800, central=0.05, total=1e5)
    counts[1_000] += 5_000
    chosen = estimator(
        tally("100 ps", "100 ns"),
        kind="g2-zero-pulsed",
        period="12.5 ns",
        window="6 ns",
        side_peaks=6,
    )
    profile = chosen.with_profile(sums(counts)).profile
    assert profile["window_value"][0] > 1.05 * profile["window_value"][-1]
    assert list(profile["window_width_ps"]) == sorted(profile["window_width_ps"])


def test_profile() -> None:
    areas = {0: 50, **{n: 500 + n for n in range(-9, 10) if n}}
    profile = pulsed(comb_counts(areas)).profile
    assert list(profile["peak_number"]) == list(range(-9, 10))
    assert list(profile["peak_counts"]) == [areas[n] for n in range(-9, 10)]
    assert profile["peak_area"][9] == pytest.approx(0.1)
    assert (profile["peak_area_lower"] < profile["peak_area"]).all()
    assert (profile["peak_area"] < profile["peak_area_upper"]).all()
