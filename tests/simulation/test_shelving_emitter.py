from __future__ import annotations

import numpy as np
import pytest
from scipy.linalg import expm

from tagstream.simulation.shelving_emitter import ShelvingEmitter
from tagstream.simulation.truth import truth
from tests.simulation.scenes import arms, g2_curve, scenario

S = 10**12
SOURCE = """
kind = "shelving-emitter"
rate = "8 MHz"
excitation_time = "10 ns"
lifetime = "4 ns"
shelving = 0.05
shelf_time = "300 ns"
"""


def emitter() -> ShelvingEmitter:
    source = scenario(SOURCE).source
    assert isinstance(source, ShelvingEmitter)
    return source


def test_closed_form_equals_the_rate_equations() -> None:
    """Occupation of the excited state after a photon, over its mean, by matrix exponential."""
    x, y, z, q = 1 / 10, 1 / 4, 1 / 300, 0.05
    rates = np.array([[-x, (1 - q) * y, z], [x, -y, 0], [0, q * y, -z]])
    settled = (expm(rates * 1e5) @ [1, 0, 0])[1]
    source = emitter()
    (t1, t2), a = source.times_ps, source.bunching
    for lag in (0.5, 3.0, 40.0, 200.0):
        exact = (expm(rates * lag) @ [1, 0, 0])[1] / settled
        lag_ps = lag * 1000
        assert 1 - (1 + a) * np.exp(-lag_ps / t1) + a * np.exp(-lag_ps / t2) == pytest.approx(exact)
    assert source.emitted_hz == pytest.approx(settled * y * (1 - q) * 1e9)


def test_g2_of_the_tags_is_the_closed_form() -> None:
    scene = scenario(SOURCE, "efficiency = 0.5")
    edges = np.concatenate((np.arange(0, 20_000, 1_000), np.arange(20_000, 500_001, 20_000)))
    g2, sigma = g2_curve(arms(scene, 1, S // 4), edges, S // 4)
    known = truth(scene)
    a, t1, t2 = (known[f"g2_fit_{name}"] for name in ("a", "t1_ps", "t2_ps"))
    primitive = edges + (1 + a) * t1 * np.exp(-edges / t1) - a * t2 * np.exp(-edges / t2)
    expected = np.diff(primitive) / np.diff(edges)
    assert np.sum(((g2 - expected) / sigma) ** 2) == pytest.approx(44, abs=45)


def test_rates() -> None:
    scene = scenario(SOURCE, 'efficiency = 0.5\ndead_time = "30 ns"')
    expected = truth(scene)["rate_input_1_hz"]
    assert expected < 1.95e6
    for times in arms(scene, 2, S // 4):
        assert times.size * 4 == pytest.approx(expected, rel=0.01)  # bunched: Fano 1.6


def test_the_check_value_of_three_levels() -> None:
    # Kurtsiefer et al. (check values, section 8): a 0.5, t1 1, t2 50 at 0.5, 5, 50
    lag = np.array([0.5, 5, 50])
    curve = 1 - 1.5 * np.exp(-lag) + 0.5 * np.exp(-lag / 50)
    np.testing.assert_allclose(curve, [0.585229, 1.442312, 1.183940], atol=1e-6)


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ("8 MHz", "80 MHz", "`rate` of at most 32.7586 MHz"),
        ("300 ns", "5 ns", "g2 would oscillate"),
        ("0.05", "1.0", "shelving"),
    ],
)
def test_what_cannot_be(old: str, new: str, message: str) -> None:
    text = SOURCE.replace(old, new)
    if "oscillate" in message:
        text = text.replace("0.05", "0.9").replace('"4 ns"', '"10 ns"')
    with pytest.raises(Exception, match=message):
        scenario(text)
