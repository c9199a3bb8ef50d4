"""Both ways of counting pairs give the integers of the naive histogram, for any cut."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tagstream.block import Block
from tagstream.tallies.pairs import PairHistograms
from tests import naive
from tests.fakes_blocks import block
from tests.strategies import cuts, tags

PAIRS = [(0, 1), (1, 0), (0, 0), (2, 1), (2, 2)]  # both orders, and channels with themselves
WAYS = st.lists(st.sampled_from(["sparse", "dense"]), min_size=8, max_size=8)


class Chosen(PairHistograms):
    """Takes the way that a test chooses for each piece, also in the middle of a stream."""

    ways: list[str]

    def add(self, piece: Block) -> None:
        if piece.opens:
            self._forget()
        times, wanted = self._wanted_tags(piece)
        if times.size:
            {"sparse": self.add_sparse, "dense": self.add_dense}[self.ways.pop()](times, wanted)
        self._keep_since(piece.end_ps - self._reach // 2, times, wanted)


def expected(events: list[tuple[int, int]], bins: int, bin_ps: int) -> list[list[int]]:
    found = []
    for start, stop in PAIRS:
        starts, stops = ([t for t, c in events if c == channel] for channel in (start, stop))
        counts = naive.histogram(starts, stops, bin_ps, bins)
        if start == stop:
            counts[bins] -= len(starts)
        found.append(counts)
    return found


@given(tags(inputs=4), cuts(), WAYS, st.sampled_from([(20, 10), (3, 7), (1, 1), (40, 100)]))
def test_either_way_for_any_cut(
    events: list[tuple[int, int]], fractions: list[float], ways: list[str], bins: tuple[int, int]
) -> None:
    events = sorted(events)
    counter = Chosen(PAIRS, 4, *bins)
    counter.ways = ways
    bounds = [0, *(int(2_001 * f) for f in fractions), 2_001]
    for i, (begin, end) in enumerate(itertools.pairwise(bounds)):
        inside = [e for e in events if begin <= e[0] < end]
        counter.add(block(inside, begin, end, opens=i == 0))
    assert counter.counts.tolist() == expected(events, *bins)


@pytest.mark.parametrize("bin_ps", [7, 100, 10_000_000])
@pytest.mark.parametrize("way", ["sparse", "dense"])
def test_many_tags_pass_all_chunks_and_groups(bin_ps: int, way: str) -> None:
    rng = np.random.default_rng(2)
    times = np.sort(rng.integers(0, 4_000 * bin_ps, 6_000))
    channels = rng.integers(0, 3, times.size).astype(np.uint8)
    counter = Chosen(PAIRS, 3, 4, bin_ps)
    counter.ways = [way] * 3
    for i, cut in enumerate(np.array_split(np.arange(times.size), 3)):
        begin = 0 if i == 0 else int(times[cut[0]])
        end = int(times[cut[-1]]) + 1
        counter.add(Block(times[cut], channels[cut], begin, end, i == 0))
    for (start, stop), counts in zip(PAIRS, counter.counts, strict=True):
        lags = times[channels == stop][None, :] - times[channels == start][:, None]
        k = (2 * lags + bin_ps) // (2 * bin_ps)
        plain = np.bincount(k[np.abs(k) <= 4] + 4, minlength=9)
        plain[4] -= (channels == start).sum() * (start == stop)
        assert list(counts) == list(plain)


def test_the_way_is_chosen_by_the_neighbours_in_reach(monkeypatch: pytest.MonkeyPatch) -> None:
    taken: list[str] = []
    counter = PairHistograms([(0, 1)], 2, 10, 10)  # 105 ps in reach
    monkeypatch.setattr(counter, "add_sparse", lambda *_: taken.append("sparse"))
    monkeypatch.setattr(counter, "add_dense", lambda *_: taken.append("dense"))
    few = [(t, t // 300 % 2) for t in range(0, 30_000, 300)]
    many = [(t, t % 2) for t in range(30_000, 60_000, 30)]
    counter.add(block(few, 0, 30_000, opens=True))
    counter.add(block(many, 30_000, 60_000))
    assert taken == ["sparse", "dense"]
