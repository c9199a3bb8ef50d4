"""A run has its own folder, a lock while it is written, and a link that leads to the newest."""

from __future__ import annotations

import errno
import fcntl
import json
import os
import subprocess
import sys
import threading
from pathlib import Path
from typing import NoReturn

import pytest

from tagstream.errors import ResultsError, RunBusyError
from tagstream.outputs import folder as module
from tagstream.outputs.atomic import replace_file
from tagstream.outputs.folder import RunFolder, cannot_write, is_held

RACER = """
import sys
from pathlib import Path
from tagstream.outputs.folder import RunFolder
sys.stdin.readline()
for _ in range(20):
    run = RunFolder.create(Path(sys.argv[1]), "race")
    (run.path / "latest.h5").write_bytes(b"results")
    run.announce()
    print(run.path.name)
"""


def announced(parent: Path, name: str = "run") -> RunFolder:
    """A run folder that holds something like results."""
    run = RunFolder.create(parent, name)
    (run.path / "latest.h5").write_bytes(b"results")
    run.announce()
    return run


def test_numbers_count_up_from_one_and_missing_parents_are_made(tmp_path: Path) -> None:
    names = [RunFolder.create(tmp_path / "a/b", "run").path.name for _ in range(3)]
    assert names == ["run-0001", "run-0002", "run-0003"]


def test_the_next_number_follows_the_largest_and_other_names_do_not_count(tmp_path: Path) -> None:
    for name in ("run-0041", "run-12345", "run-007", "run-abcd", "run-x-0099", "other-0500"):
        (tmp_path / name).mkdir()
    assert RunFolder.create(tmp_path, "run").path.name == "run-0042"


def test_after_the_last_number_the_message_says_what_to_do(tmp_path: Path) -> None:
    (tmp_path / "run-9999").mkdir()
    with pytest.raises(ResultsError, match=r"run-9999 exists already; choose another \[results\]"):
        RunFolder.create(tmp_path, "run")


def test_two_processes_never_share_a_folder_and_the_link_ends_at_the_newest(tmp_path: Path) -> None:
    command = [sys.executable, "-c", RACER, str(tmp_path)]
    racers = [
        subprocess.Popen(command, stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True)
        for _ in range(2)
    ]
    for racer in racers:
        assert racer.stdin is not None
        racer.stdin.write("\n")
        racer.stdin.flush()
    names = [name for racer in racers for name in racer.communicate(timeout=60)[0].split()]
    assert sorted(names) == [f"race-{number:04d}" for number in range(1, 41)]
    assert os.readlink(tmp_path / "race") == "race-0040"
    assert not list(tmp_path.glob(".*.link"))


def test_the_link_moves_to_the_newest_run_once_that_holds_results(tmp_path: Path) -> None:
    announced(tmp_path)
    RunFolder.create(tmp_path, "run")  # not announced: a reader would find nothing in it
    assert os.readlink(tmp_path / "run") == "run-0001"
    announced(tmp_path)
    assert os.readlink(tmp_path / "run") == "run-0003"


def test_an_older_run_that_announces_late_does_not_take_the_link_back(tmp_path: Path) -> None:
    older = RunFolder.create(tmp_path, "run")
    announced(tmp_path)
    (older.path / "latest.h5").write_bytes(b"results")
    older.announce()
    assert os.readlink(tmp_path / "run") == "run-0002"


def test_a_dangling_link_is_replaced(tmp_path: Path) -> None:
    (tmp_path / "run").symlink_to("run-0007")
    announced(tmp_path)
    assert os.readlink(tmp_path / "run") == "run-0001"


@pytest.mark.parametrize("kind", ["file", "folder"])
def test_something_else_in_place_of_the_link_is_left_alone(tmp_path: Path, kind: str) -> None:
    link = tmp_path / "run"
    if kind == "file":
        link.write_text("keep me")
    else:
        link.mkdir()
    with pytest.raises(ResultsError, match="is no link to a run"):
        RunFolder.create(tmp_path, "run")
    assert [path.name for path in tmp_path.iterdir()] == ["run"]
    assert not link.is_symlink()


def test_a_held_run_is_busy_for_others_and_the_message_says_who_holds_it(tmp_path: Path) -> None:
    run = RunFolder.create(tmp_path, "run")
    with pytest.raises(RunBusyError) as caught:
        RunFolder.hold(run.path)
    assert caught.value.exit_code == 4
    assert str(run.path) in str(caught.value)
    assert f'"pid": {os.getpid()}' in str(caught.value)
    run.close()
    RunFolder.hold(run.path).close()


def test_the_lock_file_names_its_holder(tmp_path: Path) -> None:
    run = RunFolder.create(tmp_path, "run")
    (run.path / ".lock").write_text("a longer text than the one to come" * 10)
    run.close()
    RunFolder.hold(run.path)
    holder = json.loads((run.path / ".lock").read_text())
    assert holder["pid"] == os.getpid()
    assert set(holder) == {"pid", "host", "since"}


