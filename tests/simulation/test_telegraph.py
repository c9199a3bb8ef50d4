from __future__ import annotations

import numpy as np
import pytest

from tagstream.simulation.telegraph import Telegraph, TelegraphState

BLINKS = Telegraph(on_ps=300.0, off_ps=100.0)


def states(lengths: int, seed: int = 1) -> np.ndarray:
    """On or off every 40 ps, from steps of so many instants."""
    rng, state, parts = np.random.default_rng(seed), TelegraphState(BLINKS), []
    for _ in range((60_000 if lengths > 1 else 12_000) // lengths):
        parts.append(state.is_on(np.linspace(0, 40 * (lengths - 1), lengths), lengths * 40, rng))
    return np.concatenate(parts).astype(float)


@pytest.mark.parametrize("lengths", [1, 7, 3000])
def test_the_correlation_is_stated_whatever_the_steps(lengths: int) -> None:
    on = states(lengths)
    assert on.mean() == pytest.approx(BLINKS.share, abs=0.012)
    for apart in (1, 3):
        product = (on[apart:] * on[:-apart]).mean() / on.mean() ** 2
        known = 1 + BLINKS.depth * np.exp(-40 * apart / BLINKS.time_ps)
        assert product == pytest.approx(known, abs=0.02)


def test_numbers_of_a_telegraph() -> None:
    assert (BLINKS.share, BLINKS.time_ps) == (0.75, 75.0)
    assert BLINKS.depth == pytest.approx(1 / 3)


def test_steps_without_instants_still_pass_time() -> None:
    rng, state = np.random.default_rng(1), TelegraphState(BLINKS)
    kept = 0
    for _ in range(4000):
        before = state.is_on(np.array([5.0]), 40, rng)[0]
        assert state.is_on(np.empty(0), 10**6, rng).size == 0
        kept += before == state.is_on(np.array([5.0]), 40, rng)[0]
    # forgotten after 1 us: p^2 + (1 - p)^2 agree by chance
    assert kept / 4000 == pytest.approx(0.625, abs=0.035)
