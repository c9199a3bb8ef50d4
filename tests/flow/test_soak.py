"""A short soak: memory does not grow, nothing is dropped."""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path

import numpy as np

from tagstream.recording import RecordingWriter
from tests.flow.soak import soak

MOST_GROWTH_MB = 30.0  # in seven seconds; each second brings 40 MB of tags


def test_memory_is_flat_under_load(tmp_path: Path) -> None:
    rng = np.random.default_rng(1)
    path, step = tmp_path / "steady.h5", 5 * 10**10
    with RecordingWriter(path, tick=Fraction(1)) as writer:
        for begin in range(0, 10**12, step):
            times = np.sort(rng.integers(begin, begin + step, 200_000))
            writer.add(times, rng.integers(1, 3, times.size).astype(np.uint8), begin, begin + step)
    found = soak(tmp_path / "d", path, 20)
    assert found.tags == 20 * 20 * 200_000
    assert found.dropped == 0
    assert found.sessions == 20
    assert found.growth_mb < MOST_GROWTH_MB
