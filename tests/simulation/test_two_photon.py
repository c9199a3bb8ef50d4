from __future__ import annotations

from math import sqrt

import numpy as np
import pytest

from tagstream.recording.layout import Mark
from tagstream.simulation.pieces import simulate_pieces
from tagstream.simulation.truth import truth
from tagstream.simulation.two_photon import TwoPhotonInterference
from tests.simulation.scenes import arms, lags, scenario

S = 10**12
TURN = S // 20
SOURCE = """
kind = "two-photon-interference"
period = "40 ns"
photons_per_pulse = 0.5
g2_zero = 0.2
lifetime = "300 ps"
overlap = 0.8
alternate = "50 ms"
"""


def ratio(start: np.ndarray, stop: np.ndarray) -> tuple[float, float]:
    areas = [lags(start, stop, n * 40_000 - 5_000, n * 40_000 + 5_000).size for n in range(9)]
    value = 8 * areas[0] / sum(areas[1:])
    return value, value * sqrt(1 / areas[0] + 1 / sum(areas[1:]))


def test_parallel_and_crossed_pulses() -> None:
    scene = scenario(
        SOURCE, 'efficiency = 0.4\ndark_rate = "200 kHz"', '[truth]\nwindow = "10 ns"\n'
    )
    pair, known = arms(scene, 1, S // 10), truth(scene, S // 10)
    found = {}
    for name, turn in (("parallel", 0), ("crossed", 1)):
        value, sigma = ratio(*(times[times // TURN % 2 == turn] for times in pair))
        assert value == pytest.approx(known[f"g2_zero_{name}"], abs=4 * sigma)
        found[name] = value
    assert known["hom_visibility"] == pytest.approx(
        1 - found["parallel"] / found["crossed"], abs=0.02
    )
    value, sigma = ratio(*pair)
    assert value == pytest.approx(known["g2_zero_measured"], abs=4 * sigma)


def test_rates() -> None:
    scene = scenario(SOURCE, 'efficiency = 0.1\ndead_time = "25 ns"')
    known = truth(scene, S // 2)
    for times, number in zip(arms(scene, 2, S // 2), (1, 2), strict=True):
        rate = known[f"rate_input_{number}_hz"]
        assert times.size * 2 == pytest.approx(rate, abs=4 * np.sqrt(2 * rate))


@pytest.mark.parametrize(("mu", "g", "overlap"), [(1.0, 0.01, 0.919192), (0.999, 0.02, 0.9)])
def test_the_correction_of_ollivier_gives_the_overlap(mu: float, g: float, overlap: float) -> None:
    # Ollivier et al., PRL 126, 063602 (2021), from memory: M = (V + g2) / (1 - g2)
    source = f'kind = "two-photon-interference"\nperiod = "40 ns"\nphotons_per_pulse = {mu}\n'
    scene = scenario(source + f"g2_zero = {g}\noverlap = {overlap}")
    visibility = truth(scene)["hom_visibility_train"]
    assert (visibility + g) / (1 - g) == pytest.approx(overlap, abs=2 * g**2)
    assert visibility < overlap - g  # raw


def test_marks_say_which_it_is() -> None:
    scene = scenario(SOURCE, "efficiency = 0.5")
    pieces = list(simulate_pieces(scene, 1, 3 * TURN + 1))
    found = [mark for piece in pieces for mark in piece.marks]
    names = ["parallel", "crossed", "parallel", "crossed"]
    assert found == [Mark(n * TURN, "polarisation", name) for n, name in enumerate(names)]
    for piece in pieces:
        assert all(piece.begin_ps <= mark.time_ps < piece.end_ps for mark in piece.marks)


def test_always_parallel_is_marked_once() -> None:
    scene = scenario(SOURCE.replace('alternate = "50 ms"', ""), "efficiency = 0.5")
    assert isinstance(scene.source, TwoPhotonInterference)
    pieces = list(simulate_pieces(scene, 1, S // 4))
    assert [m for p in pieces for m in p.marks] == [Mark(0, "polarisation", "parallel")]
    known = truth(scene)
    assert known["g2_zero_measured"] == pytest.approx(known["g2_zero_parallel"])
