"""The sink of a run as a whole: order, cadence, readers beside it, kills and full disks."""

from __future__ import annotations

import errno
import json
import os
import random
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any, NoReturn

import h5py
import numpy as np
import pytest

from tagstream.errors import ResultsError
from tagstream.outputs import run_writer as module
from tagstream.outputs.folder import RunFolder, is_held
from tagstream.outputs.reader import open_run
from tagstream.outputs.run_writer import SNAPSHOT_S, RunWriter
from tests.fakes_outputs import FakeClock, make_header, make_row, make_snapshot

KILLS = 20


@pytest.fixture
def clock() -> FakeClock:
    return FakeClock()


@pytest.fixture
def writer(tmp_path: Path, clock: FakeClock) -> Iterator[RunWriter]:
    made = RunWriter(RunFolder.create(tmp_path, "run"), make_header(), clock)
    yield made
    made._history.close()
    made._log.close()


@pytest.fixture
def process(tmp_path: Path) -> Iterator[Callable[[], subprocess.Popen[str]]]:
    """Starts a process that writes a run into tmp_path until it is killed."""
    started: list[subprocess.Popen[str]] = []

    def start() -> subprocess.Popen[str]:
        command = [sys.executable, "-m", "tests.outputs.writing", str(tmp_path)]
        started.append(subprocess.Popen(command, stdout=subprocess.PIPE, text=True))
        return started[-1]

    yield start
    for one in started:
        one.kill()
        one.communicate()


def events(folder: Path) -> list[dict[str, Any]]:
    return [json.loads(line) for line in (folder / "log.jsonl").read_text().splitlines()]


def test_a_new_run_holds_all_files_and_says_that_it_starts(
    tmp_path: Path, writer: RunWriter
) -> None:
    folder = tmp_path / "run-0001"
    files = {".lock", "latest.h5", "history-0001.h5", "settings.toml", "log.jsonl"}
    assert {path.name for path in folder.iterdir()} == files
    assert (folder / "settings.toml").read_text() == make_header().settings_text
    run = open_run(tmp_path / "run")  # by the link
    assert run.health == {"state": "starting"}
    assert run.is_live
    assert [event["event"] for event in events(folder)] == ["start"]
    assert events(folder)[0]["run_uuid"] == run.about["run_uuid"]


