"""What a recording holds, read with plain h5py, and how it comes to its name."""

from __future__ import annotations

import os
from fractions import Fraction
from pathlib import Path
from types import SimpleNamespace

import h5py
import numpy as np
import pytest
from hypothesis import given

from tagstream.errors import ResultsError
from tagstream.recording import Mark, RecordedPiece, RecordingHeader, RecordingWriter
from tagstream.recording.layout import CHUNK_EVENTS
from tests.recording import made
from tests.recording.made import piece

HEADER = RecordingHeader(
    title="two arms", origin_ticks=10**20, origin_utc="2026-12-01T08:00:00+00:00", segment=3
)


def test_every_place_of_the_layout(tmp_path: Path) -> None:
    tags = [(5 * 2**32, 1), (7, 2), (9, 1)]
    path = made.write(tmp_path / "a.h5", [piece(tags, (0, 6 * 2**32))], header=HEADER)
    with h5py.File(path) as file:
        events = file["run/events"]
        assert {name: events[name][()].tolist() for name in events} == {
            "event_id": [1, 2, 1],
            "event_time_offset": [0, 0, 2],
            "event_time_zero": [5 * 2**32, 7],
            "event_index": [0, 1],
            "cue_timestamp_zero": [5 * 2**32],
            "cue_index": [0],
        }
        assert {name: events[name].dtype.str for name in events} == {
            "event_id": "|u1",
            "event_time_offset": "<u4",
            "event_time_zero": "<i8",
            "event_index": "<i8",
            "cue_timestamp_zero": "<i8",
            "cue_index": "<i8",
        }
        assert events["event_time_zero"].attrs["offset"] == HEADER.origin_utc
        assert events["event_time_offset"].attrs["units"] == "ps"
        assert events["event_id"].compression is None
        assert events["event_id"].chunks == (CHUNK_EVENTS,)
        coverage = {
            name: file[f"run/coverage/{name}"][()].tolist() for name in file["run/coverage"]
        }
        assert coverage == {
            "begin": [0],
            "end": [6 * 2**32],
            "first_event": [0],
            "flags": [1 + 8],
        }
        text = {
            name: node.asstr()[()]
            for name, node in file["run"].items()
            if isinstance(node, h5py.Dataset) and h5py.check_string_dtype(node.dtype)
        }
        assert text["native_tick"] == "1 ps"
        assert text["origin_ticks"] == str(10**20)  # more than 64 bits can hold
        assert text["title"] == "two arms"
        assert text["entry_identifier_uuid"] == HEADER.run_uuid
        assert text["start_time"] <= text["end_time"]
        assert file["run/segment"][()] == 3
        assert file.attrs["default"] == "run"
        assert file["run"].attrs["default"] == "events"


def test_a_closed_recording_is_an_ordinary_file(tmp_path: Path) -> None:
    """Superblock 3 (byte 8), what SWMR needs and HDF5 1.10 reads; nobody has it open (byte 11)."""
    path = made.write(tmp_path / "a.h5", [piece([(1, 1)])])
    head = path.read_bytes()[:12]
    assert head[8] == 3
    assert head[11] == 0


def test_cues_come_once_per_chunk(tmp_path: Path) -> None:
    times = np.arange(3 * CHUNK_EVENTS, dtype=np.int64)
    inputs = np.zeros(times.size, np.uint8)
    path = made.write(
        tmp_path / "a.h5",
        [
            RecordedPiece(times[a:b], inputs[a:b], None, None, True, False, False)
            for a, b in [(0, 10), (10, CHUNK_EVENTS + 7), (CHUNK_EVENTS + 7, times.size)]
        ],
    )
    with h5py.File(path) as file:
        events = file["run/events"]
        index = events["cue_index"][()]
        assert (np.diff(index) >= CHUNK_EVENTS).all()
        assert index.tolist()[0] == 0
        assert len(index) == 3
        groups = np.searchsorted(events["event_index"][()], index)
        assert (events["event_index"][()][groups] == index).all()
        assert (events["event_time_zero"][()][groups] == events["cue_timestamp_zero"][()]).all()


@given(made.pieces)
def test_offsets_and_zeros_give_the_times_back(
    tmp_path_factory: pytest.TempPathFactory, pieces: list[RecordedPiece]
) -> None:
    """As any NeXus reader would: the time is the zero of the group plus the offset."""
    path = made.write(tmp_path_factory.mktemp("written") / "a.h5", pieces)
    with h5py.File(path) as file:
        events = file["run/events"]
        index = np.append(events["event_index"][()], events["event_id"].shape[0])
        zeros = np.repeat(events["event_time_zero"][()], np.diff(index))
        times = zeros + events["event_time_offset"][()].astype(np.int64)
        tags = list(zip(times.tolist(), events["event_id"][()].tolist(), strict=True))
    assert tags == made.tags_of(pieces)


