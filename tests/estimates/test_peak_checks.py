"""What the notes and profiles of pulsed histograms tell, and when they stay silent."""

from __future__ import annotations

import numpy as np
import pytest

from tagstream.estimates.intervals import ratio_interval
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


def test_a_background_that_adds_much_is_told_though_low() -> None:
    # Narrow peaks, valleys at 0.9 % of their height: a window of the whole period holds 6 %.
    counts = exponential_comb(300, central=0.0, total=1e6)
    counts += round(0.009 * counts[1_118:1_133].mean())
    for window, told in (("1 ns", False), ("12.5 ns", True)):
        chosen = estimator(
            tally("100 ps", "100 ns"),
            kind="g2-zero-pulsed",
            period="12.5 ns",
            window=window,
            side_peaks=6,
        )
        found = chosen(sums(counts))
        assert ("peaks overlap, or background" in found.note) == told
    assert found.note.endswith(
        f"adding up to {found.value:.2g}"
    )  # a flat background adds just that
    assert found.value == pytest.approx(0.06, abs=0.01)


def test_few_counts_between_peaks_are_not_told() -> None:
    # One count in a valley is above 1 % of 50 on the peaks, but may be chance.
    counts = comb_counts({0: 5, **{n: 6 for n in range(-9, 10) if n}})
    counts[250 + 37] += 1
    found = pulsed(counts)
    assert found.profile["valley_depth"] > 0.01
    assert found.note == ""


@pytest.mark.parametrize(
    ("bin_", "period", "window", "told"),
    [
        # 12.5 bins a period: side windows lie half a bin beside their peaks, or that at zero does.
        ("1 ns", "12.5 ns", "1 ns", True),
        ("1 ns", "12.5 ns", "2 ns", True),
        ("1 ns", "12.5 ns", "4 ns", True),
        ("1 ns", "12.5 ns", "6 ns", False),
        ("1 ns", "13.157 ns", "1 ns", True),
        ("1 ns", "13.157 ns", "8 ns", False),
        ("1 ns", "13 ns", "1 ns", False),
        ("500 ps", "12.5 ns", "500 ps", False),
    ],
)
def test_windows_placed_unlike_by_whole_bins_are_told(
    bin_: str, period: str, window: str, told: bool
) -> None:
    width_ps, period_ps = {"1 ns": 1_000, "500 ps": 500}[bin_], float(period.split()[0]) * 1_000
    bins = 120_000 // width_ps
    counts = exponential_comb(300, 0.1, 1e4, bin_ps=width_ps, bins=bins, period_ps=round(period_ps))
    chosen = estimator(
        tally(bin_, "120 ns"), kind="g2-zero-pulsed", period=period, window=window, side_peaks=8
    )
    found = chosen(sums(counts))
    assert ("unlike that at zero lag" in found.note) == told
    if not told:
        assert found.value == pytest.approx(0.1, rel=0.01)


def test_one_channel_with_itself_weighs_each_pair_once() -> None:
    areas = {0: 80, **{n: 500 for n in range(-9, 10) if n}}
    table = {"kind": "g2-zero-pulsed", "period": "12.5 ns", "window": "2.5 ns", "side_peaks": 4}
    one = estimator(tally("500 ps", "125 ns", stop="a"), **table)
    found = one.with_profile(sums(comb_counts(areas)))
    assert found.note == "one channel with itself: its dead time hides pairs near zero lag"
    assert found.value == pytest.approx(0.16)
    assert found.counts == 40
    # 40 pairs against the 4 x 500 above zero lag, whose mirror images add nothing.
    bounds = ratio_interval(40, 2_000, 8.0, 0.6827)
    assert (found.lower, found.upper) == pytest.approx(bounds[:2], rel=1e-12)
    assert found.profile["peak_counts"][9] == 40
    assert found.profile["window_value"][-1] == pytest.approx(0.16)
    two = estimator(tally("500 ps", "125 ns"), **table)(sums(comb_counts(areas)))
    assert two.counts == 80
    assert two.upper - two.lower < 0.75 * (found.upper - found.lower)


def test_one_peak_on_each_side_is_not_compared() -> None:
    found = pulsed(comb_counts({0: 5, -1: 900, 1: 500}), side_peaks=1)
    assert found.note == ""
    assert found.profile["flatness_ndf"] == 1
    assert found.profile["flatness_chi2"] == pytest.approx(2 * 200**2 / 700)


def test_arrays_of_the_window_scan() -> None:
    profile = pulsed(comb_counts({0: 50, **{n: 500 for n in range(-9, 10) if n}})).profile
    # Quarters of the six bins of 3 ns, up to twice it: 1, 3, 4, 6, 7, 9, 10 and 12 bins.
    assert list(profile["window_width_ps"] / 500) == [1, 3, 4, 6, 7, 9, 10, 12]
    for name in ("window_value", "window_lower", "window_upper"):
        assert profile[name].shape == (8,)
        assert profile[name].dtype == np.float64
    assert profile["window_value"] == pytest.approx(np.full(8, 0.1))
    assert (profile["window_lower"] < 0.1).all()
    assert (profile["window_upper"] > 0.1).all()


def test_the_window_scan_ends_at_the_period() -> None:
    counts = comb_counts({0: 50, **{n: 500 for n in range(-9, 10) if n}})
    widths = pulsed(counts, window="12.5 ns").profile["window_width_ps"] / 500
    assert list(widths) == [6, 12, 18, 25]


@pytest.mark.parametrize(("height", "told"), [(0.008, False), (0.013, True)])
def test_valleys_are_held_against_the_height_of_the_peaks(height: float, told: bool) -> None:
    # A short window, in which the background adds less than 0.02 to g2(0).
    counts = exponential_comb(300, central=0.0, total=1e6)
    tops = counts[1_000 + 125 - 7 : 1_000 + 125 + 8].mean()  # an eighth of the period
    chosen = estimator(
        tally("100 ps", "100 ns"),
        kind="g2-zero-pulsed",
        period="12.5 ns",
        window="1 ns",
        side_peaks=6,
    )
    found = chosen.with_profile(sums(counts + round(height * tops)))
    assert found.profile["valley_depth"] == pytest.approx(height, rel=0.05)
    assert ("peaks overlap, or background: valleys at" in found.note) == told
    assert found.value < 0.02
