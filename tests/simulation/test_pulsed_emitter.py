from __future__ import annotations

from math import sqrt

import numpy as np
import pytest
from numpy.typing import NDArray

from tagstream.simulation.light import Arm
from tagstream.simulation.pulsed_emitter import PulsedEmitter
from tagstream.simulation.truth import g2_measured, truth
from tests.simulation.scenes import PULSED, arms, lags, scenario

S = 10**12
PERIOD = 12_500


def source(**keys: object) -> PulsedEmitter:
    values = {"period": "12.5 ns", "photons_per_pulse": 0.1, "g2_zero": 0.1, "lifetime": "1 ns"}
    return PulsedEmitter.model_validate({"kind": "pulsed-emitter", **values, **keys})


def measured(pair: list[NDArray[np.int64]], window: int) -> tuple[float, float]:
    """Central over mean side area (1 to 8 on each side), and its standard deviation."""
    start, stop = pair
    half = window // 2
    areas = [lags(start, stop, m * PERIOD - half, m * PERIOD + half).size for m in range(-8, 9)]
    side = (sum(areas) - areas[8]) / 16
    return areas[8] / side, sqrt(max(areas[8], 1)) / side * sqrt(1 + areas[8] / side / 16)


def test_central_over_side_peaks_as_the_truth_says() -> None:
    scene = scenario(
        PULSED.replace("1 ns", "2.5 ns"),
        'efficiency = 0.9\njitter_fwhm = "700 ps"\ndark_rate = "200 kHz"',
    )
    pair = arms(scene, 1, S // 16)
    for window in (1_000, 5_000, 12_500):
        value, sigma = measured(pair, window)
        expected = g2_measured(scene, float(window))
        assert value == pytest.approx(expected, abs=4 * sigma)
        assert expected > 0.1 + 4 * sigma  # the test can tell it from g2 of the light


def test_two_photons_in_every_pulse() -> None:
    # Fock state n = 2: g2 = 1 - 1/n = 1/2 (textbook)
    pair = 'kind = "pulsed-emitter"\nperiod = "80 MHz"\nphotons_per_pulse = 2.0\ng2_zero = 0.5'
    scene = scenario(pair, "efficiency = 0.2")
    value, sigma = measured(arms(scene, 2, S // 40), 3_000)
    assert sigma < 0.006
    assert value == pytest.approx(0.5, abs=4 * sigma)
    assert truth(scene)["g2_zero_measured"] == pytest.approx(0.5)


def test_one_photon_in_every_pulse_and_no_loss() -> None:
    one = 'kind = "pulsed-emitter"\nperiod = "80 MHz"\nphotons_per_pulse = 1.0\ng2_zero = 0.0'
    start, stop = arms(scenario(one), 3, S // 1000)
    both = np.sort(np.concatenate((start, stop)))
    assert both.tolist() == [PERIOD * n for n in range(80_000)]
    assert start.size == pytest.approx(40_000, abs=4 * 100)


def test_overlapping_peaks_bias_a_perfect_emitter() -> None:
    # The project's own simulation before anything was built (statistics: overlapping peaks):
    # lifetime 3 ns, period 12.5 ns reads 0.040 in a window of 3 ns and 0.126 in one of 12.5 ns
    perfect, arm = source(g2_zero=0.0, lifetime="3 ns"), Arm("any", 0.5)
    assert perfect.g2_measured(arm, arm, 3_000) == pytest.approx(0.040, abs=5e-4)
    assert perfect.g2_measured(arm, arm, 12_500) == pytest.approx(0.126, abs=1e-3)


def test_photon_numbers() -> None:
    emitter = source(photons_per_pulse=0.5, g2_zero=0.4)
    assert emitter.p_two == pytest.approx(0.05)
    assert emitter.p_one == pytest.approx(0.4)
    photons = emitter.light([Arm("any", 0.5)]).draw(0, 10**9, np.random.default_rng(1))
    assert photons.offsets_ps.size == pytest.approx(80_000 * 0.25, abs=4 * sqrt(20_000))


def test_delays_are_exponential() -> None:
    emitter = source(lifetime="2 ns", period="1 us", g2_zero=0.0)
    photons = emitter.light([Arm("any", 1.0)]).draw(0, S // 2, np.random.default_rng(1))
    delays = photons.offsets_ps % 1e6
    assert delays.size == pytest.approx(50_000, abs=4 * sqrt(50_000))
    assert delays.mean() == pytest.approx(2_000, rel=4 / sqrt(50_000))
    assert delays.std() == pytest.approx(2_000, rel=0.03)


@pytest.mark.parametrize(
    ("mean", "dead", "lifetime"),
    [
        (0.6, "20 ns", "0 ns"),
        (0.6, "45 ns", "300 ps"),
        (0.05, "26 ns", "1 ns"),
        (0.4, "0 ns", "1 ns"),
    ],
)
def test_rates_count_the_pulses_that_were_dead(mean: float, dead: str, lifetime: str) -> None:
    text = PULSED.replace("= 0.1\ng", f"= {mean}\ng").replace('"1 ns"', f'"{lifetime}"')
    scene = scenario(text, f'efficiency = 1.0\ndead_time = "{dead}"\ndark_rate = "100 kHz"')
    expected = truth(scene)["rate_input_1_hz"]
    for times in arms(scene, 5, S // 10):
        assert times.size * 10 == pytest.approx(expected, abs=40 * sqrt(expected / 10))


def test_without_dead_time_two_photons_are_two_tags() -> None:
    assert source().registered_rate_hz(Arm("any", 0.5)) == pytest.approx(80e6 * 0.1 * 0.5)
    # and one tag where the dead time ends between the pulses: mu - g2 mu^2 / 2, one pulse dead
    prompt = source(lifetime="0 ns", photons_per_pulse=0.5)
    click = 0.25 - 0.1 * 0.25**2 / 2
    rate = prompt.registered_rate_hz(Arm("any", 0.5, dead_time_ps=20_000))
    assert rate == pytest.approx(80e6 * click / (1 + click))


@pytest.mark.parametrize("window", [0.0, -1.0, 12_501.0])
def test_a_window_that_pulsed_light_cannot_have(window: float) -> None:
    with pytest.raises(ValueError, match="no longer than the period"):
        source().g2_measured(Arm("a", 0.5), Arm("b", 0.5), window)
