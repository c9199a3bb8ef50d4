"""Values in force along the stream, and sums apart for each of them."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tagstream.marks import OTHER, UNMARKED
from tagstream.recording.layout import Mark
from tagstream.settings.measures import CrossCorrelation
from tagstream.tallies.split import Splits, SplitSums, ValuesInForce
from tests import naive
from tests.fakes_blocks import block


def sums(value: int) -> dict[str, Any]:
    return {"counts": np.array([value, 1], np.int64), "live_time_ps": np.array(value, np.int64)}


def changes(values: ValuesInForce, until_ps: int) -> list[tuple[int, Any]]:
    """(time, value of "p") of all changes before a time."""
    found = []
    while (at_ps := values.next_change(until_ps)) is not None:
        values.change(at_ps)
        found.append((at_ps, values.values["p"]))
    return found


def test_marks_wait_until_the_stream_reaches_them() -> None:
    values = ValuesInForce(["p"])
    values.add([Mark(30, "p", 2.0), Mark(10, "p", 1.0)])
    assert changes(values, 10) == []
    assert changes(values, 11) == [(10, 1.0)]
    assert changes(values, 40) == [(30, 2.0)]


def test_marks_of_one_time_take_effect_together_and_the_last_to_arrive_holds() -> None:
    values = ValuesInForce(["p", "q"])
    values.add([Mark(10, "p", 1.0), Mark(10, "q", "H"), Mark(10, "p", 2.0)])
    assert changes(values, 20) == [(10, 2.0)]
    assert values.values == {"p": 2.0, "q": "H"}


def test_what_changes_no_value_is_no_change() -> None:
    values = ValuesInForce(["p"])
    values.add([Mark(5, "other_key", 1.0), Mark(10, "p", 1.0), Mark(20, "p", 1)])
    values.add([Mark(30, "p", 3.0), Mark(30, "p", 1.0)])
    assert changes(values, 100) == [(10, 1.0)]


def test_a_number_and_a_text_are_different_values() -> None:
    values = ValuesInForce(["p"])
    values.add([Mark(10, "p", 1.0), Mark(20, "p", "1")])
    assert changes(values, 100) == [(10, 1.0), (20, "1")]


@given(st.lists(st.tuples(st.integers(0, 9), st.sampled_from([1.0, 2.0, "a"]))), st.data())
def test_values_equal_the_naive_rule(marks: list[tuple[int, Any]], data: Any) -> None:
    values = ValuesInForce(["p"])
    values.add([Mark(time, "p", value) for time, value in marks])
    for until in sorted(data.draw(st.lists(st.integers(0, 10)))):
        changes(values, until)
        assert values.values["p"] == naive.value_at(marks, until - 1)


def test_parts_of_one_slice_and_of_several_add_up() -> None:
    split = SplitSums("p", 64)
    for value, more in ((1.0, 5), ("a", 7), (1.0, 11)):
        split.add(value, sums(more))
    assert split.parts == {}  # the slice goes on
    assert split.end_slice() is False
    split.add("a", sums(13))
    split.end_slice()
    assert list(split.parts) == [1.0, "a"]
    assert [int(part["live_time_ps"]) for part in split.parts.values()] == [16, 20]
    assert list(split.parts["a"]["counts"]) == [20, 2]


def test_values_beyond_the_limit_are_other_and_that_is_told_once() -> None:
    split = SplitSums("p", 2)
    told = []
    for value in (UNMARKED, 1.0, 2.0, 3.0, 4.0, 1.0, UNMARKED):
        split.add(value, sums(1))
        told.append(split.end_slice())
    assert list(split.parts) == [UNMARKED, 1.0, 2.0, OTHER]
    assert [int(part["live_time_ps"]) for part in split.parts.values()] == [2, 2, 1, 2]
    assert told == [False, False, False, True, False, False, False]


def test_values_of_one_slice_count_for_the_limit() -> None:
    split = SplitSums("p", 1)
    for value in (1.0, 2.0, UNMARKED):
        split.add(value, sums(1))
    assert split.end_slice()
    assert set(split.parts) == {1.0, OTHER, UNMARKED}


def section(name: str, **more: Any) -> CrossCorrelation:
    table = {"name": name, "kind": "cross-correlation", "start": "a", "stop": "b"}
    return CrossCorrelation.model_validate(table | {"max_lag": "10 ps", "bin": "1 ps"} | more)


def test_each_tally_is_split_by_its_own_key() -> None:
    splits = Splits([section("x", split_by="p"), section("y"), section("z", split_by="q")])
    assert list(splits) == ["x", "z"]
    splits.mark([Mark(10, "p", 1.0), Mark(10, "q", "H")])
    piece = block([], 0, 20)
    assert splits.next_change(block([], 0, 10)) is None
    assert splits.next_change(piece) == 10
    splits.add({"x": sums(1), "y": sums(2), "z": sums(3)})
    splits.change(10)
    splits.add({"x": sums(4), "y": sums(5), "z": sums(6)})
    assert splits.end_slice() == []
    assert {v: int(s["live_time_ps"]) for v, s in splits["x"].parts.items()} == {
        UNMARKED: 1,
        1.0: 4,
    }
    assert {v: int(s["live_time_ps"]) for v, s in splits["z"].parts.items()} == {
        UNMARKED: 3,
        "H": 6,
    }


def test_a_full_split_is_named() -> None:
    splits = Splits([section("x", split_by="p", split_limit=1)])
    for time, value in enumerate((1.0, 2.0)):
        splits.mark([Mark(time, "p", value)])
        splits.change(time)
        splits.add({"x": sums(1)})
    assert splits.end_slice() == ["x"]


def test_an_empty_block_of_one_instant_is_reached_by_a_mark_at_it() -> None:
    splits = Splits([section("x", split_by="p")])
    splits.mark([Mark(41, "p", 1.0)])
    assert splits.next_change(block([(40, 0)], 41, 41, opens=True)) == 41


def test_a_restored_split_goes_on() -> None:
    splits = Splits([section("x", split_by="p", split_limit=2)])
    splits.restore("x", {UNMARKED: sums(10), 1.0: sums(20)})
    splits.mark([Mark(0, "p", 1.0)])
    splits.change(5)
    assert splits.value("p") == 1.0
    splits.add({"x": sums(1)})
    splits.end_slice()
    parts = splits["x"].parts
    assert {v: int(s["live_time_ps"]) for v, s in parts.items()} == {UNMARKED: 10, 1.0: 21}


def test_keys_that_split_nothing_are_unknown() -> None:
    with pytest.raises(KeyError):
        Splits([section("y")]).value("p")
