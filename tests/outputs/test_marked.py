"""Marks and tallies split by them in latest.h5, and how they are read back."""

from __future__ import annotations

from dataclasses import replace
from math import nan
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pytest
from silx.io.nxdata.parse import NXdata

from tagstream.outputs import RunHeader, Snapshot, SplitView
from tagstream.outputs.latest import latest_image
from tagstream.outputs.reader import Run, open_run
from tagstream.outputs.recent import RecentValues
from tagstream.recording.layout import Mark
from tests.fakes_outputs import make_header, make_snapshot, make_tally

BINS = 11
VALUES: tuple[float | str, ...] = ("unmarked", 0.1, "1", 1.0, "H")
MARKS = (
    Mark(-5, "angle", "1"),
    Mark(3, "power", 0.1),
    Mark(3, "angle", 1.0),
    Mark(10**17, "note", "grün"),
    Mark(8, "angle", "H"),
)


def header() -> RunHeader:
    described = {"kind": "cross-correlation", "start": "arm_a", "stop": "arm_b"}
    return make_header(tallies={"hbt": {**described, "split_by": "angle"}, "plain": described})


def snapshot() -> Snapshot:
    parts: dict[float | str, Any] = {
        value: {**make_tally(BINS), "counts": np.full(BINS, 10 * number)}
        for number, value in enumerate(VALUES, 1)
    }
    plain = make_snapshot(bins=BINS, tallies=("hbt", "plain"))
    return replace(plain, splits={"hbt": SplitView("angle", "H", parts)}, marks=MARKS)


def write(folder: Path, content: Snapshot) -> Path:
    meta: dict[str, str | int] = {"program_name": "tagstream", "version": "1.2"}
    recent = RecentValues(header().spans, header().slice_ps)
    path = folder / "latest.h5"
    path.write_bytes(latest_image(header(), meta, content, recent))
    return path


@pytest.fixture
def run(tmp_path: Path) -> Run:
    return open_run(write(tmp_path, snapshot()))


def test_the_layout_of_a_split_tally(tmp_path: Path) -> None:
    with h5py.File(write(tmp_path, snapshot())) as file:
        parts = file["run/hbt/by_angle"]
        assert dict(parts.attrs) == {"NX_class": "NXcollection", "key": "angle", "now": "H"}
        assert sorted(parts) == ["1", "2", "3", "4", "5", "number", "value"]
        assert parts["value"].asstr()[()].tolist() == ["unmarked", "0.1", "1", "1", "H"]
        numbers = [nan, 0.1, nan, 1.0, nan]
        assert np.array_equal(parts["number"][()], numbers, equal_nan=True)
        for number, value in enumerate(VALUES, 1):
            part = parts[str(number)]
            assert part.attrs["value"] == value
            assert type(part.attrs["value"]) in (str, np.float64)
            assert part["counts"][0] == 10 * number
            assert part["lag"] == file["run/hbt/lag"]  # a hard link
            assert set(file["run/hbt"]) - set(part) == {"begin_ps", "end_ps", "by_angle"}
            assert NXdata(part).is_valid
        assert parts["2"].attrs["title"] == "hbt at angle = 0.1"
        assert NXdata(file["run/hbt"]).is_valid
        assert "by_angle" not in file["run/hbt_10s"]


def test_a_split_is_read_by_value(run: Run) -> None:
    found = run.split("hbt")
    assert list(found) == list(VALUES)
    assert [int(arrays["counts"][0]) for arrays in found.values()] == [10, 20, 30, 40, 50]
    assert found["1"]["counts"][0] != found[1.0]["counts"][0]
    assert list(run.split("plain")) == []
    with pytest.raises(KeyError, match="hbt, plain"):
        run.split("no_tally")


def test_the_tally_itself_reads_as_ever(run: Run) -> None:
    assert set(run.tallies["hbt"]) == {"run", "10 s"}
    assert run.tallies["hbt"]["run"].keys() == run.tallies["plain"]["run"].keys()


def test_marks_are_read_back_exactly(run: Run) -> None:
    assert run.marks == list(MARKS)
    assert [type(mark.value) for mark in run.marks] == [type(mark.value) for mark in MARKS]


def test_marks_stand_as_logs_too(tmp_path: Path) -> None:
    with h5py.File(write(tmp_path, snapshot())) as file:
        logs = file["run/marks"]
        assert logs.attrs["NX_class"] == "NXcollection"
        assert {key: logs[key].attrs["NX_class"] for key in logs} == {
            "angle": "NXtextlog",
            "note": "NXtextlog",
            "power": "NXlog",
        }
        assert logs["power/value"][()].tolist() == [0.1]
        assert logs["angle/time"][()].tolist() == [-5, 3, 8]
        assert logs["angle/time"].attrs["units"] == "ps"
        assert logs["angle/time"].attrs["start"] == "2026-12-01T10:00:00+00:00"


def test_before_the_first_slice_and_without_marks_there_is_nothing(tmp_path: Path) -> None:
    content = Snapshot((), {}, {"state": "starting"}, {"hbt": SplitView("angle", "unmarked", {})})
    run = open_run(write(tmp_path, content))
    assert run.marks == []
    assert list(run.tallies) == []
