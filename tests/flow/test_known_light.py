"""Light whose g2 is known in closed form, from tags through the whole pipeline to the curve."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tests.fakes_settings import make_settings
from tests.fakes_sink import run_in_memory
from tests.flow.test_coverage import Scene
from tests.simulation.scenes import scenario

S = 10**12


def curve(source: str, seed: int) -> dict[str, NDArray[np.float64]]:
    tally = {"name": "hbt", "kind": "cross-correlation", "start": "arm_a", "stop": "arm_b"}
    chosen = make_settings(
        tally=[tally | {"max_lag": "60 ns", "bin": "1 ns"}], rolling={"slice": "100 ms"}
    )
    sink = run_in_memory(chosen, Scene(scenario(source), seed, 2 * S))
    arrays = sink.snapshots[-1].spans[0].tallies["hbt"]
    return {name: np.asarray(arrays[name], np.float64) for name in arrays}


def chi2_per_bin(arrays: dict[str, NDArray[np.float64]], known: NDArray[np.float64]) -> float:
    """Pearson's chi-squared over the bins, divided by their number (expected counts are > 50)."""
    expected = arrays["expected_pairs"] * known
    assert expected.min() > 50
    return float(np.mean((arrays["counts"] - expected) ** 2 / expected))


def test_poisson_light_is_one_at_every_lag() -> None:
    # Coherent light: g2 = 1 (Loudon, The Quantum Theory of Light, ch. 6).
    arrays = curve('kind = "coherent"\nrate = "4 MHz"', seed=5)
    assert abs(chi2_per_bin(arrays, np.ones(121)) - 1) < 5 * np.sqrt(2 / 121)


def test_a_two_level_emitter_is_one_minus_an_exponential() -> None:
    # g2 = 1 - exp(-|t| / t0) (Loudon, ch. 8), averaged over each centred bin of width w:
    # 1 - exp(-|t| / t0) sinh(w / 2 t0) / (w / 2 t0), and at zero 1 - (1 - e^-x) / x, x = w / 2 t0.
    t0, w = 10.0, 1.0
    arrays = curve('kind = "emitter"\nrate = "20 MHz"\nt0 = "10 ns"', seed=6)
    lag = np.abs(arrays["lag"]) / 1000
    x = w / 2 / t0
    known = 1 - np.exp(-lag / t0) * np.sinh(x) / x
    known[60] = 1 - (1 - np.exp(-x)) / x
    assert abs(chi2_per_bin(arrays, known) - 1) < 5 * np.sqrt(2 / 121)
    flat = chi2_per_bin(arrays, np.ones(121))
    assert flat > 10  # the check would see a curve that is wrong
