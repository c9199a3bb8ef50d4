"""Recordings come back as they were; files of other NeXus writers are understood."""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pytest
from hypothesis import given
from nexusformat import nexus
from silx.io.utils import open as silx_open

from tagstream.errors import InputError
from tagstream.recording import (
    Mark,
    RecordedPiece,
    RecordingHeader,
    RecordingReader,
    RecordingWriter,
    coverage,
    event_data,
    event_groups,
)
from tagstream.recording.layout import CHUNK_EVENTS
from tests.recording import made
from tests.recording.made import piece


@given(made.pieces)
def test_times_inputs_and_intervals_survive(
    tmp_path_factory: pytest.TempPathFactory, pieces: list[RecordedPiece]
) -> None:
    back = made.read(made.write(tmp_path_factory.mktemp("recording") / "a.h5", pieces))
    assert made.rows_of(back) == made.rows_of(pieces)


@given(made.pieces)
def test_reading_in_tiny_bites_changes_nothing(
    tmp_path_factory: pytest.TempPathFactory, pieces: list[RecordedPiece]
) -> None:
    path = made.write(tmp_path_factory.mktemp("recording") / "a.h5", pieces)
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(event_data, "BITE_TAGS", 3)
        patch.setattr(event_groups, "BLOCK_GROUPS", 2)
        patch.setattr(coverage, "CHUNK_ROWS", 2)
        back = made.read(path)
    assert made.rows_of(back) == made.rows_of(pieces)


