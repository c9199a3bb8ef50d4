"""The streaming tally equals the histogram of the whole, however the stream is cut."""

from __future__ import annotations

import itertools
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.typing import NDArray

from tagstream.block import Block
from tagstream.settings.measures import CrossCorrelation as Settings
from tagstream.tallies.cross_correlation import CrossCorrelations, build, expected_pairs
from tagstream.tallies.singles import Singles
from tests import naive
from tests.fakes_blocks import block
from tests.strategies import cuts, tags

CHANNELS = {"a": 0, "b": 1, "c": 2}


def section(name: str, start: str, stop: str, bin_ps: int, max_lag_ps: int) -> Settings:
    table = {"name": name, "kind": "cross-correlation", "start": start, "stop": stop}
    return Settings.model_validate(table | {"max_lag": f"{max_lag_ps} ps", "bin": f"{bin_ps} ps"})


class One:
    """The tally of a single section."""

    def __init__(self, stop: str = "b", bin_ps: int = 10, max_lag_ps: int = 200) -> None:
        self.all = CrossCorrelations([section("t", "a", stop, bin_ps, max_lag_ps)], CHANNELS)
        self.axes = self.all.axes["t"]
        self.singles = Singles(len(CHANNELS), [])

    def add(self, piece: Block) -> None:
        self.singles.add(piece)
        self.all.add(piece)

    def take(self) -> dict[str, NDArray[Any]]:
        return self.all.take(self.singles.take())["t"]


tally = One


def test_sections_with_equal_bins_share_a_pass() -> None:
    sections = [section("x", "a", "b", 10, 200), section("y", "b", "a", 10, 200)]
    sections += [section("z", "a", "b", 10, 100), section("w", "a", "a", 10, 200)]
    shared, alone = build(sections, CHANNELS)
    assert set(shared.axes) == {"x", "y", "w"}
    assert set(alone.axes) == {"z"}
    for one in (shared, alone):
        one.add(block([(10, 0), (50, 1), (55, 0)], 0, 100, opens=True))
    singles = {"counts": np.array([2, 1, 0]), "live_time_ps": np.array(100)}
    sums = shared.take(singles) | alone.take(singles)
    assert list(np.flatnonzero(sums["x"]["counts"]) - 20) == [0, 4]
    assert list(np.flatnonzero(sums["y"]["counts"]) - 20) == [-4, 1]
    assert list(np.flatnonzero(sums["z"]["counts"]) - 10) == [0, 4]
    assert list(np.flatnonzero(sums["w"]["counts"]) - 20) == [-4, 5]


def fed(counter: One, events: list[tuple[int, int]], bounds: list[int]) -> None:
    for i, (begin, end) in enumerate(itertools.pairwise(bounds)):
        counter.add(block([e for e in events if begin <= e[0] < end], begin, end, opens=i == 0))


@given(tags(), cuts(), st.sampled_from(["a", "b"]))
def test_any_cut_gives_the_same_integers(
    events: list[tuple[int, int]], fractions: list[float], stop: str
) -> None:
    events = sorted(events)
    counter = tally(stop)
    fed(counter, events, [0, *(int(2_001 * f) for f in fractions), 2_001])
    sums = counter.take()
    starts, stops = ([t for t, c in events if c == n] for n in (0, CHANNELS[stop]))
    if stop == "a":
        assert list(sums["counts"]) == naive.histogram_of_one(starts, 10, 20)
    else:
        assert list(sums["counts"]) == naive.histogram(starts, stops, 10, 20)
    assert sums["start_counts"] == len(starts)
    assert sums["stop_counts"] == len(stops)
    assert sums["live_time_ps"] == 2_001


def test_a_pair_belongs_to_the_slice_of_its_later_tag() -> None:
    counter = tally()
    counter.add(block([(90, 0)], 0, 100, opens=True))
    assert counter.take()["counts"].sum() == 0
    counter.add(block([(110, 1)], 100, 200))
    assert counter.take()["counts"][20 + 2] == 1


def test_nothing_is_correlated_across_a_gap() -> None:
    counter = tally()
    counter.add(block([(90, 0)], 0, 100, opens=True))
    counter.add(block([(110, 1)], 105, 200, opens=True))
    assert counter.take()["counts"].sum() == 0


def test_the_tag_that_opens_an_assumed_stretch_has_partners_but_is_not_counted() -> None:
    counter = tally()
    counter.add(block([(9, 0), (20, 1)], 10, 100, opens=True))
    sums = counter.take()
    assert sums["counts"].sum() == 1
    assert sums["start_counts"] == 0
    assert sums["stop_counts"] == 1


def test_two_tags_of_one_channel_at_one_time_are_two_ordered_pairs() -> None:
    counter = tally("a")
    counter.add(block([(50, 0), (50, 0)], 0, 100, opens=True))
    assert counter.take()["counts"][20] == 2


def test_expected_pairs_by_hand() -> None:
    # 1e5 starts/s and 1e5 stops/s meet 1e5 * 1e5 * 5e-9 = 50 times a second within 5 ns:
    # the accidental rate R1 R2 w of full width w, as in any counting textbook.
    second = 10**12
    pairs = expected_pairs(10**5, 10**5, second, np.array(second), 5_000)
    assert float(pairs) == pytest.approx(50.0, rel=1e-12)


def test_expected_pairs_do_not_wrap_where_their_product_passes_int64() -> None:
    n, t = 3_100_000_000, 300 * 10**12  # five minutes at 10 million a second each
    assert float(expected_pairs(n, n, t, np.array(t), 100)) == pytest.approx(n * n * 100 / t)


def test_one_channel_with_itself_expects_n_times_n_minus_one() -> None:
    counter = tally("a")
    counter.add(block([(5_000, 0), (6_000, 0), (7_000, 0)], 1_000, 9_000, opens=True))
    counter.take()
    counter.add(block([(15_000, 0), (16_000, 0), (17_000, 0)], 9_000, 19_000))
    assert float(counter.take()["expected_pairs"]) == pytest.approx(3 * 2 * 10 / 10_000)


def test_axes() -> None:
    axes = tally(bin_ps=5, max_lag_ps=10).axes
    assert list(axes["lag"]) == [-10, -5, 0, 5, 10]
    assert list(axes["lag_edges"]) == [-12.5, -7.5, -2.5, 2.5, 7.5, 12.5]
