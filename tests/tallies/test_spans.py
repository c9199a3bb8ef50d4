"""Spans equal the plain sums of their slices, integer by integer."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tagstream.settings import Rolling
from tagstream.tallies.spans import Spans


def rolling(*spans: str) -> Rolling:
    return Rolling.model_validate({"slice": "1 s", "spans": list(spans)})


def slice_sums(value: int) -> dict[str, dict[str, np.ndarray]]:
    edge = np.array([value, 2 * value, 0], np.int64)
    return {
        "t": {
            "counts": edge * 300,
            "pair_time_ps": edge + 10 if value % 3 == 0 else np.array(10, np.int64),
            "period_sum_ps": edge * 10**12,
            "expected_pairs": np.array(0.1 * value),
        }
    }


@given(st.lists(st.tuples(st.integers(1, 4), st.integers(0, 9)), min_size=1, max_size=150))
def test_every_span_is_the_sum_of_its_slices(steps: list[tuple[int, int]]) -> None:
    spans = Spans(rolling("5 s", "100 s"))
    index, history = 7, []
    for step, value in steps:
        index += step
        history.append((index, value))
        spans.add(index, slice_sums(value))
        for span in spans:
            inside = [
                slice_sums(v)["t"]
                for i, v in history
                if span.begin_ps <= i * 10**12 and (i + 1) * 10**12 <= span.end_ps
            ]
            held = span.sums["t"]
            assert list(held["counts"]) == np.sum([s["counts"] for s in inside], axis=0).tolist()
            assert held["period_sum_ps"].dtype == np.int64
            sums = np.sum([s["period_sum_ps"] for s in inside], axis=0)
            assert list(held["period_sum_ps"]) == sums.tolist()
            total = sum(s["pair_time_ps"] for s in inside)
            assert np.array_equal(
                np.broadcast_to(held["pair_time_ps"], 3), np.broadcast_to(total, 3)
            )
            expected = float(sum(s["expected_pairs"] for s in inside))
            assert float(held["expected_pairs"]) == pytest.approx(expected, abs=1e-9)


def test_a_long_span_advances_by_a_sixtieth() -> None:
    hour = rolling("1 h")
    assert hour.parts(hour.spans_ps[0]) == (60, 60)
    spans = Spans(hour)
    for index in range(3_700):
        spans.add(index, slice_sums(1))
    run, last_hour = spans
    assert (run.begin_ps, run.end_ps) == (0, 3_700 * 10**12)
    assert last_hour.begin_ps == 120 * 10**12
    assert last_hour.end_ps == 3_700 * 10**12
    assert last_hour.sums["t"]["counts"][0] == 300 * (3_700 - 120)


@pytest.mark.parametrize(
    ("span", "parts"), [("64 s", (64, 1)), ("65 s", (32, 2)), ("101 s", (50, 2))]
)
def test_at_most_64_parts(span: str, parts: tuple[int, int]) -> None:
    made = rolling(span)
    assert made.parts(made.spans_ps[0]) == parts


def test_spans_begin_anew_but_the_run_goes_on() -> None:
    spans = Spans(rolling("5 s"))
    for index in range(4):
        spans.add(index, slice_sums(1))
    spans.restart()
    run, five = spans
    assert run.sums["t"]["counts"][0] == 1200
    assert (five.begin_ps, five.end_ps) == (4 * 10**12, 4 * 10**12)
    assert list(five.sums["t"]["counts"]) == [0, 0, 0]
    assert five.sums["t"]["expected_pairs"] == 0.0
    spans.add(4, slice_sums(2))
    _, five = spans
    assert (five.begin_ps, five.end_ps) == (4 * 10**12, 5 * 10**12)
    assert five.sums["t"]["counts"][0] == 600
    assert float(five.sums["t"]["expected_pairs"]) == pytest.approx(0.2)
