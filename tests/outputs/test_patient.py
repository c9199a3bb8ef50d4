"""Results pause while they cannot be written, and go on; nothing is lost but what is counted."""

from __future__ import annotations

import json
import os
from collections.abc import Iterator
from pathlib import Path

import pytest

from tagstream.errors import ResultsError
from tagstream.outputs import patient as module
from tagstream.outputs.folder import RunFolder
from tagstream.outputs.patient import Patient
from tagstream.outputs.reader import open_run
from tagstream.outputs.run_writer import RunWriter
from tests.fakes_outputs import FakeClock, make_header, make_row, make_snapshot

ROOM = 10**9


class Disk:
    """How much is free; and whether history files can be made."""

    def __init__(self) -> None:
        self.free = ROOM

    def __call__(self, folder: Path) -> int:
        return self.free


@pytest.fixture
def disk() -> Disk:
    return Disk()


@pytest.fixture
def patient(tmp_path: Path, disk: Disk) -> Iterator[Patient]:
    writer = RunWriter(RunFolder.create(tmp_path, "run"), make_header(), FakeClock())
    made = Patient(writer, ROOM // 2, disk)
    yield made
    made.close(make_snapshot())


def rows_of(tmp_path: Path) -> list[int]:
    return [int(t // 10**12) for t in open_run(tmp_path / "run").history("g2_zero")["begin_ps"]]


def events_of(tmp_path: Path) -> list[str]:
    lines = (tmp_path / "run" / "log.jsonl").read_text().splitlines()
    return [json.loads(line)["event"] for line in lines]


def test_a_full_disk_pauses_results_and_room_brings_them_back(
    tmp_path: Path, patient: Patient, disk: Disk, capfd: pytest.CaptureFixture[str]
) -> None:
    patient.add_row(make_row(0))
    patient.replace_snapshot(make_snapshot(0))
    disk.free = 0
    for index in (1, 2):
        patient.add_row(make_row(index))
        patient.replace_snapshot(make_snapshot(index))
    patient.event("gap", gaps=1)
    told = patient.numbers()
    assert told["degraded"] == 1
    assert told["history_rows_waiting"] == 2
    assert told["snapshots_skipped"] == 2
    assert "kept free" in str(told["last_disk_error"])
    err = capfd.readouterr().err
    assert err.count("results paused") == 1
    assert "gap" in err  # the log goes on on standard error
    disk.free = ROOM
    patient.add_row(make_row(3))
    patient.replace_snapshot(make_snapshot(3))
    assert patient.numbers()["degraded"] == 0
    assert patient.numbers()["history_rows_lost"] == 0
    patient._writer._history.flush()
    assert rows_of(tmp_path) == [0, 1, 2, 3]
    assert "results_resumed" in events_of(tmp_path)


def test_a_file_that_broke_is_left_for_the_next_one(tmp_path: Path, patient: Patient) -> None:
    """HDF5 cannot go on with a file after a failed write: history-0002.h5 takes over."""
    patient.add_row(make_row(0))
    patient._writer._history.flush()
    os.dup2(os.open("/dev/full", os.O_RDWR), patient._writer._history._file.id.get_vfd_handle())
    patient.add_row(make_row(1))
    for index in range(2, 4):
        patient._writer._clock.now += 1  # type: ignore[attr-defined]
        patient.add_row(make_row(index))
    patient.replace_snapshot(make_snapshot())
    assert patient.numbers()["degraded"] == 0
    assert (tmp_path / "run-0001" / "history-0002.h5").exists()
    rows = rows_of(tmp_path)
    assert rows[0] == 0
    assert rows[-1] == 3


def test_beyond_an_hour_of_slices_the_oldest_rows_go_and_are_counted(
    patient: Patient, disk: Disk, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(module, "ROWS_KEPT", 3)
    disk.free = 0
    for index in range(5):
        patient.add_row(make_row(index))
    assert patient.numbers()["history_rows_waiting"] == 3
    assert patient.numbers()["history_rows_lost"] == 2
    disk.free = ROOM


def test_a_snapshot_that_cannot_be_put_in_place_pauses_too(tmp_path: Path) -> None:
    written: list[bytes] = []

    def put(path: Path, content: bytes) -> None:
        if len(written) in (1, 2):
            written.append(content)
            raise ResultsError(f"{path}: that disk is read-only")
        written.append(content)
        path.write_bytes(content)

    folder = RunFolder.create(tmp_path, "run")
    patient = Patient(RunWriter(folder, make_header(), FakeClock(), put=put), 1, Disk())
    patient.replace_snapshot(make_snapshot(1))  # handed over; fails in its thread
    patient.replace_snapshot(make_snapshot(2))  # hears of it
    assert patient.numbers()["degraded"] == 1
    assert "read-only" in str(patient.numbers()["last_disk_error"])
    patient.replace_snapshot(make_snapshot(3))
    patient.close(make_snapshot(4))
    assert open_run(folder.path).health["received"] == 24
