from __future__ import annotations

import tomllib

import numpy as np
import pytest

from tagstream.simulation.scenario import Scenario, build_scenario
from tagstream.simulation.truth import truth
from tests.simulation.scenes import arms, lags, scenario_text

S = 10**12
DETECTOR = 'efficiency = 0.4\njitter_fwhm = "400 ps"\ndark_rate = "20 kHz"'
WINDOW = 1_001  # ticks of 1 ps: |lag| <= 500


def scene() -> Scenario:
    text = scenario_text(
        'kind = "pairs"\nrate = "8 MHz"\ncorrelation_fwhm = "200 ps"',
        DETECTOR,
        f'[[detector]]\ninput = 3\nport = "herald"\n{DETECTOR}\n[truth]\nwindow = "{WINDOW} ps"\n',
    )
    return build_scenario(tomllib.loads(text), "pairs.toml")


def near(herald: np.ndarray, other: np.ndarray) -> np.ndarray:
    """Whether each herald has a tag of the other within half the window."""
    first = np.searchsorted(other, herald - WINDOW // 2, side="left")
    return np.searchsorted(other, herald + WINDOW // 2, side="right") > first


def test_every_stated_number_is_found_in_the_tags() -> None:
    known = truth(scene())
    a, b, h = arms(scene(), 6, S // 4)
    with_a, with_b = near(h, a), near(h, b)
    both = np.sum(with_a & with_b)
    found = both * h.size / (with_a.sum() * with_b.sum())
    assert found == pytest.approx(known["g2_zero_heralded"], abs=4 * found / np.sqrt(both))
    efficiency = known["heralding_efficiency_transmitted"]
    slack = 4 * np.sqrt(efficiency / h.size)
    assert with_a.mean() == pytest.approx(efficiency, abs=slack)
    pairs = lags(h, a, -WINDOW // 2, WINDOW // 2 + 1).size
    accidental = h.size * a.size * WINDOW / (S // 4)
    ratio = known["coincidence_to_accidental_ratio_transmitted"]
    assert pairs / accidental == pytest.approx(ratio, rel=5 / np.sqrt(pairs))
    displaced = lags(h, a, 50_000, 50_000 + WINDOW).size
    assert displaced == pytest.approx(accidental, abs=4 * np.sqrt(accidental))


def test_signals_alone_are_poisson() -> None:
    known = truth(scene())
    assert known["g2_zero"] == known["g2_zero_measured"] == 1
    for times, number in zip(arms(scene(), 7, S // 4), (1, 2, 3), strict=True):
        rate = known[f"rate_input_{number}_hz"]
        assert times.size * 4 == pytest.approx(rate, abs=8 * np.sqrt(rate))


def test_without_window_or_herald_nothing_is_stated() -> None:
    source = scene().source
    assert source.known(scene().arms, 0.0) == {}
    assert source.known(scene().arms[:2], 1_000) == {}
