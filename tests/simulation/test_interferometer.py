from __future__ import annotations

import tomllib

import numpy as np
import pytest

from tagstream.simulation.interferometer import UnbalancedInterferometer
from tagstream.simulation.light import Arm
from tagstream.simulation.scenario import Scenario, build_scenario
from tagstream.simulation.truth import truth
from tests.simulation.scenes import arms, lags, scenario_text

S = 10**12
SOURCE = """
kind = "unbalanced-interferometer"
period = "60 ns"
separation = "3 ns"
photons_per_pulse = 0.6
g2_zero = 0.2
lifetime = "300 ps"
overlap = 0.8
contrast = 0.9
"""


def source(**keys: object) -> UnbalancedInterferometer:
    values = {
        "kind": "unbalanced-interferometer",
        "period": "60 ns",
        "separation": "3 ns",
        "photons_per_pulse": 1e-9,
        "g2_zero": 0.0,
        "overlap": 1.0,
    }
    return UnbalancedInterferometer.model_validate(values | keys)


def two(source: UnbalancedInterferometer, t: float, r: float) -> tuple[Arm, ...]:
    ports = (("transmitted", t, r), ("reflected", r, t))
    return source.seen_by(
        [
            Arm(port, own * 0.5, split=own, beside=other, efficiency=0.5)
            for port, own, other in ports
        ]
    )


def scene(detector: str, t: float = 0.4, r: float = 0.55) -> Scenario:
    text = scenario_text(SOURCE, detector).replace("transmittance = 0.5", f"transmittance = {t}")
    text = text.replace("reflectance = 0.5", f"reflectance = {r}")
    return build_scenario(tomllib.loads(text), "five.toml")


@pytest.mark.parametrize(
    ("keys", "peaks"),
    [
        ({}, (1, 2, 0, 2, 1)),
        ({"overlap": 0.0}, (1, 2, 2, 2, 1)),
        ({"overlap": 0.75, "g2_zero": 0.05, "contrast": 0.92}, (1, 2.1, 0.9304, 2.1, 1)),
    ],
)
def test_the_five_peaks_of_santori(keys: dict[str, float], peaks: tuple[float, ...]) -> None:
    # Santori et al., Nature 419, 594 (2002), formula from memory, re-derived (check values, 3)
    light = source(**keys)
    known = light.known(two(light, 0.5, 0.5), 2_000)
    found = [known[f"peak_{n}"] for n in range(1, 6)]
    np.testing.assert_allclose(found, peaks, atol=1e-6)
    assert known["hom_visibility"] == pytest.approx(keys.get("overlap", 1.0), abs=1e-6)
    if "contrast" in keys:
        assert (1 - known["hom_visibility_five_peaks"]) / 2 == pytest.approx(0.221524, abs=1e-6)


def test_the_peaks_of_the_tags_are_those_stated() -> None:
    """Uneven splitters with loss, background, tails of the peaks in the windows."""
    light = scene('efficiency = 0.5\ndark_rate = "100 kHz"\njitter_fwhm = "800 ps"')
    start, stop = arms(light, 1, S // 8)
    areas = np.array(
        [lags(start, stop, n * 3_000 - 1_500, n * 3_000 + 1_500).size for n in range(-2, 3)]
    )
    known = truth(light)
    expected = np.array([known[f"peak_{n}"] for n in range(1, 6)])
    scale = areas.sum() / expected.sum()
    pulls = (areas - scale * expected) / np.sqrt(areas)
    assert np.sum(pulls**2) < 22  # chi-square of four
    assert areas[0] > 2 * areas[4] * 0.8  # R^3 T against R T^3: the test sees the order
    far = [lags(start, stop, n * 60_000 - 1_500, n * 60_000 + 1_500).size for n in range(1, 9)]
    ratio = areas[2] / np.mean(far)
    spread = ratio * np.sqrt(1 / areas[2] + 1 / sum(far))
    assert ratio == pytest.approx(known["g2_zero_measured"], abs=4 * spread)


def test_rates() -> None:
    light = scene('efficiency = 0.1\ndead_time = "15 ns"')
    known = truth(light)
    assert known["rate_input_1_hz"] > known["rate_input_2_hz"]  # T^2 + R^2 against 2RT
    for times, number in zip(arms(light, 2, S // 4), (1, 2), strict=True):
        assert times.size * 4 == pytest.approx(known[f"rate_input_{number}_hz"], rel=0.006)


def test_exchanged_detectors_mirror_the_peaks() -> None:
    light = source(g2_zero=0.1, overlap=0.5)
    a, b = two(light, 0.4, 0.6)
    np.testing.assert_allclose(light.comb(a, b).central, light.comb(b, a).central[::-1])
    np.testing.assert_allclose(light.comb(a, b).others, light.comb(b, a).others[::-1])


def test_one_detector_and_peaks_too_close() -> None:
    light = source()
    assert light.known(two(light, 0.5, 0.5)[:1], 1_000) == {"indistinguishability": 1.0}
    with pytest.raises(ValueError, match="`separation` of at most a fifth of `period`"):
        source(separation="13 ns")
