"""The chain of conditioning: the same blocks' tags for any cut of the stream, and the rules."""

from __future__ import annotations

from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from tagstream.block import Block
from tagstream.conditioning import conditioned as stream
from tagstream.counters import Counters
from tagstream.feeds import Arrivals
from tagstream.units import BEYOND_LIMIT_PS, TIME_LIMIT_PS
from tests import naive
from tests.fakes_settings import make_settings
from tests.strategies import arrivals, cuts, split, tags

S = 10**12


def conditioned(
    pieces: list[Arrivals], **tables: Any
) -> tuple[list[Block], list[tuple[int, int]], Counters]:
    blocks: list[Block] = []
    counters = Counters()
    for found in stream(pieces, make_settings(**tables)):
        blocks += found.blocks
        counters = found.counters
        decided = counters.kept + sum(counters.dropped.values())
        assert counters.received == decided
    assert counters.in_flight == 0
    assert counters.arrived == counters.kept + sum(counters.dropped.values())
    kept = [(int(t), int(c)) for b in blocks for t, c in zip(b.times_ps, b.channels, strict=True)]
    return blocks, kept, counters


def live(blocks: list[Block]) -> list[tuple[int, int]]:
    """Live stretches, joined from blocks."""
    found: list[tuple[int, int]] = []
    for block in blocks:
        if block.opens:
            found.append((block.begin_ps, block.end_ps))
        else:
            assert block.begin_ps == found[-1][1]
            found[-1] = (found[-1][0], block.end_ps)
    return found


@given(tags(), cuts(), st.integers(0, 500), st.sampled_from([0, 150]))
def test_assumed_coverage_any_cut(
    events: list[tuple[int, int]], fractions: list[float], disorder: int, delay: int
) -> None:
    tables = {"max_disorder": f"{disorder} ps", "delays": [0, delay, 0], "dead_times": [0, 0, 30]}
    blocks, kept, counters = conditioned(
        [arrivals(part) for part in split(events, fractions)], **tables
    )
    good, dropped = naive.judged(events, disorder, 10 * S, TIME_LIMIT_PS)
    delayed = naive.ordered([(t + (delay if i == 1 else 0), i) for t, i in good])
    assert kept == naive.without_dead_time(delayed, [0, 0, 30])
    assert counters.dropped["late"] == dropped["late"]
    if delayed:
        assert live(blocks) == [(delayed[0][0] + 1, delayed[-1][0] + 1)] or len(delayed) == 1


@given(tags(), cuts(), st.integers(0, 500), st.sampled_from([(0, 0), (150, 0), (-40, 60)]))
def test_vouched_coverage_any_cut(
    events: list[tuple[int, int]],
    fractions: list[float],
    disorder: int,
    delays: tuple[int, int],
) -> None:
    parts = list(split(events, fractions))
    pieces = [
        arrivals(part, begin_ps=100, end_ps=1_900, complete=i == len(parts) - 1)
        for i, part in enumerate(parts)
    ]
    tables = {"max_disorder": f"{disorder} ps", "delays": [*delays, 0]}
    blocks, kept, counters = conditioned(pieces, **tables)
    inside = [e for e in events if 100 <= e[0] < 1_900]
    good, _ = naive.judged(inside, disorder, 10 * S, TIME_LIMIT_PS)
    delayed = naive.ordered([(t + [*delays, 0][i], i) for t, i in good])
    begin, end = 100 + max(*delays, 0), 1_900 + min(*delays, 0)
    assert kept == [e for e in delayed if begin <= e[0] < end]
    assert live(blocks) == [(begin, end)]
    assert counters.dropped["outside_interval"] == len(events) - len(inside)


def test_contiguous_intervals_are_one_stretch_and_a_hole_is_a_gap() -> None:
    pieces = [
        arrivals([(5, 0)], begin_ps=0, end_ps=10),
        arrivals([], begin_ps=10, end_ps=20),
        arrivals([(33, 0)], begin_ps=30, end_ps=40),
    ]
    blocks, kept, counters = conditioned(pieces)
    assert live(blocks) == [(0, 20), (30, 40)]
    assert kept == [(5, 0), (33, 0)]
    assert (counters.gaps, counters.gap_time_ps) == (1, 10)


