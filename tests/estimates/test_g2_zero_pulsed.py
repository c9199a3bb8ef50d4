"""Pulsed g2(0): peaks, intervals, and the traps that bias it."""

from __future__ import annotations

from fractions import Fraction
from math import sqrt

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.typing import NDArray

from tagstream.estimates import Estimate
from tagstream.estimates.peaks import Comb, PulsedHistogram
from tests.estimates.made import estimator, sums, tally

PERIOD = 12_500


def comb_counts(
    areas: dict[int, int], bin_ps: int = 500, bins: int = 250, period_ps: int = PERIOD
) -> NDArray[np.int64]:
    """Peaks one bin wide, peak n of areas[n] counts."""
    made = np.zeros(2 * bins + 1, np.int64)
    for number, area in areas.items():
        made[bins + round(number * period_ps / bin_ps)] += area
    return made


def pulsed(counts: NDArray[np.int64], expected: object = 1.0, **more: object) -> Estimate:
    table = {"period": "12.5 ns", "window": "3 ns", "side_peaks": 4} | more
    table = {key: value for key, value in table.items() if value is not None}
    chosen = estimator(tally("500 ps", "125 ns"), kind="g2-zero-pulsed", **table)
    return chosen.with_profile(sums(counts, expected, periods=(5 * PERIOD, 5, 0)))  # type: ignore[arg-type]


def exponential_comb(
    lifetime_ps: float, central: float, total: float, bin_ps: int = 100, bins: int = 1_000
) -> NDArray[np.int64]:
    """Expected counts of two-sided exponential peaks (a decay against a decay), rounded."""
    edges = (np.arange(-bins, bins + 2) - 0.5) * bin_ps
    made = np.zeros(2 * bins + 1)
    for number in range(-60, 61):
        x = edges - number * PERIOD
        below = np.where(
            x < 0, np.exp(-np.abs(x) / lifetime_ps) / 2, 1 - np.exp(-np.abs(x) / lifetime_ps) / 2
        )
        made += np.diff(below) * (central if number == 0 else 1.0)
    return np.rint(made * total).astype(np.int64)


def test_central_over_mean_of_sides() -> None:
    found = pulsed(comb_counts({0: 50, **{n: 500 for n in range(-9, 10) if n}}))
    assert found.value == pytest.approx(0.1)
    assert found.counts == 50
    assert found.lower < 0.1 < found.upper
    # Ratio of 50 to 8 x 500: relative error close to sqrt(1 / 50 + 1 / 4000).
    assert (found.upper - found.lower) / 2 == pytest.approx(0.1 * sqrt(1 / 50 + 1 / 4000), rel=0.02)
    assert found.note == ""


def test_a_fock_state_of_two_photons_is_one_half() -> None:
    # g2(0) = 1 - 1/n for n photons (Loudon): central peak half as large as the others.
    found = pulsed(comb_counts({0: 250, **{n: 500 for n in range(-9, 10) if n}}))
    assert found.value == pytest.approx(0.5)


def test_side_peaks_from_to() -> None:
    areas = {0: 60, **{n: 900 if abs(n) == 1 else 600 for n in range(-9, 10) if n}}
    found = pulsed(comb_counts(areas), side_peaks=[2, 9])
    assert found.value == pytest.approx(0.1)
    assert "side peaks 2 to 9" in found.method


def test_expected_pairs_weigh_the_peaks() -> None:
    # Less pair time at long lags: fewer counts there, the same g2.
    expected = 1 - np.abs(np.arange(-250, 251)) / 500
    areas = {n: round(40_000 * expected[250 + 25 * n]) for n in range(-9, 10) if n}
    found = pulsed(comb_counts({0: 4_000, **areas}), expected)
    assert found.value == pytest.approx(0.1, rel=5e-3)  # the window is six bins wide


def test_no_central_counts_are_an_upper_limit() -> None:
    found = pulsed(comb_counts({n: 100 for n in range(-9, 10) if n}), level=0.95)
    assert (found.value, found.lower, found.interval) == (0, 0, "upper-limit")
    # Binomial: (1 - p)^800 = 0.05; close to 2.9957 over the mean of 100.
    assert found.upper == pytest.approx(2.9957 / 100, rel=0.01)


