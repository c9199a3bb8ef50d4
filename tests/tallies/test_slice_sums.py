"""The parts of a slice add up to the slice, and go apart to the values in force."""

from __future__ import annotations

from typing import Any

from hypothesis import given
from hypothesis import strategies as st

from tagstream.marks import UNMARKED
from tagstream.recording.layout import Mark
from tagstream.settings.measures import CrossCorrelation
from tagstream.tallies import SINGLES
from tagstream.tallies.cross_correlation import SUM_NAMES, build, sums_in
from tagstream.tallies.singles import Singles
from tagstream.tallies.slice_sums import SliceSums
from tagstream.tallies.slicer import cut_at_slices
from tagstream.tallies.split import Splits
from tests import naive
from tests.fakes_blocks import block
from tests.strategies import tags

CHANNELS = {"a": 0, "b": 1}
TALLY = {"name": "t", "kind": "cross-correlation", "start": "a", "stop": "b", "split_by": "p"}


def counted(events: list[tuple[int, int]], marks: list[tuple[int, Any]], slice_ps: int) -> Any:
    """(sums of each slice, splits) of one stretch [0, 2001)."""
    section = CrossCorrelation.model_validate(TALLY | {"max_lag": "200 ps", "bin": "10 ps"})
    splits = Splits([section])
    splits.mark(Mark(t, "p", value) for t, value in marks)
    counting = SliceSums(Singles(2, []), build([section], CHANNELS), splits)
    found = []
    for _, piece in cut_at_slices(block(sorted(events), 0, 2_001, opens=True), slice_ps):
        counting.add(piece)
        found.append(counting.take())
        splits.end_slice()
    return found, splits


@given(
    tags(inputs=2),
    st.lists(st.tuples(st.integers(-9, 2_009), st.sampled_from([1.0, "1", 2.0])), max_size=6),
    st.sampled_from([100, 700, 5_000]),
)
def test_values_equal_the_twin_and_slices_do_not_know_of_marks(
    events: list[tuple[int, int]], marks: list[tuple[int, Any]], slice_ps: int
) -> None:
    slices, splits = counted(events, marks, slice_ps)
    plain, _ = counted(events, [], slice_ps)
    for a, b in zip(slices, plain, strict=True):
        assert a["t"]["counts"].tolist() == b["t"]["counts"].tolist()
        assert a[SINGLES]["counts"].tolist() == b[SINGLES]["counts"].tolist()
        assert a[SINGLES]["live_time_ps"] == b[SINGLES]["live_time_ps"]
    starts, stops = ([t for t, c in events if c == n] for n in (0, 1))
    expected = naive.split_histograms(starts, stops, marks, (10, 20))
    found = {v: part["counts"].tolist() for v, part in splits["t"].parts.items()}
    assert {v: c for v, c in found.items() if any(c)} == {
        v: c for v, c in expected.items() if any(c)
    }


def test_expected_pairs_are_those_of_the_parts() -> None:
    """Ten times the light in one half: the halves expect more together than their mean does."""
    bright = [(t, t // 5 % 2) for t in range(0, 1_000, 5)]
    dim = [(t, t // 50 % 2) for t in range(1_000, 2_000, 50)]
    parts, splits = counted(bright + dim, [(1_000, 1.0)], 5_000)
    whole, _ = counted(bright + dim, [], 5_000)
    assert parts[0]["t"]["expected_pairs"][20] > 1.3 * whole[0]["t"]["expected_pairs"][20]
    assert list(splits["t"].parts) == [UNMARKED, 1.0]


def test_what_adds_up_is_found_among_what_results_hold() -> None:
    ((slice_sums,), _) = counted([(5, 0), (9, 1)], [], 5_000)
    held = {**slice_sums["t"], "g2": slice_sums["t"]["counts"], "lag": slice_sums["t"]["counts"]}
    assert set(sums_in(held)) == set(SUM_NAMES) == set(slice_sums["t"])
