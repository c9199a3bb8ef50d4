from __future__ import annotations

import numpy as np
import pytest

from tagstream.simulation.meeting import FIRST, PulsePairs, Survivors, bunched, bunching_chance
from tagstream.simulation.pulsed_emitter import PulsedEmitter


@pytest.mark.parametrize(
    ("r", "visibility"), [(0.50, 1), (0.55, 0.98020), (0.60, 0.92308), (0.70, 0.72414)]
)
def test_the_highest_visibility_of_a_splitter(r: float, visibility: float) -> None:
    # check values, section 3 (formula read): 2RT / (R^2 + T^2)
    assert bunching_chance(r, 1 - r) == pytest.approx(visibility, abs=5e-6)


@pytest.mark.parametrize(("r", "overlap"), [(0.5, 1.0), (0.5, 0.0), (0.3, 1.0), (0.6, 0.7)])
def test_two_photons_leave_as_interference_makes_them(r: float, overlap: float) -> None:
    # one photon in each input: P11 = (T - R)^2, P20 = P02 = 2RT when they are alike (read)
    count, rng = 200_000, np.random.default_rng(1)
    reflected = rng.random(2 * count) < r
    meets = np.arange(2 * count).reshape(2, count)
    chances = np.full(count, bunching_chance(r, 1 - r) * overlap)
    reflected = bunched(reflected, meets, chances, rng)
    outputs = np.array([[0], [1]]) ^ reflected.reshape(2, count)
    in_second = outputs.sum(axis=0)
    both = r * (1 - r) * (1 + overlap)
    found = np.bincount(in_second, minlength=3) / count
    np.testing.assert_allclose(found, [both, 1 - 2 * both, both], atol=4 / np.sqrt(count) / 2)


def test_photons_that_do_not_meet_are_left_alone() -> None:
    reflected = np.array([True, False, True])
    after = bunched(reflected, np.empty((2, 0), np.int64), np.empty(0), np.random.default_rng(1))
    assert after.tolist() == reflected.tolist()


def test_what_losses_leave_of_a_pulse() -> None:
    none, first, second, both = Survivors.of(0.3, 0.1, 0.5).chances
    assert (first, second, both) == pytest.approx((0.175, 0.025, 0.025))
    assert none == pytest.approx(1 - 0.225)


def test_only_first_photons_of_both_pulses_are_partners() -> None:
    source = PulsedEmitter.model_validate(
        {"kind": "pulsed-emitter", "period": "10 ns", "photons_per_pulse": 0.8, "g2_zero": 0.5}
    )
    pairs = PulsePairs(source, 0.7)
    comers = pairs.draw(0, 10**9, np.random.default_rng(2))  # 1e5 periods
    assert comers.numbers.size == pytest.approx(2 * 0.8 * 0.7 * 1e5, rel=0.01)
    here = np.flatnonzero((comers.pulses == FIRST) & (comers.partners >= 0))
    there = comers.partners[here]
    assert np.array_equal(comers.partners[there], here)
    assert np.array_equal(comers.numbers[there], comers.numbers[here])
    assert np.all(comers.pulses[there] != FIRST)
    any_ = source.number_law.any(0.8)
    assert here.size == pytest.approx(1e5 * (any_ * 0.7) ** 2, rel=0.02)
    assert np.array_equal(np.sort(comers.partners[comers.partners >= 0]), np.sort([*here, *there]))
