from __future__ import annotations

import numpy as np
import pytest

from tagstream.simulation.detectors import Detectors
from tagstream.simulation.light import Arm
from tagstream.simulation.triggered import Triggered
from tagstream.simulation.truth import g2_measured, truth
from tests.simulation.scenes import arms, g2_curve, lags, scenario

S = 10**12
LASER = 'kind = "coherent"\nrate = "400 kHz"'
AFTERPULSES = """
efficiency = 1.0
dead_time = "50 ns"
afterpulse_probability = 0.05
afterpulse_time = "200 ns"
"""
CROSSTALK = 'efficiency = 1.0\ncrosstalk_probability = 0.03\ncrosstalk_delay = "4 ns"'


def test_afterpulses_follow_counts_as_stated() -> None:
    times = arms(scenario(LASER, AFTERPULSES), 1, S)[0]
    for begin, end in ((0, 50_000), (50_000, 150_000), (150_000, 450_000), (450_000, 2_000_000)):
        found = lags(times, times, begin + 1, end + 1).size
        known = times.size**2 / S * (end - max(begin, 50_000))
        after = np.exp(-(max(begin, 50_000) - 50_000) / 2e5) - np.exp(-(end - 50_000) / 2e5)
        # first order: lags of an afterpulse to its own afterpulse come late
        known += 0.05 * times.size * after if begin else 0
        assert found == pytest.approx(max(known, 0), abs=5 * np.sqrt(max(known, 1)) + 0.01 * known)


@pytest.mark.parametrize("rate", ["400 kHz", "4 MHz"])
def test_rates_with_afterpulses(rate: str) -> None:
    scene = scenario(LASER.replace("400 kHz", rate), AFTERPULSES)
    known = truth(scene)["rate_input_1_hz"]
    for times in arms(scene, 2, S // 2):
        # to first order: afterpulses of afterpulses change what they compete with
        assert times.size * 2 == pytest.approx(known, rel=0.002, abs=4 * np.sqrt(2 * known))


def test_crosstalk_shows_at_its_lag_both_ways() -> None:
    scene = scenario(LASER, CROSSTALK)
    start, stop = arms(scene, 3, S)
    for sign in (-1, 1):
        assert lags(start, stop, sign * 4_000, sign * 4_000 + 1).size == pytest.approx(
            0.03 * start.size, abs=5 * np.sqrt(0.03 * start.size)
        )
    rate = truth(scene)["rate_input_2_hz"]
    assert rate == pytest.approx(200_000 * 1.03)
    # crosstalk of crosstalk is left out: 0.03^2
    assert stop.size == pytest.approx(rate, rel=0.002, abs=4 * np.sqrt(rate))
    wide = np.array([-5_000, 5_000])
    g2, _ = g2_curve([start, stop], wide, S)
    assert g2[0] == pytest.approx(g2_measured(scene, 10_000), rel=0.06)
    assert g2[0] > 20  # 2 x 0.03 / (206 kHz x 10 ns) + 1
    assert g2_measured(scene, 6_000) == 1  # the lag lies outside


def test_a_crosstalk_count_may_fall_into_dead_time() -> None:
    scene = scenario(LASER, CROSSTALK + '\ndead_time = "1 us"')
    for times in arms(scene, 4, S):
        assert np.diff(times).min() >= 1_000_000


@pytest.mark.parametrize("parts", [1, 2, 13])
def test_a_sure_afterpulse_comes_at_any_cut(parts: int) -> None:
    """Only a registered count has one: probability 1, one count, a chain without end."""
    arm = Arm("any", 1.0, dead_time_ps=100, afterpulse_probability=1 - 1e-12, afterpulse_ps=1)
    triggered = Triggered([arm], Detectors([arm]))
    rng, found = np.random.default_rng(1), []
    for part in range(parts):
        end = 2_600 * (part + 1) // parts
        light = np.array([10, 20] if part == 0 else [], np.int64)
        times, _ = triggered.registered(light, np.zeros(light.size, np.uint8), end, rng)
        found += times.tolist()
    assert found[0] == 10
    assert 20 not in found  # dead, and so is all that it would have caused
    steps = np.diff(found)
    assert np.all((steps > 100) & (steps < 140))
    assert len(found) == pytest.approx(26, abs=2)


def test_nothing_to_trigger() -> None:
    assert not Triggered([Arm("a", 1.0)], Detectors([Arm("a", 1.0)]))
