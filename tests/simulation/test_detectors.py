from __future__ import annotations

from fractions import Fraction
from math import floor

import numpy as np
import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from tagstream.simulation.detectors import Detectors, floor_to_tick
from tagstream.simulation.draws import no_photons
from tagstream.simulation.light import Arm, Photons
from tests import naive, strategies


@given(strategies.tags(), strategies.cuts(), st.lists(st.integers(0, 900), min_size=3, max_size=3))
def test_dead_time_equals_its_naive_twin_whatever_the_pieces(
    tags: list[tuple[int, int]], cuts: list[float], dead: list[int]
) -> None:
    detectors = Detectors([Arm("any", 1.0, dead_time_ps=time) for time in dead])
    tags = naive.ordered(tags)
    kept = []
    for piece in strategies.split(tags, cuts):
        survives = detectors.dead_time(
            np.array([t for t, _ in piece], np.int64), np.array([c for _, c in piece], np.uint8)
        )
        kept += [tag for tag, survivor in zip(piece, survives, strict=True) if survivor]
    assert kept == naive.without_dead_time(tags, dead)


@example([13], Fraction(19, 10))
@given(
    st.lists(st.integers(-(10**15), 10**18), min_size=1, max_size=5),
    st.fractions(min_value=1, max_value=10**8, max_denominator=1000),
)
def test_times_go_down_to_the_tick(times: list[int], tick: Fraction) -> None:
    expected = [floor(t // tick * tick + Fraction(1, 2)) for t in times]
    found = floor_to_tick(np.array(times, np.int64), tick)
    assert found.tolist() == expected
    half = Fraction(1, 2)  # the tick lies in (t - tick, t], and is rounded to a picosecond
    assert all(t - tick - half < f <= t for t, f in zip(times, expected, strict=True))


def test_jitter_has_the_stated_sigma_and_dark_counts_their_rate() -> None:
    arms = (Arm("a", 1.0, jitter_sigma_ps=100.0), Arm("b", 1.0, dark_rate_hz=2e6))
    detectors = Detectors(arms)
    photons = Photons(np.full(50_000, 5e6), np.zeros(50_000, np.uint8))
    times_ps, codes = detectors.respond(photons, 1000, 10**10, np.random.default_rng(3))
    jittered = times_ps[codes == 0] - 5_001_000
    assert jittered.std() == pytest.approx(100, rel=0.015)
    assert jittered.mean() == pytest.approx(-0.5, abs=2)  # rounded down to 1 ps
    dark = times_ps[codes == 1]
    assert dark.size == pytest.approx(20_000, abs=600)
    assert dark.mean() == pytest.approx(1000 + 5e9, rel=0.02)
    assert 1000 <= dark.min() <= dark.max() < 1000 + 10**10


def test_delays_and_their_drift() -> None:
    hour = 3600 * 10**12
    late = Arm("a", 1.0, delay_ps=500, delay_drift=1000.0)
    early = Arm("b", 1.0, delay_drift=-1000.0)
    detectors = Detectors([late, early])
    assert detectors.reach_ps == 1_000_000  # as early as tags may become
    photons = Photons(np.array([0.0, 0.0]), np.array([0, 1], np.uint8))
    for hours, expected in (
        (0, [500, 0]),
        (10, [10_500, -10_000]),
        (2000, [1_000_500, -1_000_000]),
    ):
        begin = hours * hour
        times_ps, _ = detectors.respond(photons, begin, 1, np.random.default_rng(1))
        assert (times_ps - begin).tolist() == expected


def test_no_tag_is_earlier_than_the_reach() -> None:
    detectors = Detectors([Arm("a", 1.0, jitter_sigma_ps=100.0)])
    assert detectors.reach_ps == 1000
    dark = Detectors([Arm("a", 1.0)])
    times_ps, _ = dark.respond(no_photons(), 0, 10**12, np.random.default_rng(1))
    assert times_ps.size == 0