@pytest.mark.parametrize(
    ("pieces", "gaps"),
    [
        ([piece([], (0, 10)), piece([], (10, 20))], []),
        ([piece([], (0, 10)), piece([], (15, 20))], [(10, 5)]),
        ([piece([], (0, 10)), piece([], (15, 20), gap_before=True)], [(10, 5)]),
        ([piece([], (0, 10)), piece([], (10, 20), lossy=True)], [(10, 10)]),
        ([piece([(3, 0), (9, 0)]), piece([(40, 0), (30, 0)], gap_before=True)], [(9, 21)]),
        ([piece([(3, 0)]), piece([], gap_before=True), piece([(8, 0)])], [(3, 5)]),
        ([piece([(3, 0)]), piece([(9, 0)])], []),
        ([piece([(3, 0)], gap_before=True)], []),
        (
            [piece([(3, 0)], (0, 99), complete=False), piece([(9, 0)], (0, 99), gap_before=True)],
            [(3, 6)],
        ),
    ],
)
def test_gaps_are_listed(
    tmp_path: Path, pieces: list[RecordedPiece], gaps: list[tuple[int, int]]
) -> None:
    with h5py.File(made.write(tmp_path / "a.h5", pieces)) as file:
        log = file["run/gaps"]
        assert list(zip(log["time"][()], log["value"][()], strict=True)) == gaps


def test_marks_become_one_log_for_each_key(tmp_path: Path) -> None:
    path = tmp_path / "a.h5"
    marks = [Mark(5, "stage_um", 1.5), Mark(7, "filter", "grey"), Mark(9, "stage_um", 2.0)]
    with RecordingWriter(path, tick=Fraction(1), header=HEADER) as recording:
        for mark in marks:
            recording.add_mark(mark)
    with h5py.File(path) as file:
        logs = file["run/marks"]
        assert logs["stage_um/time"][()].tolist() == [5, 9]
        assert logs["stage_um/value"][()].tolist() == [1.5, 2.0]
        assert logs["stage_um"].attrs["NX_class"] == "NXlog"
        assert logs["stage_um/time"].attrs["start"] == HEADER.origin_utc
        assert logs["filter/value"].asstr()[()].tolist() == ["grey"]
        assert logs["filter"].attrs["NX_class"] == "NXtextlog"


@pytest.mark.parametrize(
    ("mark", "words"),
    [
        (Mark(0, "", 1.0), "1 to 32 bytes"),
        (Mark(0, "a/b", 1.0), "without /"),
        (Mark(0, "k" * 33, 1.0), "1 to 32 bytes"),
        (Mark(0, "note", "x" * 65), "65 bytes"),
    ],
)
def test_a_mark_that_does_not_fit_is_refused(tmp_path: Path, mark: Mark, words: str) -> None:
    with (
        RecordingWriter(tmp_path / "a.h5", tick=Fraction(1)) as recording,
        pytest.raises(ValueError, match=words),
    ):
        recording.add_mark(mark)


def test_inputs_above_255_need_a_recording_made_for_them(tmp_path: Path) -> None:
    times, inputs = np.array([1, 2], np.int64), np.array([255, 65535])
    with (
        RecordingWriter(tmp_path / "narrow.h5", tick=Fraction(1)) as recording,
        pytest.raises(
            ResultsError, match="input 65535 cannot be recorded; right would be 0 to 255"
        ),
    ):
        recording.add(times, inputs)
    with RecordingWriter(tmp_path / "wide.h5", tick=Fraction(1), inputs_above_255=True) as wide:
        wide.add(times, inputs)
        with pytest.raises(ResultsError, match="input -1 "):
            wide.add(times, np.array([3, -1]))
    assert made.tags_of(made.read(tmp_path / "narrow.h5")) == []
    assert made.tags_of(made.read(tmp_path / "wide.h5")) == [(1, 255), (2, 65535)]


