from __future__ import annotations

import tomllib

import numpy as np
import pytest

from tagstream.simulation.light import Arm
from tagstream.simulation.pulsed_pairs import PulsedPairs
from tagstream.simulation.scenario import Scenario, build_scenario
from tagstream.simulation.truth import truth
from tests.simulation.scenes import arms, scenario_text

S = 10**12
PERIOD = 100_000
DETECTOR = 'efficiency = 0.6\ndead_time = "30 ns"\ndark_rate = "40 kHz"'


def source(**keys: object) -> PulsedPairs:
    values = {"kind": "pulsed-pairs", "period": "100 ns", "pairs_per_pulse": 0.05}
    return PulsedPairs.model_validate(values | keys)


def scene(statistics: str, mean: float = 0.3) -> Scenario:
    text = scenario_text(
        f'kind = "pulsed-pairs"\nperiod = "100 ns"\npairs_per_pulse = {mean}\n'
        f'statistics = "{statistics}"',
        DETECTOR,
        f'[[detector]]\ninput = 3\nport = "herald"\n{DETECTOR}\n[truth]\nwindow = "20 ns"\n',
    )
    return build_scenario(tomllib.loads(text), "pairs.toml")


def clicks_per_pulse(scenario: Scenario, pulses: int) -> np.ndarray:
    """Of each detector, whether it has a tag within 10 ns of each pulse: bool, 3 x pulses."""
    seen = np.zeros((3, pulses), np.bool_)
    for row, times in zip(seen, arms(scenario, 5, pulses * PERIOD), strict=True):
        number = (times + 10_000) // PERIOD
        near = times - number * PERIOD < 10_000
        row[number[near & (number < pulses)]] = True
    return seen


@pytest.mark.parametrize("statistics", ["poisson", "thermal"])
def test_every_stated_number_is_found_in_the_tags(statistics: str) -> None:
    known = truth(scene(statistics))
    a, b, h = clicks_per_pulse(scene(statistics), 2_000_000)
    hab, ha, hb = np.sum(h & a & b), np.sum(h & a), np.sum(h & b)
    found = hab * np.sum(h) / (ha * hb)
    assert found == pytest.approx(known["g2_zero_heralded"], abs=4.5 * found / np.sqrt(hab))
    assert ha / np.sum(h) == pytest.approx(known["heralding_efficiency_transmitted"], rel=0.01)
    assert ha / np.sum(a) == pytest.approx(known["heralding_efficiency_of_transmitted"], rel=0.01)
    ratio = hb * h.size / (np.sum(h) * np.sum(b))
    assert ratio == pytest.approx(known["coincidence_to_accidental_ratio_reflected"], rel=0.01)
    unheralded = np.sum(a & b) * a.size / (np.sum(a) * np.sum(b))
    assert unheralded == pytest.approx(known["g2_zero_measured"], rel=0.02)


@pytest.mark.parametrize(
    ("statistics", "si", "heralded"),
    [("thermal", 22, 0.1776860), ("poisson", 21, 0.0929705)],
)
def test_faint_light_is_that_of_the_textbook(statistics: str, si: float, heralded: float) -> None:
    # check values, section 7 (calc, textbook): mu 0.05, single mode and Poisson
    faint = [Arm(port, 1e-3) for port in ("transmitted", "reflected", "herald")]
    known = source(statistics=statistics).known(faint, 1_000)
    assert known["g2_zero_signal_herald_faint"] == pytest.approx(si)
    assert known["g2_zero_heralded_faint"] == pytest.approx(heralded, abs=1e-7)
    assert known["g2_zero_heralded"] == pytest.approx(heralded, rel=2e-3)
    assert known["coincidence_to_accidental_ratio_transmitted"] == pytest.approx(si, rel=2e-3)


def test_herald_alone_or_no_herald() -> None:
    a, h = Arm("transmitted", 0.3), Arm("herald", 0.3)
    assert "heralding_efficiency_transmitted" in source().known([h, a], 1_000)
    assert "g2_zero_heralded" not in source().known([h, a], 1_000)
    assert set(source().known([a], 1_000)) == {
        "g2_zero_heralded_faint",
        "g2_zero_signal_herald_faint",
    }
    assert source(pairs_per_pulse=0.0).known([h, a], 1_000) == {}
    assert (
        source(pairs_per_pulse=0.0)
        .light([h, a])
        .draw(0, S, np.random.default_rng(1))
        .offsets_ps.size
        == 0
    )