def test_latest_stands_before_anything_else_and_before_the_link(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    seen: list[list[str]] = []

    def look(*_: object) -> NoReturn:
        seen.append(sorted(path.name for path in (tmp_path / "run-0001").iterdir()))
        raise ResultsError("enough")

    monkeypatch.setattr(module, "History", look)
    with pytest.raises(ResultsError, match="enough"):
        RunWriter(RunFolder.create(tmp_path, "run"), make_header())
    assert seen == [[".lock", "latest.h5", "log.jsonl", "settings.toml"]]
    assert not (tmp_path / "run").is_symlink()
    assert not is_held(tmp_path / "run-0001")


def test_a_snapshot_is_due_for_every_slice_of_a_second_but_not_more_often(
    writer: RunWriter, clock: FakeClock
) -> None:
    early = np.random.default_rng(1).uniform(-0.02, 0.02, 50)
    start, due = clock.now, 0
    for index, shift in enumerate(early, 1):
        clock.now = start + index + shift
        assert writer.snapshot_due()
        writer.replace_snapshot(make_snapshot(index))
        writer.settle()
        due += 1
    assert due == early.size
    start = clock.now
    for index in range(1, 101):  # slices of 10 ms
        clock.now = start + 0.01 * index
        if writer.snapshot_due():
            writer.replace_snapshot(make_snapshot(index))
            writer.settle()
            due += 1
    assert due == early.size + 1
    assert SNAPSHOT_S <= 1


def test_latest_is_never_ahead_of_history_and_log(tmp_path: Path, writer: RunWriter) -> None:
    for index in range(3):
        writer.add_row(make_row(index))  # the clock stands: a batch that waits
    assert open_run(tmp_path / "run").history("rate_a")["value"].size == 0
    writer.replace_snapshot(make_snapshot(2))
    writer.settle()
    assert open_run(tmp_path / "run").history("rate_a")["value"].tolist() == [1000, 1001, 1002]


def test_close_writes_all_and_gives_up_the_folder(tmp_path: Path, writer: RunWriter) -> None:
    writer.add_row(make_row(0))
    writer.event("gap", 5, gaps=1)
    writer.event("gap", 6, gaps=2)
    writer.close(make_snapshot(7))
    run = open_run(tmp_path / "run")
    assert not run.is_live
    assert run.health["received"] == 27
    assert run.history("rate_a")["value"].size == 1
    assert "end_time" in run.about
    assert [event["event"] for event in events(run.path)] == ["start", "gap", "gap"]
    with h5py.File(run.path / "history-0001.h5", "r"):  # an ordinary file now
        pass
    RunFolder.hold(run.path).close()


def test_the_identity_of_a_run_stays_while_its_update_time_moves(
    tmp_path: Path, writer: RunWriter
) -> None:
    before = open_run(tmp_path / "run").about
    time.sleep(0.002)
    writer.replace_snapshot(make_snapshot())
    writer.settle()
    after = open_run(tmp_path / "run").about
    assert {k for k in before if before[k] != after[k]} == {"updated_utc"}
    assert before["updated_utc"] < after["updated_utc"]
    assert (before["pid"], before["program_name"]) == (os.getpid(), "tagstream")


def test_a_history_that_fails_at_the_end_is_told_and_the_state_says_so(
    tmp_path: Path, writer: RunWriter, monkeypatch: pytest.MonkeyPatch
) -> None:
    def fail(*_: object) -> NoReturn:
        raise OSError(errno.EROFS, "Read-only file system")

    writer.add_row(make_row(0))
    monkeypatch.setattr("tagstream.outputs.history._append", fail)
    with pytest.raises(ResultsError, match=r"history-0001\.h5.*that disk is read-only"):
        writer.close(make_snapshot())
    run = open_run(tmp_path / "run")
    assert run.health["state"] == "failed"
    assert "end_time" in run.about
    assert not is_held(run.path)


@pytest.mark.parametrize("number", [errno.EROFS, errno.ENOSPC])
def test_a_snapshot_that_cannot_be_written_leaves_the_previous_one_whole(
    tmp_path: Path, writer: RunWriter, monkeypatch: pytest.MonkeyPatch, number: int
) -> None:
    def fail(*_: object) -> NoReturn:
        raise OSError(number, os.strerror(number))

    writer.replace_snapshot(make_snapshot(1))

    writer.settle()
    monkeypatch.setattr("tagstream.outputs.atomic.os.replace", fail)
    writer.replace_snapshot(make_snapshot(2))
    with pytest.raises(ResultsError, match=r"latest\.h5: results cannot be written"):
        writer.settle()
    monkeypatch.undo()
    assert open_run(tmp_path / "run").health["received"] == 21


def test_a_reader_in_a_tight_loop_never_fails_and_never_sees_a_mixture(
    tmp_path: Path, process: Callable[[], subprocess.Popen[str]]
) -> None:
    writing = process()
    assert writing.stdout is not None
    assert writing.stdout.readline() == "ready\n"
    run, seen = open_run(tmp_path / "run"), []
    until = time.monotonic() + 2
    while time.monotonic() < until:
        with h5py.File(tmp_path / "run/latest.h5", "r") as file:  # any program: default locking
            entry = file["run"]
            if "received" in entry["health"]:
                step = int(entry["health/received"][()]) - 20
                assert entry["estimates/rate_a/value"][0] == 1000.0 + step
                seen.append(step)
        rows = run.history("rate_a")
        assert np.array_equal(rows["value"], 1000.0 + np.arange(rows["value"].size))
        assert run.is_live
    assert writing.poll() is None  # nor did it disturb the writer
    assert seen == sorted(seen)
    assert len(set(seen)) > 10


def test_a_reader_that_holds_latest_open_keeps_its_numbers_and_stops_nobody(
    tmp_path: Path, writer: RunWriter
) -> None:
    writer.replace_snapshot(make_snapshot(1))
    writer.settle()
    with h5py.File(tmp_path / "run/latest.h5", "r") as held:
        for step in range(2, 6):
            writer.replace_snapshot(make_snapshot(step))
            writer.settle()
            assert open_run(tmp_path / "run").health["received"] == 20 + step
        assert held["run/health/received"][()] == 21
        assert held["run/hbt/counts"][()].size == 11


def test_killed_at_any_moment_the_results_open_and_agree(
    tmp_path: Path, process: Callable[[], subprocess.Popen[str]]
) -> None:
    """Every other kill falls into the start of the process, when the files are made."""
    random_ = random.Random(20261201)
    opened = 0
    writings = [process()]
    for number in range(KILLS):
        writing = writings.pop()
        if number + 1 < KILLS:
            writings.append(process())  # starts while the other one is waited for
        assert writing.stdout is not None
        folder = _wait_for_folder(tmp_path, writing.pid)
        if number % 2:
            assert writing.stdout.readline() == "ready\n"
        time.sleep(random_.uniform(0, 0.2 if number % 2 else 0.01))
        writing.kill()
        writing.wait()
        assert not is_held(folder)
        if (folder / "latest.h5").exists():
            opened += 1
            _check_killed_run(folder)
    assert opened >= KILLS // 2


def _wait_for_folder(parent: Path, pid: int) -> Path:
    """The run folder that the process `pid` has locked."""
    for _ in range(5000):
        for lock in parent.glob("run-*/.lock"):
            text = lock.read_text()
            if text.endswith("}") and json.loads(text)["pid"] == pid:
                return lock.parent
        time.sleep(0.002)
    raise AssertionError("the process made no run folder")


def _check_killed_run(folder: Path) -> None:
    with h5py.File(folder / "latest.h5", "r") as file:
        health = file["run/health"]
        state = health["state"].asstr()[()]
        slices = int(health["received"][()]) - 19 if "received" in health else 0
    assert state == ("running" if slices else "starting")
    if not (folder / "history-0001.h5").exists():
        assert slices == 0
        return
    rows = open_run(folder).history("rate_a", "10 s")
    count = rows["value"].size
    assert slices <= count <= slices + 1
    assert np.array_equal(rows["value"], 1000.0 + np.arange(count))
    assert np.array_equal(rows["begin_ps"], np.arange(count) * 10**12)
    assert np.array_equal(rows["live_time_ps"], 10**12 - np.arange(count))
    RunFolder.hold(folder).close()  # as a resume would: clears what was half written
    assert not list(folder.glob("*.tmp"))


@pytest.fixture(scope="module")
def tiny_disk(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Path]:
    """A file system of 300 kB, where this user may mount one."""
    folder = tmp_path_factory.mktemp("tiny")
    command = ["mount", "-t", "tmpfs", "-o", "size=300k", "tmpfs", str(folder)]
    try:
        mounted = subprocess.run(command, capture_output=True, text=True, check=False)
    except OSError as error:
        pytest.skip(f"no small disk: {error}; the failures made by hand above stand alone")
    if mounted.returncode:
        pytest.skip(f"no small disk: {mounted.stderr.strip()}; the failures above stand alone")
    yield folder
    subprocess.run(["umount", str(folder)], check=True)


@pytest.mark.parametrize("first", ["history", "latest", "log"])
def test_a_full_disk_ends_in_a_message_and_not_in_a_crash(tiny_disk: Path, first: str) -> None:
    for path in tiny_disk.rglob("*"):
        if path.is_file():
            path.unlink()
    command = [sys.executable, "-m", "tests.outputs.filling", str(tiny_disk), first]
    ended = subprocess.run(command, capture_output=True, text=True, check=False)
    assert ended.returncode == 0, ended.stderr  # HDF5 alone would end it with signal 11
    assert ended.stderr == ""
    folder = max(tiny_disk.glob("run-*"))
    names = {"history": "history-0001.h5", "latest": "latest.h5", "log": "log.jsonl"}
    told = ended.stdout.splitlines()[0]
    assert told.startswith(f"{folder / names[first]}: results cannot be written: No space left")
    assert "make room on that disk" in told
    run = open_run(folder)
    assert run.estimates["rate_a"]["run"].value >= 1000.0
    rows = run.history("rate_a")
    assert rows["value"].size >= 20
    assert np.array_equal(rows["value"], 1000.0 + np.arange(rows["value"].size))
    assert not list(folder.glob("*.tmp"))
