"""The counting kernels equal their slow twins, and the histogram keeps its symmetries."""

from __future__ import annotations

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from tagstream.tallies.bins import exact_division
from tagstream.tallies.kernels import (
    bin_of,
    fill_counts,
    fill_pairs,
    fill_periods,
    fill_selected,
    fill_wanted,
)
from tests import naive
from tests.strategies import int64, sorted_times


def pairs(starts: list[int], stops: list[int], bin_ps: int, bins: int) -> list[int]:
    counts = np.zeros(2 * bins + 2, np.int64)
    fill_pairs(int64(starts), int64(stops), exact_division(bins, bin_ps), counts)
    return [int(count) for count in counts[:-1]]


@given(sorted_times(), sorted_times(), st.integers(1, 60), st.integers(1, 20))
def test_pairs_equal_the_naive_histogram(
    starts: list[int], stops: list[int], bin_ps: int, bins: int
) -> None:
    assert pairs(starts, stops, bin_ps, bins) == naive.histogram(starts, stops, bin_ps, bins)


@given(sorted_times(), sorted_times(), st.integers(1, 20))
def test_pairs_of_long_bins_are_divided(starts: list[int], stops: list[int], bins: int) -> None:
    bin_ps = 10**9 + 7  # beyond what a multiplication finds
    assert exact_division(bins, bin_ps)[1] == 0
    starts, stops = ([t * 10**7 for t in times] for times in (starts, stops))
    assert pairs(starts, stops, bin_ps, bins) == naive.histogram(starts, stops, bin_ps, bins)


@given(
    st.lists(st.integers(0, 20), min_size=4, max_size=9),
    st.lists(st.integers(0, 20), max_size=9),
    st.integers(1, 8),
    st.sampled_from([1 << 61, 1 << 62, (1 << 62) + 3, -(1 << 62)]),
)
def test_starts_far_apart_are_not_taken_together(
    starts: list[int], stops: list[int], cut: int, away: int
) -> None:
    """Twice such a lag, modulo 2^64, may be a small number."""
    near = sorted([t + (0 if i < cut else away) for i, t in enumerate(sorted(starts))])
    both = sorted([*stops, *(t + away for t in stops)])
    assert pairs(near, both, 3, 4) == naive.histogram(near, both, 3, 4)


@given(sorted_times(), sorted_times(), st.integers(0, 30), st.integers(1, 20))
def test_swapping_mirrors_exactly_when_the_bin_is_odd(
    starts: list[int], stops: list[int], half: int, bins: int
) -> None:
    odd = 2 * half + 1  # then no whole lag lies on an edge
    assert pairs(starts, stops, odd, bins) == pairs(stops, starts, odd, bins)[::-1]


def test_with_an_even_bin_a_lag_on_the_upper_edge_moves_by_one_bin() -> None:
    assert pairs([0], [50], 100, 2) == [0, 0, 0, 1, 0]  # lag +50 lies in bin 1
    assert pairs([50], [0], 100, 2) == [0, 0, 1, 0, 0]  # lag -50 lies in bin 0, not in bin -1


@given(sorted_times(), sorted_times(), st.integers(1, 30), st.integers(-5, 5))
def test_a_delay_of_whole_bins_shifts_the_histogram(
    starts: list[int], stops: list[int], bin_ps: int, shift: int
) -> None:
    wide = pairs(starts, stops, bin_ps, 20)
    moved = pairs(starts, [t + shift * bin_ps for t in stops], bin_ps, 20)
    assert moved[10:31] == wide[10 - shift : 31 - shift]


def test_times_at_the_end_of_int64_do_not_wrap() -> None:
    late = 106 * 86_400 * 10**12
    assert pairs([late], [late + 100], 100, 2) == [0, 0, 0, 1, 0]
    assert pairs([0, late], [0, late + 100], 100, 2) == [0, 0, 1, 1, 0]
    assert pairs([0, late], [late // 2, late // 2 + 5] * 3 + [late], 100, 2) == [0, 0, 1, 0, 0]


def test_a_regular_comb_gives_a_triangle() -> None:
    comb = list(range(0, 1_000, 10))
    assert pairs(comb, comb, 10, 3) == [97, 98, 99, 100, 99, 98, 97]


@given(st.lists(st.tuples(st.integers(0, 99), st.integers(0, 3)), max_size=40))
def test_selection_and_counts(tags: list[tuple[int, int]]) -> None:
    times, channels = [t for t, _ in tags], [c for _, c in tags]
    out = np.empty(len(tags) + 1, np.int64)
    n = fill_selected(int64(times), np.array(channels, np.uint8), 2, out)
    assert list(out[:n]) == naive.selected(times, channels, 2)
    wanted = np.array([1, 0, 1, 0], np.uint8)
    out_channels = np.empty(len(tags) + 1, np.uint8)
    n = fill_wanted(int64(times), np.array(channels, np.uint8), wanted, out, out_channels)
    assert list(zip(out[:n], out_channels[:n], strict=True)) == [t for t in tags if t[1] in (0, 2)]
    counts = np.zeros(4, np.int64)
    fill_counts(np.array(channels, np.uint8), counts)
    assert list(counts) == naive.channel_counts(channels, 4)
    many = np.zeros(20, np.int64)
    fill_counts(np.array(channels, np.uint8), many)
    assert list(many) == naive.channel_counts(channels, 20)


@given(sorted_times(), st.integers(0, 40))
def test_periods_in_two_pieces(times: list[int], cut: int) -> None:
    last, sums = np.zeros(4, np.int64), np.zeros(3, np.int64)
    fill_periods(int64(times[:cut]), last, sums)
    fill_periods(int64(times[cut:]), last, sums)
    assert tuple(sums.tolist()) == naive.periods(times)


@given(st.integers(1, 2**40), st.integers(1, 1_000), st.data())
def test_the_bin_of_a_doubled_lag_is_exact(bin_ps: int, bins: int, data: st.DataObject) -> None:
    division = exact_division(bins, bin_ps)
    furthest = 2 * (2 * bins + 1) * bin_ps
    multiple = st.integers(0, 2 * bins + 1).map(lambda k: 2 * bin_ps * k)
    near = st.builds(lambda x, d: min(max(x + d, 0), furthest), multiple, st.integers(-1, 1))
    for twice in data.draw(st.lists(near | st.integers(0, furthest), min_size=20)):
        assert bin_of(twice, *division) == twice // (2 * bin_ps)


def test_both_ways_of_division_are_used() -> None:
    assert exact_division(500, 100)[1] > 0
    assert exact_division(5_000, 1_000_000)[1] == 0
