"""The last hour of values: short enough for a picture, never older than an hour."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from tagstream.outputs import Row
from tagstream.outputs.layout import HOUR_S, MOST_HISTORY
from tagstream.outputs.recent import RecentValues
from tests.fakes_outputs import SLICE_PS, make_estimate, make_row


def short_row(index: int, slice_ps: int) -> Row:
    """A row whose only estimate is its index."""
    row = make_row(index)
    spans = (make_estimate(value=-1.0), make_estimate(value=float(index)))
    return replace(
        row,
        begin_ps=index * slice_ps,
        end_ps=(index + 1) * slice_ps,
        estimates={"g2_zero": spans},
    )


def test_nothing_yet_gives_four_empty_columns() -> None:
    columns = RecentValues(("run", "10 s"), SLICE_PS).columns("g2_zero")
    assert [column.shape for column in columns] == [(0,)] * 4
    assert {column.dtype for column in columns} == {np.dtype("f8")}


def test_columns_are_the_end_of_the_slice_and_the_shortest_span_bit_for_bit() -> None:
    recent = RecentValues(("run", "10 s"), SLICE_PS)
    rows = [make_row(index) for index in range(5)]
    for row in rows:
        recent.add(row)
    time_s, value, lower, upper = recent.columns("rate_a")
    assert recent.span == "10 s"
    assert time_s.tolist() == [1.0, 2.0, 3.0, 4.0, 5.0]
    assert value.tolist() == [row.estimates["rate_a"][1].value for row in rows]
    assert lower.tolist() == [row.estimates["rate_a"][1].lower for row in rows]
    assert upper.tolist() == [row.estimates["rate_a"][1].upper for row in rows]


def test_without_short_spans_the_run_is_kept() -> None:
    recent = RecentValues(("run",), SLICE_PS)
    recent.add(replace(make_row(0), estimates={"g2_zero": (make_estimate(value=0.25),)}))
    assert recent.span == "run"
    assert recent.columns("g2_zero")[1].tolist() == [0.25]


def test_values_older_than_an_hour_go() -> None:
    recent = RecentValues(("run", "10 s"), SLICE_PS)
    for index in range(HOUR_S + 50):
        recent.add(short_row(index, SLICE_PS))
    time_s, value, *_ = recent.columns("g2_zero")
    assert value.tolist() == list(range(50, HOUR_S + 50))
    assert time_s[-1] - time_s[0] < HOUR_S


def test_a_pause_of_more_than_an_hour_leaves_the_newest_alone() -> None:
    recent = RecentValues(("run", "10 s"), SLICE_PS)
    for index in (0, 1, 10_000):
        recent.add(short_row(index, SLICE_PS))
    assert recent.columns("g2_zero")[1].tolist() == [10_000.0]


def test_short_slices_are_thinned_to_what_a_picture_can_show() -> None:
    slice_ps = SLICE_PS // 8  # 28 800 slices an hour
    recent = RecentValues(("run", "10 s"), slice_ps)
    for index in range(29_000):
        recent.add(short_row(index, slice_ps))
    value = recent.columns("g2_zero")[1]
    assert value.size <= MOST_HISTORY
    assert set(np.diff(value)) == {8.0}