def test_a_lossy_interval_is_a_gap_and_its_tags_are_dropped() -> None:
    pieces = [
        arrivals([(5, 0)], begin_ps=0, end_ps=10),
        arrivals([(15, 0)], begin_ps=10, end_ps=20, lossy=True),
        arrivals([(25, 0)], begin_ps=20, end_ps=30),
    ]
    blocks, kept, counters = conditioned(pieces)
    assert live(blocks) == [(0, 10), (20, 30)]
    assert kept == [(5, 0), (25, 0)]
    assert counters.dropped["in_gap"] == 1


def test_a_gap_marker_in_an_unvouched_stream_ends_the_stretch_at_its_last_tag() -> None:
    pieces = [arrivals([(5, 0), (9, 0)]), arrivals([(20, 0), (26, 0)], gap_before=True)]
    blocks, kept, counters = conditioned(pieces)
    assert live(blocks) == [(6, 10), (21, 27)]
    assert len(kept) == 4
    assert (counters.gaps, counters.gap_time_ps) == (1, 11)


def test_stretches_never_overlap_when_delays_exceed_a_gap() -> None:
    pieces = [arrivals([(5, 0), (9, 1)]), arrivals([(12, 0), (40, 0)], gap_before=True)]
    blocks, kept, counters = conditioned(pieces, delays=[0, 20, 0])
    assert live(blocks) == [(6, 30), (41, 41)]
    assert kept == [(5, 0), (29, 1), (40, 0)]
    assert counters.dropped["in_gap"] == 1


def test_late_is_judged_before_delays_and_equal_times_keep_arrival_order() -> None:
    events = [(100, 0), (90, 1), (89, 1), (100, 1)]
    _, kept, counters = conditioned([arrivals(events)], max_disorder="10 ps", delays=[0, 10, 0])
    assert kept == [(100, 0), (100, 1), (110, 1)]
    assert counters.dropped["late"] == 1
    assert counters.largest_disorder_ps == 11


def test_unlisted_inputs_are_counted_but_move_the_latest_time() -> None:
    _, kept, counters = conditioned([arrivals([(0, 0), (50, 9), (10, 0)])], max_disorder="20 ps")
    assert kept == [(0, 0)]
    assert counters.dropped["unlisted_input"] == 1
    assert counters.dropped["late"] == 1


def test_one_flipped_bit_costs_one_tag() -> None:
    events = [(i * 100, 0) for i in range(60)]
    events[30] = (events[30][0] | 1 << 47, 0)
    blocks, kept, counters = conditioned([arrivals(events)])
    assert len(kept) == 59
    assert counters.dropped["jump"] == 1
    assert len(live(blocks)) == 1


def test_a_confirmed_jump_ahead_is_a_gap_for_any_cut() -> None:
    events = [(i, 0) for i in range(5)] + [(20 * S + i, 0) for i in range(20)]
    whole = conditioned([arrivals(events)])
    assert live(whole[0]) == [(1, 5), (20 * S + 1, 20 * S + 20)]
    for cut in range(26):
        parts = conditioned([arrivals(events[:cut]), arrivals(events[cut:])])
        assert (live(parts[0]), parts[1], parts[2].dropped) == (
            live(whole[0]),
            whole[1],
            whole[2].dropped,
        )


def test_a_long_pause_in_a_vouched_interval_is_live_time() -> None:
    events = [(0, 0), (20 * S, 0), (20 * S + 5, 1)]
    piece = arrivals(events, begin_ps=0, end_ps=30 * S)
    blocks, kept, _ = conditioned([piece])
    assert kept == events
    assert live(blocks) == [(0, 30 * S)]


def test_a_restarted_source_goes_on_at_the_next_slice() -> None:
    first = [(30 * S + i, 0) for i in range(20)]
    again = [(i, 0) for i in range(20)]
    blocks, kept, counters = conditioned([arrivals(first + again)])
    assert live(blocks) == [(30 * S + 1, 30 * S + 20), (31 * S + 1, 31 * S + 20)]
    assert len(kept) == 40
    assert counters.gaps == 1


def test_fewer_than_seventeen_tags_far_back_are_late() -> None:
    first = [(30 * S + i, 0) for i in range(20)]
    _, kept, counters = conditioned([arrivals([*first, *((i, 0) for i in range(16))])])
    assert len(kept) == 20
    assert counters.dropped["late"] == 16


def test_times_beyond_the_limit_are_counted_never_wrapped() -> None:
    _, kept, counters = conditioned([arrivals([(5, 0), (BEYOND_LIMIT_PS, 0), (6, 0)])])
    assert kept == [(5, 0), (6, 0)]
    assert counters.dropped["overflow"] == 1


