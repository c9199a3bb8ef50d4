from __future__ import annotations

from math import sqrt

import numpy as np
import pytest

from tagstream.simulation.light import Arm
from tagstream.simulation.thermal import Thermal
from tagstream.simulation.truth import g2_measured, truth
from tests.simulation.scenes import arms, g2_curve, scenario

S = 10**12
SOURCE = 'kind = "thermal"\nrate = "10 MHz"\ncoherence_time = "40 ns"'


def test_g2_is_that_of_chaotic_light_with_a_lorentzian_spectrum() -> None:
    scene = scenario(SOURCE, "efficiency = 0.5")
    edges = np.arange(-60_000, 60_001, 5_000)
    g2, sigma = g2_curve(arms(scene, 1, S // 20), edges, S // 20)
    tail = np.sign(edges) * 20_000 * (1 - np.exp(-np.abs(edges) / 20_000))
    expected = 1 + np.diff(tail) / np.diff(edges)
    assert np.sum(((g2 - expected) / sigma) ** 2) == pytest.approx(24, abs=28)
    assert g2.max() > 1.5


@pytest.mark.parametrize(
    ("window", "g2"),
    [("4 ns", 1.951626), ("40 ns", 1.632121), ("400 ns", 1.099995)],
)
def test_the_average_over_a_bin(window: str, g2: float) -> None:
    # check values, section 8 (calc): 1 + (1 - e^-r) / r at r = 0.1, 1, 10
    scene = scenario(SOURCE, more=f'[truth]\nwindow = "{window}"\n')
    assert truth(scene)["g2_zero_measured"] == pytest.approx(g2, abs=1e-6)
    assert truth(scene)["g2_zero"] == 2


def test_dark_counts_and_jitter_lower_the_peak_as_the_truth_says() -> None:
    scene = scenario(SOURCE, 'efficiency = 0.5\njitter_fwhm = "30 ns"\ndark_rate = "2 MHz"')
    g2, sigma = g2_curve(arms(scene, 2, S // 20), np.array([-4_000, 4_000]), S // 20)
    assert g2[0] == pytest.approx(g2_measured(scene, 8_000), abs=4 * sigma[0])
    assert g2_measured(scene, 8_000) < 1.5


def test_counts_in_a_time_vary_as_thermal_light_makes_them() -> None:
    """Short beside the coherence time the number is geometric: variance m + m^2."""
    scene = scenario(SOURCE.replace("40 ns", "40 us"), "efficiency = 1.0")
    counts = np.histogram(arms(scene, 3, S // 32)[0], np.arange(0, S // 32, 800_000))[0]
    mean = counts.mean()
    assert mean == pytest.approx(4, rel=0.1)
    # the field changes by a fiftieth of its coherence time within a count
    assert counts.var() == pytest.approx(mean + mean**2, rel=0.1)


def test_no_light_and_no_seams() -> None:
    dark = Thermal.model_validate({"kind": "thermal", "rate": "0 Hz", "coherence_time": "1 ns"})
    assert dark.light([Arm("any", 1.0)]).draw(0, S, np.random.default_rng(1)).offsets_ps.size == 0
    bright = Thermal.model_validate({"kind": "thermal", "rate": "1 MHz", "coherence_time": "1 ns"})
    light, rng = bright.light([Arm("any", 1.0)]), np.random.default_rng(1)
    draws = [light.draw(0, S // 1000, rng).offsets_ps for _ in range(50)]
    assert all(np.all((draw >= 0) & (draw < S // 1000)) for draw in draws)
    count = sum(draw.size for draw in draws)
    assert count == pytest.approx(50_000, abs=5 * sqrt(50_000))
