from __future__ import annotations

from math import sqrt

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.stats import ks_2samp

from tagstream.simulation.emitter import Emitter
from tagstream.simulation.light import Arm
from tagstream.simulation.truth import g2_measured, truth
from tests.simulation.scenes import arms, g2_curve, lags, scenario

S = 10**12
BRIGHT = 'kind = "emitter"\nrate = "10 MHz"\nt0 = "20 ns"'


def emitted_ps(excitation_ps: float, decay_ps: float, count: int) -> NDArray[np.float64]:
    """Every photon of a two-level emitter, cycle by cycle, as the model is told."""
    rng = np.random.default_rng(9)
    return np.cumsum(rng.exponential(excitation_ps, count) + rng.exponential(decay_ps, count))


@pytest.mark.parametrize("share", [1.0, 0.4, 0.05])
def test_losses_applied_before_drawing_equal_losses_photon_by_photon(share: float) -> None:
    """The intervals of the light against emission in full, each photon kept with its chance."""
    photons = emitted_ps(60_000, 30_000, int(20_000 / share))  # 1/t0 = 1/60 + 1/30 ns: t0 20 ns
    kept = photons[np.random.default_rng(1).random(photons.size) < share]
    source = Emitter(kind="emitter", rate="100/9 MHz", t0="20 ns")  # 1 / 90 ns
    length = int(kept[-1])
    drawn = source.light([Arm("any", share)]).draw(0, length, np.random.default_rng(2))
    assert drawn.offsets_ps.size == pytest.approx(20_000, rel=0.03)
    assert ks_2samp(np.diff(kept), np.diff(drawn.offsets_ps)).pvalue > 0.01


def test_steps_join_without_a_seam() -> None:
    """Intervals across the border of two steps follow the same law as the others."""
    light = Emitter(kind="emitter", rate="10 MHz", t0="20 ns").light([Arm("any", 1.0)])
    rng = np.random.default_rng(4)
    steps = [light.draw(0, 300_000, rng).offsets_ps + 300_000 * k for k in range(20_000)]
    photons = np.concatenate(steps)
    assert np.all(np.diff(photons) > 0)
    after = np.searchsorted(photons, 300_000 * np.arange(1, 19_990))
    across = photons[after] - photons[after - 1]
    # the interval that covers a fixed point is the length-biased one: E[X^2] / E[X]
    # with a + b = 1/t0, a b = r/t0: E[X^2]/E[X] = 2 (1/r - t0)
    assert np.mean(across) == pytest.approx(2 * (100_000 - 20_000), rel=0.03)


def test_g2_is_the_dip_of_a_two_level_emitter() -> None:
    scene = scenario(BRIGHT, "efficiency = 0.7")
    edges = np.arange(-100_000, 100_001, 4_000)
    g2, sigma = g2_curve(arms(scene, 1, S // 2), edges, S // 2)
    decay = np.exp(-np.abs(edges) / 20_000) * np.sign(edges)
    primitive = edges - (np.sign(edges) - decay) * 20_000  # of 1 - exp(-|t|/t0)
    expected = np.diff(primitive) / np.diff(edges)
    assert np.sum(((g2 - expected) / sigma) ** 2) == pytest.approx(50, abs=40)


def test_g2_of_one_detector_shows_the_same_dip() -> None:
    scene = scenario(BRIGHT, "efficiency = 1.0")
    times = arms(scene, 2, S // 4)[0]
    pairs = times.size**2 / (S // 4) * 10_000
    found = lags(times, times, 1, 10_001).size
    # mean of 1 - exp(-t/t0) over half a t0: 1 - (1 - exp(-1/2)) / (1/2)
    assert found / pairs == pytest.approx(0.213061, abs=4 * sqrt(found) / pairs)


@pytest.mark.parametrize("window_ns", [2, 30])
def test_background_jitter_and_dark_counts_fill_the_dip_as_the_truth_says(window_ns: int) -> None:
    scene = scenario(
        BRIGHT + '\nbackground = "2 MHz"',
        'efficiency = 0.6\njitter_fwhm = "9 ns"\ndark_rate = "250 kHz"',
    )
    half = window_ns * 500
    g2, sigma = g2_curve(arms(scene, 3, S // 2), np.array([-half, half]), S // 2)
    expected = g2_measured(scene, 1000.0 * window_ns)
    assert g2[0] == pytest.approx(expected, abs=4 * sigma[0])
    assert expected > truth(scene)["g2_zero"] + 5 * sigma[0]  # the test can tell


def test_background_formula() -> None:
    # Brouri et al., Opt. Lett. 25, 1294 (2000), from memory: rho 0.9 gives 1 - rho^2 = 0.19
    known = truth(scenario('kind = "emitter"\nrate = "9 MHz"\nt0 = "1 ns"\nbackground = "1 MHz"'))
    assert known["signal_fraction"] == pytest.approx(0.9)
    assert known["g2_zero"] == pytest.approx(0.19)
    assert known["g2_zero_measured"] == pytest.approx(0.19)
    assert known["g2_zero_window_ps"] == 0


@pytest.mark.parametrize("dead", ["10 ns", "100 ns"])
def test_rates_behind_dead_time(dead: str) -> None:
    scene = scenario(BRIGHT, f'efficiency = 1.0\ndead_time = "{dead}"')
    expected = truth(scene)["rate_input_1_hz"]
    assert expected > 5e6 / (1 + 5e6 * scene.arms[0].dead_time_ps / S) * 1.02  # not Knoll's
    for times in arms(scene, 4, S // 2):
        assert times.size * 2 == pytest.approx(expected, abs=8 * sqrt(expected / 2))


def test_an_emitter_that_nobody_sees() -> None:
    scene = scenario(BRIGHT, "efficiency = 0.0")
    assert [times.size for times in arms(scene, 1, S)] == [0, 0]
    assert truth(scene)["g2_zero_measured"] == 1
