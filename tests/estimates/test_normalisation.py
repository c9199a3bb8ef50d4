"""Expected pairs: edges, drifting rates, one channel with itself."""

from __future__ import annotations

import numpy as np
import pytest

from tagstream.estimates.normalisation import distinct_pairs, expected_pairs, expected_within
from tests.estimates.made import S, counts, estimator, sums, tally


def test_slices_allow_for_drift_and_totals_do_not() -> None:
    # Independent light whose rate scans tenfold: slice by slice it is 1, from totals 1.41; a sine
    # of 20 % gives 1.02 (for the sine 1 + 0.2^2 / 2; for a linear scan <n^2>/<n>^2).
    for rates, biased in (
        (np.linspace(1, 10, 1_001), 1.22),
        (10 ** np.linspace(0, 1, 1_001), 1.41),
        (1 + 0.2 * np.sin(np.linspace(0, 20 * np.pi, 1_000, endpoint=False)), 1.02),
    ):
        n = rates * 1e5
        slices = n * n * 1_000 / S  # expected pairs of each slice of 1 s, bins of 1 ns
        total = int(n.sum())
        made = sums(
            np.full(201, round(slices.sum())),
            slices.sum(),
            singles=(total, total, 0),
            live_time_ps=n.size * S,
            pair_time_ps=n.size * S,
        )
        fair = estimator(tally(), kind="g2-zero")(made)
        assert fair.value == pytest.approx(1, abs=1e-3)
        unfair = estimator(tally(normalisation="global"), kind="g2-zero")(made)
        assert unfair.value == pytest.approx(biased, abs=0.015)
        assert "normalised by global" in unfair.method


def test_pair_time_takes_out_the_loss_at_edges() -> None:
    # |lag| = 1/4 of the live time: uncorrected 0.75, corrected 1, with T in the numerator 0.56.
    live, rate = 4_000_000, 1e-3
    pair_time = live - np.abs(np.arange(-100, 101)) * 10_000
    n = int(live * rate)
    made = sums(
        np.rint(n * n * 1_000 * pair_time / live**2 * 1e3),
        singles=(n, n, 0),
        live_time_ps=live,
        pair_time_ps=pair_time,
    )["hbt"]
    fair = expected_pairs(made, tally(normalisation="global"))
    assert made["counts"] / fair / 1e3 == pytest.approx(np.ones(201), abs=1e-3)
    uncorrected = made["counts"] / (n * n * 1_000 / live) / 1e3
    assert uncorrected[0] == pytest.approx(0.75, abs=1e-3)


def test_one_channel_from_totals_leaves_each_tag_out_once() -> None:
    one = tally(stop="a", normalisation="global")
    made = sums(counts(), singles=(10, 10, 0))["hbt"]
    assert float(expected_pairs(made, one)) == pytest.approx(10 * 9 * 1_000 / S)


def test_poisson_light_at_three_quarters_of_pair_time_is_one() -> None:
    # N T^2 / (N_start N_stop bin P): with T in the numerator alone the loss would count twice.
    live, rate, bin_ps = 400 * S, 5e5, 1_000
    n = int(live * rate / S)
    for pair_time in (live, live // 4 * 3):
        pairs = round(rate / S * rate / S * bin_ps * pair_time)
        made = sums(
            np.full(201, pairs),
            singles=(n, n, 0),
            live_time_ps=live,
            pair_time_ps=pair_time,
        )
        found = estimator(tally(normalisation="global"), kind="g2-zero")(made)
        assert found.value == pytest.approx(1, abs=1e-4)


def test_products_of_huge_counts_do_not_wrap() -> None:
    n, live = 4 * 10**12, 10**18  # their product passes 2^63 many times
    made = sums(counts(), singles=(n, n, 0), live_time_ps=live, pair_time_ps=live)["hbt"]
    found = float(expected_pairs(made, tally(normalisation="global")))
    assert found == pytest.approx(1.6e25 * 1_000 / 1e18, rel=1e-12)


def test_without_live_time_no_pairs_are_expected() -> None:
    made = sums(counts(), live_time_ps=0, pair_time_ps=np.zeros(201, np.int64))["hbt"]
    found = expected_pairs(made, tally(normalisation="global"))
    assert found.shape == (201,)
    assert not found.any()
    assert expected_within(found, 99, 3) == 0


def test_one_channel_with_one_tag_expects_nothing() -> None:
    for number in (0, 1):
        made = sums(counts(), singles=(number, number, 0))["hbt"]
        assert expected_pairs(made, tally(stop="a", normalisation="global")) == 0


def test_within_a_window_like_bins_and_unlike_bins_add_up() -> None:
    assert expected_within(np.array(2.5), 10, 4) == 10
    assert expected_within(np.arange(20.0), 3, 4) == 3 + 4 + 5 + 6
    assert distinct_pairs(8, 6.0) == (4, 3.0)
    assert distinct_pairs(7, 6.0) == (4, 3.0)
