from __future__ import annotations

from math import exp

import numpy as np
import pytest

from tagstream.simulation.light import Arm
from tagstream.simulation.pair_fates import NOWHERE, Clicks, PairFates, detected

ARMS = [Arm("transmitted", 0.2), Arm("herald", 0.3), Arm("reflected", 0.1)]


def test_photons_of_a_pair_are_detected_each_for_itself() -> None:
    fates = PairFates(ARMS)
    assert fates.p_detected == pytest.approx(1 - 0.7 * 0.7) == detected(ARMS)
    heralds, signals = fates.draw(100_000, np.random.default_rng(1))
    pairs = 100_000 / 0.51
    for found, share in (
        (heralds == 1, 0.3),
        (signals == 0, 0.2),
        (signals == 2, 0.1),
        ((heralds == 1) & (signals == 2), 0.03),
    ):
        assert np.sum(found) == pytest.approx(pairs * share, abs=4 * np.sqrt(pairs * share))
    assert set(heralds.tolist()) == {1, NOWHERE}
    assert not np.any((heralds == NOWHERE) & (signals == NOWHERE))


@pytest.mark.parametrize("arms", [ARMS[:1], [ARMS[1], Arm("transmitted", 0.0)]])
def test_one_detector_alone(arms: list[Arm]) -> None:
    fates = PairFates(arms).draw(100, np.random.default_rng(1))
    assert np.all((fates.heralds == NOWHERE) != (fates.signals == NOWHERE))


def test_probabilities_of_clicks_by_hand() -> None:
    one = Clicks(lambda share: 1 - 0.05 * share, 0.0)  # a pair in one of twenty pulses, never two
    t, h, r = ARMS
    assert one.all_of(h) == pytest.approx(0.015)
    assert one.all_of(h, t) == pytest.approx(0.05 * 0.3 * 0.2)
    assert one.all_of(t, r) == pytest.approx(0, abs=1e-15)
    assert one.heralded_g2(h, t, r) == pytest.approx(0, abs=1e-10)
    assert one.partner_share(h, t) == pytest.approx(0.2)
    assert one.g2(h, t) == pytest.approx(20)


def test_a_worked_problem() -> None:
    # check values, section 7 (read): pulse rate 1e6/s, p 0.05, efficiencies 0.30 and 0.40 give
    # heralds 1.5e4/s, coincidences 6.0e3/s, heralding 0.40
    clicks = Clicks(lambda share: 1 - 0.05 * share, 0.0)
    herald, signal = Arm("herald", 0.3), Arm("transmitted", 0.4)
    assert 1e6 * clicks.all_of(herald) == pytest.approx(1.5e4)
    assert 1e6 * clicks.all_of(herald, signal) == pytest.approx(6.0e3)
    assert clicks.partner_share(herald, signal) == pytest.approx(0.40)


def test_dark_counts_click_too() -> None:
    clicks = Clicks(lambda share: 1.0, 10_000)  # no light, a gate of 10 ns
    noisy = Arm("transmitted", 0.5, dark_rate_hz=1e6)
    assert clicks.all_of(noisy) == pytest.approx(1 - exp(-0.01))