def test_large_recordings_come_in_pieces_of_bounded_size(tmp_path: Path) -> None:
    rng = np.random.default_rng(7)
    times = np.cumsum(rng.integers(0, 20_000, 5 * CHUNK_EVENTS // 2))
    inputs = rng.integers(0, 3, times.size).astype(np.uint8)
    path = made.write(
        tmp_path / "a.h5",
        [RecordedPiece(times, inputs, 0, int(times[-1]) + 1, True, False, False)],
    )
    back = made.read(path)
    assert max(p.times_ps.size for p in back) <= CHUNK_EVENTS
    assert [p.complete for p in back] == [False] * (len(back) - 1) + [True]
    assert (np.concatenate([p.times_ps for p in back]) == times).all()
    assert (np.concatenate([p.inputs for p in back]) == inputs).all()
    assert {p.inputs.dtype for p in back} == {np.dtype(np.uint8)}


def test_the_header_comes_back(tmp_path: Path) -> None:
    header = RecordingHeader(
        title="µ source",
        origin_ticks=-5,
        origin_utc="2026-12-01T08:00:00+00:00",
        segment=2,
        truth={"g2_zero": np.float64(0.05), "inputs": np.arange(2), "seed": np.int64(3)},
    )
    tick = Fraction(10**12, 8192)
    with RecordingWriter(tmp_path / "a.h5", tick=tick, header=header) as recording:
        recording.add_mark(Mark(7, "filter", "grey"))
        recording.add_mark(Mark(9, "stage", 1.5))
    with RecordingReader(tmp_path / "a.h5") as reader:
        assert reader.tick == tick
        assert reader.header.truth == {"g2_zero": 0.05, "inputs": [0, 1], "seed": 3}
        for name in ("title", "origin_ticks", "origin_utc", "segment", "run_uuid", "start_time"):
            assert getattr(reader.header, name) == getattr(header, name)
        assert reader.marks() == [Mark(7, "filter", "grey"), Mark(9, "stage", 1.5)]
        assert not reader.foreign
        assert reader.count == 0


def test_two_recordings_are_two_runs_unless_told_otherwise(tmp_path: Path) -> None:
    uuids = set()
    for name in ("a.h5", "b.h5"):
        with RecordingReader(made.write(tmp_path / name, [])) as reader:
            uuids.add(reader.header.run_uuid)
    assert len(uuids) == 2


def test_other_nexus_programs_open_a_recording(tmp_path: Path) -> None:
    path = made.write(tmp_path / "a.h5", [piece([(5, 1), (9, 2)], (0, 10))])
    with silx_open(str(path)) as file:  # type: ignore[no-untyped-call]
        assert file["run/events/event_id"][()].tolist() == [1, 2]
    root = nexus.nxload(str(path))
    assert type(root["run/events"]).__name__ == "NXevent_data"
    assert root["run/events/event_time_offset"].nxvalue.tolist() == [0, 4]
    assert root["run/gaps/time"].nxvalue.tolist() == []


# Files of other programs ------------------------------------------------------------------


def foreign(path: Path, group: str = "entry/detector_events", **columns: Any) -> Path:
    """An NXevent_data group. A column is (values, units) or values without units."""
    with h5py.File(path, "w") as file:
        events = file.create_group(group)
        events.attrs["NX_class"] = np.bytes_(b"NXevent_data")  # as some writers store it
        for name, column in columns.items():
            values, unit = column if isinstance(column, tuple) else (column, None)
            dataset = events.create_dataset(name, data=values, dtype=np.asarray(values).dtype)
            if unit is not None:
                dataset.attrs["units"] = unit
    return path


u4 = np.uint32
IDS = np.array([1, 2, 1], np.int32)


@pytest.mark.parametrize(
    ("columns", "times_ps"),
    [
        (  # pulses in integer nanoseconds since 1970, as event streams of large facilities have
            {
                "event_time_offset": (np.array([5, 7, 2], u4), "ns"),
                "event_time_zero": (np.array([17 * 10**17 + 3, 17 * 10**17 + 90]), "ns"),
                "event_index": np.array([0, 2], np.uint64),
            },
            [8_000, 10_000, 92_000],
        ),
        (  # float microseconds after float seconds
            {
                "event_time_offset": (np.array([0.5, 1.25, 2], np.float32), b"microsecond"),
                "event_time_zero": (np.array([3.0, 3.25]), "second"),
                "event_index": np.array([0, 2], np.int32),
            },
            [500_000, 1_250_000, 250_002_000_000],
        ),
        (  # empty groups at begin, middle and end
            {
                "event_time_offset": (np.array([5, 7, 2], ">i2"), "us"),
                "event_time_zero": (np.array([0, 1, 2, 3, 4], np.int8), "s"),
                "event_index": np.array([0, 0, 2, 2, 3], np.int64),
            },
            [1_000_005_000_000, 1_000_007_000_000, 3_000_002_000_000],
        ),
        (  # no index: one zero for all
            {
                "event_time_offset": (np.array([5, 7, 2]), "ps"),
                "event_time_zero": (np.array([4]), "ns"),
            },
            [4_005, 4_007, 4_002],
        ),
        (  # no index: one zero for each
            {
                "event_time_offset": (np.array([5, 7, 2]), "ps"),
                "event_time_zero": (np.array([4, 3, 2]), "ns"),
            },
            [4_005, 3_007, 2_002],
        ),
        (  # no pulses at all
            {"event_time_offset": (np.array([5, -7, 2]), "milliseconds")},
            [5 * 10**9, -7 * 10**9, 2 * 10**9],
        ),
    ],
)
def test_what_other_programs_write(
    tmp_path: Path, columns: dict[str, Any], times_ps: list[int]
) -> None:
    path = foreign(tmp_path / "a.nxs", event_id=IDS, **columns)
    back = made.read(path)
    assert made.tags_of(back) == list(zip(times_ps, [1, 2, 1], strict=True))[: len(times_ps)]
    assert made.rows_of(back)[0][:3] == ((None, None, False), False, True)


def test_the_tick_and_origin_of_a_file_of_another_program(tmp_path: Path) -> None:
    path = foreign(
        tmp_path / "a.nxs",
        event_id=IDS,
        event_time_offset=(np.array([5, 7, 2]), "us"),
        event_time_zero=(np.array([17 * 10**17 + 3]), "ns"),
    )
    with h5py.File(path, "r+") as file:
        file["entry/detector_events/event_time_zero"].attrs["offset"] = "1970-01-01T00:00:00Z"
    with RecordingReader(path) as reader:
        assert reader.foreign
        assert reader.tick == 1000
        assert reader.header.origin_ticks == 17 * 10**17
        assert reader.header.origin_utc == "2023-11-14T22:13:20.000000+00:00"
        assert reader.marks() == []


def test_the_group_can_be_chosen(tmp_path: Path) -> None:
    columns = {"event_time_offset": (np.array([1, 2, 3]), "ps")}
    path = foreign(tmp_path / "a.nxs", "entry/a", event_id=IDS, **columns)
    with h5py.File(path, "r+") as file:
        file.copy("entry/a", "entry/b")
        file["entry/b/event_id"][:] = [9, 9, 9]
    assert made.tags_of(made.read(path))[0] == (1, 1)
    assert made.tags_of(made.read(path, "/entry/b"))[0] == (1, 9)
    with pytest.raises(
        InputError, match="has no group /entry/c; NXevent_data groups: /entry/a, /entry/b"
    ):
        made.read(path, "/entry/c")


def test_a_damaged_chunk_is_named_and_all_before_it_delivered(tmp_path: Path) -> None:
    rng = np.random.default_rng(3)
    offsets = rng.integers(0, 2**32, 1000, u4)
    path = tmp_path / "a.nxs"
    foreign(path, event_id=np.zeros(1000, np.uint8), event_time_offset=(offsets[:0], "ps"))
    with h5py.File(path, "r+") as file:
        group = file["entry/detector_events"]
        del group["event_time_offset"]
        column = group.create_dataset(
            "event_time_offset", data=offsets, dtype=u4, chunks=(100,), compression="gzip"
        )
        column.attrs["units"] = "ps"
        place = column.id.get_chunk_info(3).byte_offset
    with path.open("r+b") as raw:
        raw.seek(place)
        raw.write(b"\0" * 40)
    got: list[RecordedPiece] = []
    with (
        RecordingReader(path) as reader,
        pytest.raises(InputError, match="event_time_offset: values 300 to 300 cannot be read"),
    ):
        got.extend(reader.pieces())  # keeps what came before the error
    assert [t for t, _ in made.tags_of(got)] == offsets[:300].tolist()
