from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray

from tagstream.simulation.draws import poisson_photons, renewals, spread
from tagstream.simulation.light import Arm

ARMS = (Arm("transmitted", 0.3), Arm("reflected", 0.1))


def rng() -> np.random.Generator:
    return np.random.default_rng(5)


def test_photons_choose_arms_in_proportion_to_the_shares() -> None:
    counts = np.bincount(spread(100_000, ARMS, rng()), minlength=2)
    assert counts[0] == pytest.approx(75_000, abs=4 * np.sqrt(100_000 * 0.75 * 0.25))
    assert counts.sum() == 100_000


@pytest.mark.parametrize(("shares", "arm"), [((0.0, 0.2), 1), ((0.2, 0.0), 0), ((0.2,), 0)])
def test_an_arm_without_share_gets_nothing(shares: tuple[float, ...], arm: int) -> None:
    chosen = spread(1000, [Arm("transmitted", share) for share in shares], rng())
    assert set(chosen.tolist()) == {arm}


def test_poisson_photons_are_uniform_and_darkness_is_empty() -> None:
    photons = poisson_photons(1e9, 10**8, ARMS, rng())  # 4e4 detected
    assert photons.offsets_ps.size == pytest.approx(40_000, abs=800)
    parts = np.histogram(photons.offsets_ps, 4, (0, 1e8))[0]
    assert parts.sum() == photons.offsets_ps.size
    np.testing.assert_allclose(parts, 10_000, atol=400)
    assert poisson_photons(0.0, 10**8, ARMS, rng()).offsets_ps.size == 0
    assert poisson_photons(1e9, 10**8, [Arm("reflected", 0.0)], rng()).offsets_ps.size == 0


@pytest.mark.parametrize("mean", [1.0, 100.0])  # a wrong mean costs batches, not events
def test_renewals_lists_every_event_before_the_end(mean: float) -> None:
    drawn: list[int] = []

    def intervals(count: int) -> NDArray[np.int64]:
        new = np.random.default_rng(len(drawn)).integers(1, 4, count)
        drawn.extend(new.tolist())
        return new

    times, after = renewals(3, 150, intervals, mean)
    expected, at = [], 3
    for step in drawn:
        if at >= 150:
            break
        expected.append(at)
        at += step
    assert times.tolist() == expected
    assert after == at


def test_renewals_that_begin_past_the_end() -> None:
    times, after = renewals(7.5, 5.0, np.ones, 1.0)
    assert times.tolist() == []
    assert after == 7.5
