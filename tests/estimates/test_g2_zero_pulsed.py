"""Pulsed g2(0): peaks, intervals, and the traps that bias it."""

from __future__ import annotations

from math import sqrt

import numpy as np
import pytest

from tests.estimates.made import comb_counts, estimator, pulsed, sums, tally


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
    assert found.note.startswith("1 of 5 clock intervals are too long: tags are missing")
    assert found.note.endswith("the period may be off by some 20 %")
    found = chosen(sums(comb_counts({0: 1}), periods=(0, 0, 0)))
    assert found.interval == "none"
    assert "clock" in found.reason


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
