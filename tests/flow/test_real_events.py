"""Real events through the whole program give the histogram that they are known to give."""

from __future__ import annotations

from pathlib import Path

import h5py
import numpy as np
import pytest

from tests.flow.conftest import Caller
from tests.flow.program import ROOT

# t(4) - t(2) in bins of 8192 ticks of 2^-13 s, bin k = [k, k + 1), k = -10..9, of the 1000 events
# in tests/data/two_detector_events.csv (origin there; the counts are a plain calculation).
PUBLISHED = (
    *(189, 208, 216, 227, 185, 219, 221, 200, 215, 209),
    *(203, 190, 192, 213, 177, 191, 226, 213, 195, 215),
)


@pytest.mark.parametrize("interval", [(), ('feed.begin="0 s"', 'feed.end="2000 s"')])
def test_the_published_histogram(
    tmp_path: Path, tagstream: Caller, real_events: Path, interval: tuple[str, ...]
) -> None:
    chosen = [f'feed.path="{real_events}"', f'results.folder="{tmp_path}"', *interval]
    sets = [word for text in chosen for word in ("--set", text)]
    done = tagstream("run", ROOT / "config/csv-events.toml", *sets)
    assert done.code == 0, done.err
    with h5py.File(tmp_path / "csv-events" / "latest.h5") as file:
        # Half a bin of delay centres the bins: [k, k + 1) becomes bin k + 1 of -10..10.
        counts = file["run/lags/counts"][()]
        assert tuple(counts[1:]) == PUBLISHED
        health = file["run/health"]
        assert health["received"][()] == health["kept"][()] == 1000


def test_a_general_library_agrees_on_the_same_events(real_events: Path) -> None:
    # numpy.histogram with exact int64 edges, over all differences at once.
    import tagstream

    ticks, detector = np.loadtxt(real_events, np.int64, delimiter=",", skiprows=1, unpack=True)
    a, b = ticks[detector == 2], ticks[detector == 4]
    edges = np.arange(-10, 11, dtype=np.int64) * 8192
    # The last numpy bin includes its upper edge; no difference lies there.
    differences = (b[None, :] - a[:, None]).ravel()
    assert not (differences == edges[-1]).any()
    assert tuple(np.histogram(differences, edges)[0]) == PUBLISHED
    # 2 ticks -> 1: doubled, so that the half-bin shift is whole.
    _, counts = tagstream.cross_correlation(2 * a, 2 * b + 8192, 10 * 16384, 16384)
    assert tuple(counts[1:]) == PUBLISHED