@pytest.mark.parametrize(
    ("expected", "change", "words"),
    [
        (1.0, {}, "no counts in the side peaks"),
        (1.0, {"side_peaks": [11, 12]}, "no side peak in range: max_lag of at least 139 ns"),
        (0.0, {}, "no live time, or no slice with counts in both channels"),
        (1.0, {"period": None, "clock": "clock", "window": "13 ns"}, "longer than the period"),
    ],
)
def test_what_cannot_be_said_has_a_reason(
    expected: float, change: dict[str, object], words: str
) -> None:
    found = pulsed(np.zeros(501, np.int64), expected, **change)
    assert (found.interval, found.counts) == ("none", 0)
    assert words in found.reason
    assert not found.profile


def test_the_lag_that_is_asked_for_is_enough_and_no_more() -> None:
    for width, period in ((5, Fraction(12_500)), (6, Fraction(12_300)), (7, Fraction(37_001, 3))):
        need = Comb(500, 0, period).needed_lag_ps(4, width) // 500
        fits = [
            2 in {p // 2 for p in Comb(500, k, period).sides(width, 2, 2)} for k in (need - 1, need)
        ]
        assert fits == [False, True]


def test_side_peaks_beyond_the_histogram_are_not_used() -> None:
    # Of 20 peaks asked for on each side, nine windows of seven bins lie in 125 ns.
    made = sums(
        comb_counts(dict.fromkeys(range(-9, 10), 100)),
        periods=(50_000, 4, 0),
    )
    chosen = estimator(
        tally("500 ps", "125 ns"),
        kind="g2-zero-pulsed",
        clock="clock",
        window="3.5 ns",
        side_peaks=[3, 20],
    )
    found = chosen(made)
    assert found.value == pytest.approx(1.0)
    assert "side peaks 3 to 9 on each side" in found.method


def test_lags_that_no_pair_can_have_are_left_out() -> None:
    # Live stretches of 60 ns: no pair beyond, and none expected there.
    lags = np.abs(np.arange(-250, 251)) * 500
    expected = np.where(lags < 60_000, 1.0, 0.0)
    areas = {n: 500 for n in range(-4, 5) if n}
    found = pulsed(comb_counts({0: 50, **areas}), expected, side_peaks=8)
    assert found.value == pytest.approx(0.1)
    assert found.note == ""
    known = np.isfinite(found.profile["peak_area"])
    assert list(found.profile["peak_number"][known]) == list(range(-4, 5))
    assert found.profile["flatness_ndf"] == 7


def test_the_period_from_a_clock() -> None:
    made = sums(
        comb_counts({0: 50, **{n: 500 for n in range(-9, 10) if n}}), periods=(62_503, 5, 1)
    )
    chosen = estimator(
        tally("500 ps", "125 ns"),
        kind="g2-zero-pulsed",
        clock="clock",
        window="3 ns",
        side_peaks=4,
    )
    found = chosen(made)
    assert found.value == pytest.approx(0.1)
    assert "measured from clock, 12.5006 ns" in found.method
    assert found.note == "1 of 5 clock intervals are too long: tags of the clock are missing"
    found = chosen(sums(comb_counts({0: 1}), periods=(0, 0, 0)))
    assert found.interval == "none"
    assert "clock" in found.reason


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


@pytest.mark.parametrize(("central", "side"), [((300, 500), 4_000), ((2, 10), 40), ((0.1, 2), 10)])
@pytest.mark.parametrize("level", [0.6827, 0.95])
def test_coverage_on_drawn_counts(central: tuple[float, float], side: float, level: float) -> None:
    # Averaged over the mean of the central peak; eight side peaks of mean `side`.
    rng = np.random.default_rng(5)
    runs = 3_000
    means = rng.uniform(*central, runs)
    chosen = estimator(
        tally("500 ps", "125 ns"),
        kind="g2-zero-pulsed",
        period="12.5 ns",
        window="3 ns",
        side_peaks=4,
        level=level,
    )
    held = 0
    for mean in means:
        areas = {n: int(rng.poisson(side)) for n in range(-4, 5) if n}
        found = chosen(sums(comb_counts({0: int(rng.poisson(mean)), **areas})))
        held += found.lower <= mean / side <= found.upper
    slack = 3 * sqrt(level * (1 - level) / runs)
    assert held / runs >= level - slack
    if central[0] > 10:
        assert held / runs <= level + slack