@given(
    st.lists(st.tuples(st.sampled_from([0, 15 * S, 40 * S]), st.integers(0, 50)), max_size=80),
    cuts(),
)
def test_wild_times_have_one_fate_for_any_cut(
    wild: list[tuple[int, int]], fractions: list[float]
) -> None:
    events = [(base + t, 0) for base, t in wild]
    whole = conditioned([arrivals(events)])
    parts = conditioned([arrivals(part) for part in split(events, fractions)])
    assert parts[1] == whole[1]
    assert parts[2].dropped == whole[2].dropped
    assert live(parts[0]) == live(whole[0])


@given(st.lists(st.sampled_from([0, 5, 12, 30, 31]), max_size=60))
def test_far_tags_equal_the_naive_rule(seconds: list[int]) -> None:
    events = [(s * S, 0) for s in seconds if s >= (seconds[0] if seconds else 0)]
    _, kept, counters = conditioned([arrivals(events)], max_disorder="0 ps")
    good, dropped = naive.judged(events, 0, 10 * S, TIME_LIMIT_PS)
    assert kept == naive.ordered(good)
    assert {key: counters.dropped[key] for key in dropped} == dropped


@pytest.mark.parametrize("gap", [False, True])
def test_a_gap_keeps_the_dead_time(gap: bool) -> None:
    pieces = [arrivals([(0, 0), (10, 0)]), arrivals([(12, 0), (20, 0)], gap_before=gap)]
    _, kept, _ = conditioned(pieces, dead_times=[5, 0, 0])
    assert kept == [(0, 0), (10, 0), (20, 0)]


def test_a_source_that_starts_again_after_days_goes_on() -> None:
    days = 100 * 86_400 * S
    first, again = [(days + i, 0) for i in range(20)], [(i, 0) for i in range(20)]
    blocks, kept, _ = conditioned([arrivals(first + again)])
    assert len(kept) == 40
    assert live(blocks)[1][0] > days
    for base in (-days, 2 * days // 3):
        _, kept, counters = conditioned(
            [
                arrivals([(days // 2 + i, 0) for i in range(20)]),
                arrivals([(base + i, 0) for i in range(20)]),
            ]
        )
        assert len(kept) + sum(counters.dropped.values()) == 40


def test_starting_again_and_again_ends_at_the_limit_not_in_a_loop() -> None:
    events = [(20 * S * (i // 17 % 2) + i % 17, 0) for i in range(17 * 400)]
    _, kept, counters = conditioned([arrivals(events)])
    assert len(kept) + sum(counters.dropped.values()) == len(events)


def test_sparse_light_in_a_vouched_interval_is_all_kept() -> None:
    events = [(20 * S * i, 0) for i in range(60)]
    whole = arrivals(events, begin_ps=0, end_ps=1_300 * S)
    assert conditioned([whole])[1] == events
    parts = [
        arrivals(events[i : i + 7], begin_ps=0, end_ps=1_300 * S, complete=i >= 53)
        for i in range(0, 60, 7)
    ]
    assert conditioned(parts)[1] == events


def test_a_gap_among_unconfirmed_tags_is_a_gap() -> None:
    pieces = [
        arrivals([(i, 0) for i in range(3)] + [(100 * S + i, 0) for i in range(8)]),
        arrivals([(101 * S + i, 0) for i in range(20)], gap_before=True),
    ]
    blocks, kept, counters = conditioned(pieces)
    assert counters.dropped["jump"] == 8
    assert live(blocks) == [(1, 3), (101 * S + 1, 101 * S + 20)]
    assert len(kept) == 23


def test_live_time_never_passes_the_vouched_end() -> None:
    pieces = [
        arrivals([(5_000, 0), (9_000, 0)]),
        arrivals([(100, 0)], begin_ps=50, end_ps=400, complete=False),
        arrivals([(200, 0)], begin_ps=50, end_ps=400),
    ]
    blocks, _, _ = conditioned(pieces)
    assert max(end for _, end in live(blocks)) <= 9_001


def test_an_interval_that_follows_an_incomplete_one_is_a_gap() -> None:
    pieces = [
        arrivals([(1, 0), (5, 0)], begin_ps=0, end_ps=10, complete=False),
        arrivals([(25, 0)], begin_ps=20, end_ps=30),
    ]
    blocks, _, counters = conditioned(pieces, max_disorder="0 ps")
    assert live(blocks) == [(0, 5), (20, 30)]
    assert counters.gaps == 1
