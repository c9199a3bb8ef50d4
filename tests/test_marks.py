"""What marks may be, and which of them a run remembers."""

from __future__ import annotations

from math import inf, nan

import pytest
from hypothesis import given
from hypothesis import strategies as st

from tagstream import marks
from tagstream.marks import RememberedMarks, key_problem, parsed_value, value_problem, value_text
from tagstream.recording.layout import Mark


@pytest.mark.parametrize("key", ["stage_um", "k" * 32, "θ", "a b", ".x"])
def test_a_good_key(key: str) -> None:
    assert key_problem(key) is None


@pytest.mark.parametrize("key", ["", "a/b", ".", "k" * 33, "θ" * 17, "a\0", "a\n"])
def test_a_bad_key_is_told(key: str) -> None:
    assert "right would be" in str(key_problem(key))


@pytest.mark.parametrize("value", [0.0, -1.5, 7, "", "H", "x" * 64])
def test_a_good_value(value: float | str) -> None:
    assert value_problem("p", value) is None


@pytest.mark.parametrize("value", [nan, inf, "x" * 65, "θ" * 33, "a\0"])
def test_a_bad_value_is_told_with_its_key(value: float | str) -> None:
    problem = value_problem("power", value)
    assert problem is not None
    assert problem.startswith("value of power: ")
    assert "right would be" in problem


def test_values_as_people_write_them() -> None:
    assert [parsed_value(text) for text in ("1", "-2.5e3", "H", "", "nan", "inf", "1 mW")] == [
        *(1.0, -2500.0),
        *("H", "", "nan", "inf", "1 mW"),
    ]


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_the_text_of_a_number_tells_it_from_all_others(number: float) -> None:
    assert parsed_value(value_text(number)) == number


def test_the_text_of_a_whole_number_is_short() -> None:
    assert [value_text(v) for v in (12.0, 7, 0.5, "H")] == ["12", "7", "0.5", "H"]


def test_the_newest_marks_are_remembered_and_of_each_key_the_last(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setattr(marks, "MOST_MARKS", 3)
    remembered = RememberedMarks()
    remembered.add([Mark(0, "filter", "grey"), Mark(1, "filter", "red"), Mark(2, "x", 0.0)])
    remembered.add([Mark(t, "x", float(t)) for t in range(3, 9)])
    assert [(m.time_ps, m.key) for m in remembered.all()] == [
        (1, "filter"),
        *((t, "x") for t in (6, 7, 8)),
    ]


def test_the_number_of_remembered_keys_is_bounded(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(marks, "MOST_MARKS", 2)
    monkeypatch.setattr(marks, "MOST_KEYS", 3)
    remembered = RememberedMarks()
    remembered.add([Mark(t, f"key{t}", 0.0) for t in range(9)])
    assert [m.time_ps for m in remembered.all()] == [4, 5, 6, 7, 8]