def test_the_name_is_given_at_the_end_and_never_taken_from_another(tmp_path: Path) -> None:
    path = tmp_path / "a.h5"
    recording = RecordingWriter(path, tick=Fraction(1))
    assert [p.name for p in tmp_path.iterdir()] == ["a.h5.part"]
    with pytest.raises(ResultsError, match=r"a\.h5\.part: exists: another program writes it"):
        RecordingWriter(path, tick=Fraction(1))
    path.write_text("mine")
    with pytest.raises(ResultsError, match=r"was made by another program meanwhile.*a\.h5\.part"):
        recording.close()
    assert path.read_text() == "mine"
    with pytest.raises(ResultsError, match="exists and is not overwritten"):
        RecordingWriter(path, tick=Fraction(1))
    with pytest.raises(ResultsError, match="there is no folder"):
        RecordingWriter(tmp_path / "no" / "a.h5", tick=Fraction(1))


def test_after_an_error_what_was_good_is_kept_under_the_temporary_name(tmp_path: Path) -> None:
    def broken() -> None:
        with RecordingWriter(tmp_path / "a.h5", tick=Fraction(1)) as recording:
            recording.add(np.array([4], np.int64), np.array([1]))
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        broken()
    assert [p.name for p in tmp_path.iterdir()] == ["a.h5.part"]
    assert made.tags_of(made.read(tmp_path / "a.h5.part")) == [(4, 1)]


def test_a_flush_in_the_middle_of_an_interval_changes_nothing(tmp_path: Path) -> None:
    parts = [piece([(1, 1)], (0, 9), complete=False), piece([(2, 1)], (0, 9), complete=False)]
    parts.append(piece([(3, 1)], (0, 9)))
    plain = made.write(tmp_path / "plain.h5", parts)
    with RecordingWriter(tmp_path / "flushed.h5", tick=Fraction(1)) as recording:
        for p in parts:
            recording.add(p.times_ps, p.inputs, p.begin_ps, p.end_ps, p.complete)
            recording.flush()
    flushed = made.read(tmp_path / "flushed.h5")
    assert len(flushed) == 3
    assert made.rows_of(flushed) == made.rows_of(made.read(plain)) == made.rows_of(parts)


def test_a_full_disk_stops_before_the_file_is_spoiled(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    recording = RecordingWriter(tmp_path / "a.h5", tick=Fraction(1))
    recording.add(np.array([4], np.int64), np.array([1]))
    room = SimpleNamespace(f_bavail=1, f_frsize=512)
    with monkeypatch.context() as patch:
        patch.setattr(os, "statvfs", lambda folder: room)
        with pytest.raises(ResultsError, match="less than 32 MB left on the disk"):
            recording.add(np.array([5], np.int64), np.array([1]))
    recording.close()
    assert made.tags_of(made.read(tmp_path / "a.h5")) == [(4, 1)]


def test_inputs_and_intervals_must_match_the_times(tmp_path: Path) -> None:
    with RecordingWriter(tmp_path / "a.h5", tick=Fraction(1)) as recording:
        with pytest.raises(ValueError, match="as many inputs as times"):
            recording.add(np.array([1], np.int64), np.array([1, 2]))
        with pytest.raises(ValueError, match="both or neither"):
            recording.add(np.array([1], np.int64), np.array([1]), begin_ps=0)


def test_a_file_system_without_hard_links_is_good_enough(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def no_links(source: Path, target: Path) -> None:
        raise PermissionError("no hard links here")

    monkeypatch.setattr(os, "link", no_links)
    assert made.tags_of(made.read(made.write(tmp_path / "a.h5", [piece([(4, 1)])]))) == [(4, 1)]
    late = RecordingWriter(tmp_path / "b.h5", tick=Fraction(1))
    (tmp_path / "b.h5").write_text("mine")
    with pytest.raises(ResultsError, match="made by another program"):
        late.close()
    assert (tmp_path / "b.h5").read_text() == "mine"


def test_a_failing_disk_is_reported_with_the_name_of_the_file(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def fail(dataset: h5py.Dataset, shape: tuple[int]) -> None:
        raise OSError("input/output error")

    recording = RecordingWriter(tmp_path / "a.h5", tick=Fraction(1))
    recording.add(np.array([4], np.int64), np.array([1]))
    with monkeypatch.context() as patch:
        patch.setattr(h5py.Dataset, "resize", fail)
        with pytest.raises(ResultsError, match=r"a\.h5\.part: cannot be written: input/output"):
            recording.flush()
    recording.close()
    recording.close()  # a second time does nothing


def test_a_file_that_cannot_be_made_is_reported(tmp_path: Path) -> None:
    name = "a" * 254  # with ".part" longer than a file name may be
    with pytest.raises(ResultsError, match="cannot be made"):
        RecordingWriter(tmp_path / name, tick=Fraction(1))