def test_is_held_tells_writers_from_none(tmp_path: Path) -> None:
    run = RunFolder.create(tmp_path, "run")
    assert is_held(run.path)
    run.close()
    assert not is_held(run.path)
    assert not is_held(tmp_path)  # no lock file
    assert not is_held(tmp_path / "absent")


def test_asking_does_not_take_the_lock_away_from_a_writer(tmp_path: Path) -> None:
    """A reader that asks at the very moment a writer locks must not look like a second writer."""
    run = RunFolder.create(tmp_path, "run")
    run.close()
    reader = os.open(run.path / ".lock", os.O_RDONLY)
    fcntl.flock(reader, fcntl.LOCK_SH)
    done = threading.Timer(module.LOCK_WAIT_S, lambda: os.close(reader))
    done.start()
    RunFolder.hold(run.path).close()
    done.join()


def test_a_killed_writer_leaves_no_lock(tmp_path: Path) -> None:
    code = (
        "import os, sys; from pathlib import Path; from tagstream.outputs.folder import RunFolder;"
        "run = RunFolder.create(Path(sys.argv[1]), 'run'); os.kill(os.getpid(), 9)"
    )
    killed = subprocess.run([sys.executable, "-c", code, str(tmp_path)], check=False)
    assert killed.returncode == -9
    assert (tmp_path / "run-0001/.lock").exists()
    assert not is_held(tmp_path / "run-0001")


def test_what_a_crash_left_half_written_is_removed(tmp_path: Path) -> None:
    run = RunFolder.create(tmp_path, "run")
    run.close()
    for name in ("latest.h5.tmp", "history-0001.h5.tmp", "latest.h5"):
        (run.path / name).write_bytes(b"x")
    RunFolder.hold(run.path)
    assert sorted(path.name for path in run.path.iterdir()) == [".lock", "latest.h5"]


def test_a_busy_run_keeps_its_half_written_files(tmp_path: Path) -> None:
    run = RunFolder.create(tmp_path, "run")
    (run.path / "latest.h5.tmp").write_bytes(b"the holder is writing this")
    with pytest.raises(RunBusyError):
        RunFolder.hold(run.path)
    assert (run.path / "latest.h5.tmp").exists()


def test_a_file_in_place_of_the_results_folder(tmp_path: Path) -> None:
    (tmp_path / "runs").write_text("")
    for parent in (tmp_path / "runs", tmp_path / "runs/deeper"):
        with pytest.raises(ResultsError, match="a file stands where a folder is needed") as caught:
            RunFolder.create(parent, "run")
        assert str(parent) in str(caught.value)


def test_a_folder_that_is_not_there_cannot_be_held(tmp_path: Path) -> None:
    with pytest.raises(ResultsError, match="No such file or directory"):
        RunFolder.hold(tmp_path / "absent")


@pytest.mark.parametrize(
    ("number", "advice"),
    [
        (errno.ENOSPC, "make room on that disk"),
        (errno.EDQUOT, "make room in your quota"),
        (errno.EROFS, "that disk is read-only"),
        (errno.EACCES, "allow this user to write there"),
        (errno.EIO, "choose another [results] folder"),
    ],
)
def test_the_message_names_the_path_the_cause_and_the_way_out(number: int, advice: str) -> None:
    for error in (
        OSError(number, os.strerror(number)),
        RuntimeError(f"Unable to flush dataset (errno = {number}, buf = 0x5)"),  # as HDF5 says it
    ):
        text = str(cannot_write(Path("runs/a-0001/latest.h5"), error))
        assert text.startswith("runs/a-0001/latest.h5: results cannot be written: ")
        assert os.strerror(number) in text
        assert advice in text


def test_an_error_without_a_number_is_told_as_it_is() -> None:
    assert "something odd; choose another" in str(
        cannot_write(Path("x"), RuntimeError("something odd"))
    )


@pytest.mark.parametrize("number", [errno.EROFS, errno.ENOSPC])
@pytest.mark.parametrize("broken", ["replace", "fsync", "open"])
def test_a_file_that_cannot_be_replaced_stays_whole(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, number: int, broken: str
) -> None:
    path = tmp_path / "latest.h5"
    replace_file(path, b"old")

    def fail(*_: object, **__: object) -> NoReturn:
        raise OSError(number, os.strerror(number))

    with monkeypatch.context() as patch:
        patch.setattr(Path if broken == "open" else os, broken, fail)
        with pytest.raises(ResultsError) as caught:
            replace_file(path, b"new")
    assert str(path) in str(caught.value)
    assert os.strerror(number) in str(caught.value)
    assert path.read_bytes() == b"old"
    assert [p.name for p in tmp_path.iterdir()] == ["latest.h5"]  # no part takes room


def test_a_replaced_file_holds_exactly_the_new_content(tmp_path: Path) -> None:
    path = tmp_path / "latest.h5"
    for content in (b"a longer text", b"short", b""):
        replace_file(path, content)
        assert path.read_bytes() == content
    assert [p.name for p in tmp_path.iterdir()] == ["latest.h5"]
