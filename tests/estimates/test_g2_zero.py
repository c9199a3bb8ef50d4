"""g2 around zero lag: windows, background, few counts, published rows."""

from __future__ import annotations

from math import sqrt

import numpy as np
import pytest

from tests.estimates.made import S, counts, estimator, sums, tally


def test_one_bin_by_default() -> None:
    found = estimator(tally(), kind="g2-zero")(sums(counts(zero=50, plus_1=7), 100.0))
    assert (found.value, found.counts) == (0.5, 50)
    assert "window 1 ns" in found.method


@pytest.mark.parametrize(
    ("window", "inside"),
    # An even number m of bins is -m/2 to m/2 - 1, centred half a bin before zero.
    [("1 ns", 4), ("2 ns", 6), ("3 ns", 12), ("3.9 ns", 12), ("4 ns", 28)],
)
def test_windows(window: str, inside: int) -> None:
    made = counts(zero=4, minus_1=2, plus_1=6, minus_2=16, plus_2=32)
    found = estimator(tally(), kind="g2-zero", window=window)(sums(made, 1.0))
    assert found.counts == inside
    width = int(float(window.split()[0]))
    assert found.value == pytest.approx(inside / width)
    assert f"window {width} ns" in found.method
    assert ("its centre 500 ps before it" in found.method) == (width % 2 == 0)


def test_a_window_of_unlike_bins() -> None:
    expected = np.linspace(1.0, 3.0, 201)  # the mean of any centred window is 2
    found = estimator(tally(), kind="g2-zero", window="5 ns")(sums(counts(zero=20), expected))
    assert found.value == pytest.approx(2.0)


def test_two_detector_formula() -> None:
    # g2 = N_TR T / (N_T N_R w) (Thorn et al., Am. J. Phys. 72, 1210 (2004)); one slice.
    n_t, n_r, live, window_ps = 200_000, 150_000, 20 * S, 1_000
    expected = n_t * n_r * window_ps / live
    found = estimator(tally(), kind="g2-zero")(
        sums(counts(zero=3), expected, singles=(n_t, n_r, 0), live_time_ps=live, pair_time_ps=live)
    )
    assert found.value == pytest.approx(3 * live / (n_t * n_r * window_ps))


def test_grangier_1986() -> None:
    # Grangier, Roger, Aspect, Europhys. Lett. 1, 173 (1986), Table 1 (from memory; the remembered
    # inputs give back the published alpha): triggers 8870/s, singles behind the splitter 4.55 and
    # 5.75/s, 17200 s, 9 coincidences; expected N_2r N_2t / N_1 T = 50.8, alpha = 0.18 +- 0.06.
    expected = 4.55 * 5.75 / 8870 * 17_200
    assert expected == pytest.approx(50.8, rel=0.02)
    found = estimator(tally(), kind="g2-zero", interval="exact")(sums(counts(zero=9), expected))
    assert found.value == pytest.approx(0.18, abs=0.005)
    assert (found.upper - found.lower) / 2 == pytest.approx(0.06, abs=0.01)
    # Garwood 68.27 % on 9 counts: [6.056, 13.110].
    assert found.lower * expected == pytest.approx(6.056, abs=1e-3)
    assert found.upper * expected == pytest.approx(13.110, abs=1e-3)


def test_background() -> None:
    # Brouri et al., Opt. Lett. 25, 1294 (2000) (from memory): a perfect emitter with
    # rho = S / (S + B) = 0.9 shows 1 - rho^2 = 0.19.
    chosen = estimator(tally(), kind="g2-zero", signal_fraction=0.9)
    found = chosen(sums(counts(zero=1_900), 10_000.0))
    assert found.value == pytest.approx(0, abs=1e-12)
    assert found.raw_value == pytest.approx(0.19)
    assert found.upper - found.value == pytest.approx((found.raw_upper - 0.19) / 0.81)
    assert "signal fraction 0.9" in found.method


def test_a_value_below_zero_is_shown_and_flagged() -> None:
    chosen = estimator(tally(), kind="g2-zero", signal_fraction=0.9)
    found = chosen(sums(counts(zero=1_500), 10_000.0))
    assert found.value == pytest.approx((0.15 - 0.19) / 0.81)
    assert "below zero" in found.note


def test_no_counts_are_an_upper_limit() -> None:
    found = estimator(tally(), kind="g2-zero", level=0.95)(sums(counts(), 100.0))
    assert found.interval == "upper-limit"
    assert found.upper == pytest.approx(2.9957 / 100, rel=1e-4)


def test_no_pairs_to_compare_with() -> None:
    found = estimator(tally(), kind="g2-zero")(sums(counts(), 0.0))
    assert found.interval == "none"
    assert "no live time" in found.reason


@pytest.mark.parametrize("means", [(300, 500), (2, 10), (0.1, 2)])
@pytest.mark.parametrize("level", [0.6827, 0.95])
def test_coverage_on_drawn_counts(means: tuple[float, float], level: float) -> None:
    # Averaged over the mean: at a single mean of few counts the steps of the interval decide.
    rng = np.random.default_rng(3)
    mean = rng.uniform(*means, 10_000)
    counted = rng.poisson(mean)
    chosen = estimator(tally(), kind="g2-zero", level=level)
    found = {n: chosen(sums(counts(zero=n), 1.0)) for n in np.unique(counted).tolist()}
    held = np.mean(
        [found[n].lower <= m <= found[n].upper for m, n in zip(mean, counted.tolist(), strict=True)]
    )
    slack = 3 * sqrt(level * (1 - level) / 10_000)
    assert held >= level - slack
    if means[0] > 10:
        assert held <= level + slack


def test_below_zero_beyond_noise_doubts_the_signal_fraction() -> None:
    chosen = estimator(tally(), kind="g2-zero", signal_fraction=0.9)
    # 0.19 of 10 000 pairs are background: 1880 are one standard deviation too few, 1500 are nine.
    assert chosen(sums(counts(zero=1_880), 10_000.0)).note == "below zero, within counting noise"
    assert "is signal_fraction too low?" in chosen(sums(counts(zero=1_500), 10_000.0)).note
    nothing = chosen(sums(counts(), 100.0))
    assert nothing.interval == "upper-limit"
    assert nothing.lower == nothing.value == pytest.approx(-0.19 / 0.81)


@pytest.mark.parametrize("level", [0.6827, 0.95])
def test_one_channel_with_itself_counts_each_pair_once(level: float) -> None:
    # Tags of a Poisson process; of the ordered pairs within the window both orders are counted.
    rng = np.random.default_rng(17)
    live, window, runs, held = 10**9, 2_000_001, 1_500, 0
    chosen = estimator(
        tally("2000001 ps", "2000001 ps", stop="a", normalisation="global"),
        kind="g2-zero",
        level=level,
    )
    for _ in range(runs):
        times = np.sort(rng.integers(0, live, rng.poisson(200)))
        near = np.searchsorted(times, times + window // 2, "right") - np.arange(times.size) - 1
        made = sums(
            [0, 2 * int(near.sum()), 0],
            singles=(times.size, times.size, 0),
            live_time_ps=live,
            pair_time_ps=live - window // 4,  # the mean over the bin
        )
        found = chosen(made)
        assert found.counts == near.sum()
        held += found.lower <= 1 <= found.upper
    assert "one channel with itself" in found.note
    assert abs(held / runs - level) < 3 * sqrt(level * (1 - level) / runs)
