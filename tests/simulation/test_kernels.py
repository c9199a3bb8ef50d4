from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tagstream.simulation.kernels import fill_intensities, fill_triggered

DEAD = [3, 10]


def naive_triggered(tags: list[tuple[int, int, int]]) -> list[bool]:
    """Each tag needs its cause and a live detector."""
    last: dict[int, int] = {}
    alive: list[bool] = []
    for time, arm, cause in tags:
        ok = (arm not in last or time - last[arm] >= DEAD[arm]) and (cause < 0 or alive[cause])
        alive.append(ok)
        if ok:
            last[arm] = time
    return alive


@given(
    st.lists(st.tuples(st.integers(0, 60), st.integers(0, 1), st.integers(-20, 19)), max_size=30)
)
def test_triggered_tags_equal_their_naive_twin(drawn: list[tuple[int, int, int]]) -> None:
    drawn.sort()
    tags = [(t, arm, cause if cause < i else -1) for i, (t, arm, cause) in enumerate(drawn)]
    times, arms, causes = (np.array([tag[n] for tag in tags], np.int64) for n in range(3))
    survives = np.empty(len(tags), np.bool_)
    last = np.full(2, -(2**62), np.int64)
    fill_triggered(times, arms.astype(np.uint8), causes, np.array(DEAD), last, survives)
    assert survives.tolist() == naive_triggered([(t, a, max(c, -1)) for t, a, c in tags])


def test_the_field_keeps_its_law_and_forgets_exponentially() -> None:
    rng = np.random.default_rng(4)
    count = 200_000
    steps = np.tile([0.3, 5.0], count // 2)  # 0.3 coherence times, then long enough to forget
    intensities = np.empty(count)
    fill_intensities(steps, rng.standard_normal((count, 2)), np.zeros(2), intensities)
    assert intensities.mean() == pytest.approx(1, abs=4 / np.sqrt(count / 2))
    assert (intensities**2).mean() == pytest.approx(2, abs=0.06)  # exponential law
    before, after = intensities[1:-1:2], intensities[2::2]  # 0.3 apart
    assert (before * after).mean() == pytest.approx(1 + np.exp(-0.6), abs=0.06)
    far, near = intensities[:-1:2], intensities[1::2]  # 5 apart
    assert (far * near).mean() == pytest.approx(1 + np.exp(-10), abs=0.02)


def test_the_field_goes_on_where_it_was() -> None:
    rng = np.random.default_rng(5)
    steps, normals = rng.exponential(1, 50), rng.standard_normal((50, 2))
    whole, parts = np.empty(50), np.empty(50)
    fill_intensities(steps, normals, np.zeros(2), whole)
    field = np.zeros(2)
    for begin, end in ((0, 20), (20, 20), (20, 50)):
        fill_intensities(steps[begin:end], normals[begin:end], field, parts[begin:end])
    assert parts.tolist() == whole.tolist()
