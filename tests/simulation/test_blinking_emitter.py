from __future__ import annotations

import numpy as np
import pytest

from tagstream.simulation.truth import g2_measured, truth
from tests.simulation.scenes import arms, g2_curve, lags, scenario

S = 10**12
CONTINUOUS = """
kind = "blinking-emitter"
rate = "10 MHz"
t0 = "20 ns"
on_time = "300 ns"
off_time = "600 ns"
"""
PULSED = """
kind = "pulsed-blinking-emitter"
period = "12.5 ns"
photons_per_pulse = 0.2
g2_zero = 0.1
lifetime = "500 ps"
on_time = "50 ns"
off_time = "75 ns"
"""


def test_g2_is_the_dip_times_the_bunching() -> None:
    scene = scenario(CONTINUOUS, "efficiency = 0.8")
    edges = np.arange(0, 800_001, 10_000)
    g2, sigma = g2_curve(arms(scene, 1, S // 5), edges, S // 5)
    tb = 200_000
    fine = np.linspace(0, 800_000, 80 * 50 + 1)
    curve = (1 - np.exp(-fine / 20_000)) * (1 + 2 * np.exp(-fine / tb))
    means = ((curve[1:] + curve[:-1]) / 2).reshape(80, 50).mean(axis=1)
    assert np.sum(((g2 - means) / sigma) ** 2) == pytest.approx(80, abs=60)
    known = truth(scene)
    assert (known["g2_fit_a"], known["g2_fit_t2_ps"]) == (2, pytest.approx(tb))
    assert known["brightness_hz"] == pytest.approx(10e6 / 3)


def test_background_does_not_blink() -> None:
    scene = scenario(CONTINUOUS + 'background = "2 MHz"', 'efficiency = 0.7\njitter_fwhm = "8 ns"')
    for window in (4_000, 300_000):
        half = window // 2
        g2, sigma = g2_curve(arms(scene, 2, S // 10), np.array([-half, half]), S // 10)
        # blinking adds to the variance of counts: beyond Poisson by a few
        assert g2[0] == pytest.approx(g2_measured(scene, window), abs=5 * sigma[0])


def test_side_peaks_near_and_far() -> None:
    scene = scenario(PULSED, "efficiency = 0.6")
    start, stop = arms(scene, 3, S // 10)
    area = [
        lags(start, stop, n * 12_500 - 6_250, n * 12_500 + 6_250).size for n in (0, 1, 2, 5, 60)
    ]
    ratio = np.array(area[:4]) / area[4]
    heights = 1 + 1.5 * np.exp(-np.array([1, 2, 5]) * 12_500 / 30_000)
    assert ratio[0] == pytest.approx(0.1 / 0.4, abs=0.02)
    np.testing.assert_allclose(ratio[1:], heights, atol=0.06)
    known = truth(scene)
    assert known["g2_zero_far"] == known["g2_zero"] == pytest.approx(0.25)
    assert known["g2_zero_near"] == pytest.approx(0.25 / heights[0])
    assert g2_measured(scene, side_peaks=(100, 120)) == pytest.approx(0.25, abs=1e-3)


def test_rates_count_the_dark_pulses() -> None:
    scene = scenario(PULSED, 'efficiency = 0.3\ndead_time = "20 ns"')
    expected = truth(scene)["rate_input_1_hz"]
    for times in arms(scene, 4, S // 10):
        # counts cluster: their variance is above Poisson by 2 r tb (1-p)/p, 0.09
        assert times.size * 10 == pytest.approx(expected, abs=5 * np.sqrt(10 * 1.1 * expected))


def test_numbers_are_checked_while_on() -> None:
    with pytest.raises(Exception, match="mu - g2 mu\\^2 / 2 of at most 1"):
        scenario(PULSED.replace("= 0.2", "= 1.5"))
