from __future__ import annotations

import json
import tomllib
from math import sqrt
from pathlib import Path

import pytest

from tagstream.simulation.scenario import build_scenario, load_scenario
from tagstream.simulation.truth import g2_measured, truth
from tests.simulation.scenes import PULSED, scenario, scenario_text, tags

SHIPPED = sorted((Path(__file__).parents[2] / "config" / "scenarios").glob("*.toml"))
S = 10**12


def test_truth_of_pulsed_light_is_plain_and_complete() -> None:
    known = truth(scenario(PULSED, more="[clock]\ninput = 9\ndivider = 4\n"))
    assert json.loads(json.dumps(known)) == known
    assert set(known) == {
        *("source", "g2_zero", "signal_fraction", "period_ps", "g2_zero_measured"),
        *("g2_zero_window_ps", "rate_input_1_hz", "rate_input_2_hz", "rate_input_9_hz"),
    }
    assert known["rate_input_9_hz"] == 20e6
    assert known["g2_zero_window_ps"] == known["period_ps"] == 12_500


def test_the_window_of_the_scenario_is_the_default() -> None:
    scene = scenario(PULSED, more='[truth]\nwindow = "3 ns"\n')
    assert truth(scene)["g2_zero_window_ps"] == 3_000
    assert truth(scene)["g2_zero_measured"] == g2_measured(scene, 3_000) != g2_measured(scene, 9e3)


def test_one_detector_has_rates_but_no_g2() -> None:
    text = scenario_text()
    scene = build_scenario(tomllib.loads(text[: text.rindex("[[detector]]")]), "one.toml")
    assert truth(scene)["rate_input_1_hz"] == 500_000
    assert "g2_zero_measured" not in truth(scene)
    with pytest.raises(ValueError, match="two detectors"):
        g2_measured(scene)


@pytest.mark.parametrize("file", SHIPPED, ids=[file.stem for file in SHIPPED])
def test_shipped_scenarios_give_the_rates_they_state(file: Path) -> None:
    scene = load_scenario(file)
    known = truth(scene)
    inputs = tags(scene, 11, S)[1]
    for detector in scene.detectors:
        rate = known[f"rate_input_{detector.input}_hz"]
        assert (inputs == detector.input).sum() == pytest.approx(rate, abs=4 * sqrt(rate))


def test_four_scenarios_are_shipped() -> None:
    assert len(SHIPPED) >= 4
