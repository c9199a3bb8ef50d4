"""Which slices are left out: by number alone, in the fraction asked for; and when it is decided."""

from __future__ import annotations

import numpy as np
import pytest

from tagstream.feeds.shed_pattern import LoadMean, ShedPattern, StreamTime, fitting, splitmix64

S = 10**12


def test_the_hash_is_the_published_one() -> None:
    # First outputs of the generator from seed 0: reference implementation by S. Vigna,
    # https://prng.di.unimi.it/splitmix64.c
    assert splitmix64(0) == 0xE220A8397B1DCDAF
    assert splitmix64(0x9E3779B97F4A7C15) == 0x6E789E6AA1B965F4


@pytest.mark.parametrize("keep", [0.1, 0.28, 0.85])
@pytest.mark.parametrize("period", [1, 2, 5, 10])
def test_the_fraction_kept_is_the_one_asked_for_whatever_the_rhythm(
    keep: float, period: int
) -> None:
    """Each phase of light that comes and goes every few slices is kept as often as the others."""
    pattern = ShedPattern()
    pattern.decide(keep, -20_000)
    kept = np.array([pattern.keeps(index) for index in range(-10_000, 10_000)])
    by_phase = kept.reshape(-1, period).mean(axis=0)
    assert np.abs(by_phase - keep).max() < 4 * np.sqrt(keep * (1 - keep) * period / kept.size)


def test_each_decision_has_its_own_slices_and_its_own_pattern() -> None:
    pattern = ShedPattern()
    pattern.decide(0.5, 100)
    first = [pattern.keeps(index) for index in range(300)]
    assert all(first[:100])
    pattern.decide(0.5, 200)
    second = [pattern.keeps(index) for index in range(300)]
    assert second[:200] == first[:200]
    assert second[200:] != first[200:]
    pattern.decide(1.0, 300)
    assert [pattern.keeps(index) for index in range(300)] == second
    assert pattern.keep == 1.0
    assert not pattern.keeps_all
    pattern.forget_before(299)
    assert not pattern.keeps_all
    pattern.forget_before(300)
    assert pattern.keeps_all


@pytest.mark.parametrize(
    ("keep", "cost", "speed", "wanted"),
    [
        (1.0, 0.5, 1.0, 1.0),
        (1.0, 0.5, 2.0, 1.0),  # plays fast, and can wait
        (1.0, 3.0, 0.2, 1.0),  # is slow enough
        (1.0, 3.0, 1 / 3, 0.85 / 3),
        (1.0, 0.89, 1.1, 1.0),
        (0.5, 1.7, 1.0, 0.5),
        (0.5, 1.75, 1.0, 0.5),  # no change for so little
        (0.5, 3.4, 1.0, 0.25),
        (0.9, 0.82, 1.0, 1.0),
        (0.5, 0.7, 1.0, 1.0),
        (0.5, 3.4, 0.2, 1.0),
    ],
)
def test_what_is_kept_follows_the_load(
    keep: float, cost: float, speed: float, wanted: float
) -> None:
    assert fitting(keep, cost, speed) == pytest.approx(wanted)


def test_the_cost_is_that_of_the_busiest_stage_for_what_was_kept() -> None:
    mean = LoadMean(100.0, {"counting": 5.0, "files": 1.0})
    assert not mean.due(101.9)
    assert mean.due(102.0)
    time = StreamTime(kept_ps=4 * S, shed_ps=6 * S)
    assert mean.take(120.0, {"counting": 13.0, "files": 2.0}, time) == (2.0, 0.5)
    assert mean.kept_since(time) == 0
    assert not mean.due(129.9)
    assert mean.due(130.0)
    time.kept_ps += 10 * S
    assert mean.take(130.0, {"counting": 18.0, "files": 12.0}, time) == (1.0, 1.0)
