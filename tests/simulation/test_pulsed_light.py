from __future__ import annotations

from math import sqrt

import numpy as np
import pytest
from numpy.typing import NDArray

from tagstream.simulation.truth import truth
from tests.simulation.scenes import arms, lags, scenario

S = 10**12
PERIOD = 100_000


def source(kind: str, more: str = "") -> str:
    return f'kind = "{kind}"\nperiod = "100 ns"\nphotons_per_pulse = 0.8\n{more}'


SOURCES = {
    "coherent": (source("pulsed-coherent"), 1.0),
    "thermal": (source("pulsed-thermal"), 2.0),
    "modes": (source("pulsed-thermal", "modes = 2.5"), 1.4),
}


def measured(pair: list[NDArray[np.int64]], window: int = 10_000) -> tuple[float, float]:
    half = window // 2
    start, stop = pair
    areas = [
        lags(start, stop, n * PERIOD - half, n * PERIOD + half).size for n in (0, 1, 2, 3, 4, 5, 6)
    ]
    side = sum(areas[1:]) / 6
    return areas[0] / side, sqrt(areas[0] * (1 + areas[0] / side / 6)) / side


@pytest.mark.parametrize("name", SOURCES)
def test_photons_without_dead_time(name: str) -> None:
    text, g2 = SOURCES[name]
    scene = scenario(text, "efficiency = 0.6")
    value, sigma = measured(arms(scene, 1, S // 10))
    assert truth(scene)["g2_zero_measured"] == pytest.approx(g2)
    assert value == pytest.approx(g2, abs=5 * sigma)  # bunched pairs vary more than Poisson


@pytest.mark.parametrize("name", SOURCES)
def test_clicks_saturate(name: str) -> None:
    text, g2 = SOURCES[name]
    scene = scenario(text, 'efficiency = 0.6\ndead_time = "30 ns"')
    pair = arms(scene, 2, S // 10)
    value, sigma = measured(pair)
    expected = truth(scene)["g2_zero_measured"]
    assert value == pytest.approx(expected, abs=4 * sigma)
    assert g2 == 1 or expected < g2 - 8 * sigma  # the test can tell clicks from photons
    rate = truth(scene)["rate_input_1_hz"]
    for times in pair:
        assert times.size * 10 == pytest.approx(rate, abs=4 * sqrt(10 * rate))
