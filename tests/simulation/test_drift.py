from __future__ import annotations

import numpy as np
import pytest

from tagstream.simulation.drift import HOUR_PS, Drift
from tagstream.simulation.light import Photons
from tagstream.simulation.truth import g2_measured, truth
from tests.simulation.scenes import PULSED, arms, g2_curve, scenario

S = 10**12
SWING = '[drift]\nswing = 0.4\nperiod = "200 ms"\n'


def drift(**keys: object) -> Drift:
    return Drift.model_validate(keys)


def test_factors() -> None:
    both = drift(fading_per_hour=0.1, swing=0.2, period="4 h")
    np.testing.assert_allclose(both.factor([0, HOUR_PS, 3 * HOUR_PS]), [1, 0.9 * 1.2, 0.729 * 0.8])
    assert drift(fading_per_hour=0.5).factor(-HOUR_PS) == 1
    assert drift().factor([5 * HOUR_PS]).tolist() == [1.0]


@pytest.mark.parametrize("turns", [0.5, 3.25, 5_000.0])
def test_means_over_a_run(turns: float) -> None:
    swing = drift(swing=0.5, period="1 h")
    duration = int(turns * HOUR_PS)
    first = (1 - np.cos(2 * np.pi * turns)) / (2 * np.pi * turns)
    assert swing.mean(lambda factor: factor, duration) == pytest.approx(1 + 0.5 * first, abs=1e-4)
    if turns == 5_000:
        assert swing.mean(lambda factor: factor**2, duration) == pytest.approx(1.125, abs=1e-3)
        weighted = swing.mean(lambda factor: factor, duration, lambda factor: factor)
        assert weighted == pytest.approx(1.125, abs=1e-3)


def test_thinned_light_follows_the_factor() -> None:
    swing = drift(swing=0.5, period="1 s")
    rng = np.random.default_rng(1)
    photons = Photons(rng.random(200_000) * S, np.zeros(200_000, np.uint8))
    left = swing.thinned(photons, 7 * S, rng).offsets_ps
    counts = np.histogram(left, 4, (0, S))[0]
    quarters = 1 + 0.5 * 2 / np.pi * np.array([1, 1, -1, -1])
    np.testing.assert_allclose(counts, 50_000 * quarters / 1.5, atol=900)


def test_rates_and_g2_of_light_that_swings() -> None:
    detector = 'efficiency = 0.7\ndead_time = "50 ns"\ndark_rate = "500 kHz"'
    scene = scenario('kind = "emitter"\nrate = "4 MHz"\nt0 = "40 ns"', detector, SWING)
    known = truth(scene, S // 2)  # two and a half turns
    assert known["rate_input_1_hz"] != pytest.approx(truth(scene, S)["rate_input_1_hz"], rel=0.01)
    pair = arms(scene, 1, S // 2)
    for times in pair:
        expected = known["rate_input_1_hz"]
        assert times.size * 2 == pytest.approx(expected, abs=6 * np.sqrt(expected))
    parts = [[t[t // (S // 100) == n] % (S // 100) for t in pair] for n in range(50)]
    sums = np.array(
        [np.array(g2_curve(part, np.array([-2_000, 2_000]), S // 100)).ravel() for part in parts]
    )
    weights = np.array([part[0].size * part[1].size for part in parts])
    value = np.average(sums[:, 0], weights=weights)
    sigma = np.sqrt(np.sum((sums[:, 1] * weights) ** 2)) / weights.sum()
    assert value == pytest.approx(g2_measured(scene, 4_000, duration_ps=S // 2), abs=4 * sigma)


def test_a_scenario_that_fades_in_hours() -> None:
    scene = scenario(PULSED, "efficiency = 0.5", "[drift]\nfading_per_hour = 0.5\n")
    hours = truth(scene, 2 * HOUR_PS)["rate_input_1_hz"]
    assert hours == pytest.approx(80e6 * 0.1 * 0.25 * 0.75 / 2 / np.log(2), rel=1e-3)


@pytest.mark.parametrize(
    ("keys", "message"),
    [
        ({"swing": 0.1}, "together"),
        ({"period": "1 h"}, "together"),
        ({"swing": 1.0, "period": "1 h"}, "swing"),
        ({"fading_per_hour": -0.1}, "fading_per_hour"),
    ],
)
def test_drifts_that_cannot_be(keys: dict[str, object], message: str) -> None:
    with pytest.raises(ValueError, match=message):
        drift(**keys)
