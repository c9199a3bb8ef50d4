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
        *("brightness_hz", "splitting_ratio", "lifetime_ps"),
        *("incoming_rate_input_1_hz", "incoming_rate_input_2_hz"),
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
    seconds = 62 if scene.kind == "dip-scan" else 0.4  # of a scan the truth is that of all of it
    known = truth(scene, int(seconds * S))
    assert json.loads(json.dumps(known)) == known
    inputs = tags(scene, 11, int(seconds * S))[1]
    for detector in scene.detectors:
        counts = known[f"rate_input_{detector.input}_hz"] * seconds
        assert (inputs == detector.input).sum() == pytest.approx(counts, abs=4 * sqrt(counts))


def test_a_scenario_for_each_experiment_is_shipped() -> None:
    assert {file.stem for file in SHIPPED} >= {
        *("emitter-cw", "emitter-pulsed", "blinking-emitter", "heralded-source", "interferometer"),
        *("polarisation", "dip-scan", "detector-characterisation", "stability"),
    }
    assert {load_scenario(file).kind for file in SHIPPED} > {"thermal", "pairs", "shelving-emitter"}


def test_what_is_stated_of_each_detector() -> None:
    detector = """
efficiency = 0.4
jitter_fwhm = "300 ps"
dead_time = "40 ns"
dark_rate = "2 kHz"
delay = "7 ns"
afterpulse_probability = 0.02
afterpulse_time = "100 ns"
"""
    known = truth(scenario(detector=detector))
    assert known["incoming_rate_input_1_hz"] == pytest.approx(202_000)
    assert known["rate_input_1_hz"] == pytest.approx(204_400, rel=0.002)  # 1 / (1 + 0.0081 - 0.02)
    assert known["dead_time_input_2_ps"] == 40_000
    assert known["dark_count_rate_input_2_hz"] == 2_000
    assert known["timing_jitter_input_1_ps"] == pytest.approx(300)
    assert known["afterpulse_probability_input_1"] == 0.02
    assert known["delay_input_1_ps"] == 7_000
