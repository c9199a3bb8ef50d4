from __future__ import annotations

import tomllib
from math import sqrt

import numpy as np
import pytest

from tagstream.simulation.scenario import build_scenario
from tagstream.simulation.truth import g2_measured, truth
from tests.simulation.scenes import arms, g2_curve, lags, scenario, scenario_text

LASER = 'kind = "coherent"\nrate = "4 MHz"'
S = 10**12


def test_g2_is_one_at_every_lag() -> None:
    scene = scenario(LASER, 'efficiency = 0.5\njitter_fwhm = "300 ps"\ndead_time = "50 ns"')
    pair = arms(scene, 1, S)
    g2, sigma = g2_curve(pair, np.arange(-50_000, 50_001, 2_000), S)
    assert np.sum(((g2 - 1) / sigma) ** 2) == pytest.approx(50, abs=40)  # chi-square of 50 bins
    assert g2_measured(scene) == 1


def test_rates_are_those_of_knoll() -> None:
    # Knoll ch. 4: n = 2e6/s behind 50 ns gives m = 1818181.818/s
    scene = scenario(LASER, 'efficiency = 1.0\ndead_time = "50 ns"')
    assert truth(scene)["rate_input_1_hz"] == pytest.approx(1818181.818, abs=1e-3)
    for times in arms(scene, 2, S):
        # counts behind dead time vary less than Poisson, by 1 / (1 + n tau)
        assert times.size == pytest.approx(1818181.818, abs=4 * sqrt(1.82e6) / 1.1)
        assert np.diff(times).min() >= 50_000


def test_the_gaps_of_dead_time_show_in_the_autocorrelation() -> None:
    """Renewal density of a Poisson process behind dead time, L td = 1 (check values, calc)."""
    scene = scenario('kind = "coherent"\nrate = "2 MHz"', 'efficiency = 1.0\ndead_time = "1 us"')
    times = arms(scene, 3, 2 * S)[0]
    assert times.size / 2 == pytest.approx(0.5e6, abs=4 * sqrt(0.5e6 / 2) / 2)
    for lag_us, expected in ((0.5, 0.0), (1.5, 1.2131), (2.0, 0.7358), (2.5, 1.0528), (4, 1.0088)):
        width = 20_000
        found = lags(times, times, lag_us * 1e6 - width / 2, lag_us * 1e6 + width / 2).size
        pairs = times.size**2 / (2 * S) * width
        # 2.0 is a cusp (0.7358 from below, rising at once above): the bin average exceeds it
        slack = 4 * sqrt(max(found, 1)) / pairs + (0.012 if lag_us == 2.0 else 0.002)
        assert found / pairs == pytest.approx(expected, abs=slack)


def test_dark_counts_add_to_the_rate_and_leave_g2() -> None:
    scene = scenario(LASER, 'efficiency = 0.1\ndark_rate = "300 kHz"')
    assert truth(scene)["rate_input_2_hz"] == pytest.approx(500_000)
    assert g2_measured(scene, 1000.0) == 1
    for times in arms(scene, 4, S):
        assert times.size == pytest.approx(500_000, abs=4 * sqrt(500_000))


def test_an_uneven_splitter_with_loss() -> None:
    text = scenario_text(LASER).replace("transmittance = 0.5", "transmittance = 0.2")
    scene = build_scenario(tomllib.loads(text), "uneven.toml")
    for times, expected in zip(arms(scene, 5, S), (800_000, 2_000_000), strict=True):
        assert times.size == pytest.approx(expected, abs=4 * sqrt(expected))
