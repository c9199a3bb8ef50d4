"""Faults at the table: garbage from the line, a stopped process, a full disk, hasty readers."""

from __future__ import annotations

import shutil
import signal
import subprocess
import threading
import time
from collections.abc import Iterator
from fractions import Fraction
from pathlib import Path

import h5py
import numpy as np
import pytest
import zmq

import tagstream as package
from tagstream.recording import RecordingWriter
from tests.flow.daemon import Daemon, play

MOUNT_MB = 24


@pytest.fixture
def light(tmp_path: Path) -> Path:
    rng = np.random.default_rng(9)
    path, step = tmp_path / "light.h5", 5 * 10**10
    with RecordingWriter(path, tick=Fraction(1)) as writer:
        for begin in range(0, 2 * 10**12, step):
            times = np.sort(rng.integers(begin, begin + step, 5_000))
            writer.add(times, rng.integers(1, 3, times.size).astype(np.uint8), begin, begin + step)
    return path


def all_of(daemon: Daemon, told: dict[str, dict[str, int]], rounds: int = 1) -> None:
    tags = rounds * told["counts"]["tags"]
    daemon.wait_for(lambda health: health.get("received", 0) >= tags)


def test_garbage_from_a_peer_is_counted_and_light_goes_on(tmp_path: Path, light: Path) -> None:
    rng = np.random.default_rng(2)
    with Daemon(tmp_path / "d", slice_text="100 ms") as daemon, zmq.Context() as context:
        socket = context.socket(zmq.PUSH)
        socket.connect(daemon.address)
        for _ in range(500):
            frames = [rng.bytes(int(rng.integers(0, 200))) for _ in range(rng.integers(1, 5))]
            socket.send_multipart(frames)
        all_of(daemon, play(light, daemon.address, "--fast"))
        socket.close(0)
        health = daemon.wait_for(lambda health: health.get("malformed", 0) >= 500)
        assert health["malformed"] == 500
        assert daemon.stop() == 143
    assert package.open_run(daemon.run).health["dropped_late"] == 0


def test_stopped_for_a_while_and_continued(tmp_path: Path, light: Path) -> None:
    """The sender waits; nothing is lost. Ten seconds in the tools, two here."""
    with Daemon(tmp_path / "d", slice_text="100 ms") as daemon:
        assert daemon.process is not None
        told = play(light, daemon.address, "--fast")
        all_of(daemon, told)
        daemon.process.send_signal(signal.SIGSTOP)
        time.sleep(2)
        daemon.process.send_signal(signal.SIGCONT)
        play(light, daemon.address, "--fast")
        all_of(daemon, told, rounds=2)
        assert daemon.stop() == 143
    health = package.open_run(daemon.run).health
    assert health["kept"] == 2 * told["counts"]["tags"]


def test_hasty_readers_see_whole_files_and_disturb_nobody(tmp_path: Path, light: Path) -> None:
    """One holds latest.h5 open; another opens it as often as it can."""
    with Daemon(tmp_path / "d", slice_text="100 ms") as daemon:
        all_of(daemon, play(light, daemon.address, "--fast"))
        held = h5py.File(daemon.run / "latest.h5", "r", locking=False)
        opened, failed, done = [0], [0], threading.Event()

        def read() -> None:
            while not done.is_set():
                try:
                    with h5py.File(daemon.run / "latest.h5", "r", locking=False) as file:
                        file["run/hbt/counts"][()]
                    opened[0] += 1
                except OSError:
                    failed[0] += 1

        reader = threading.Thread(target=read)
        reader.start()
        told = play(light, daemon.address)  # two seconds
        all_of(daemon, told, rounds=2)
        done.set()
        reader.join()
        held.close()
        assert opened[0] > 100
        assert failed[0] == 0
        assert daemon.stop() == 143


@pytest.fixture
def small_disk(tmp_path: Path) -> Iterator[Path]:
    """A file system of its own; where none may be mounted, the test says why it was skipped."""
    place = tmp_path / "disk"
    place.mkdir()
    mount = shutil.which("mount")
    size = f"size={MOUNT_MB}m"
    if (
        mount is None
        or subprocess.run(
            [mount, "-t", "tmpfs", "-o", size, "tmpfs", str(place)],
            capture_output=True,
            check=False,
        ).returncode
    ):
        pytest.skip("no file system can be mounted here; tests/outputs/test_patient.py fills one")
    yield place
    subprocess.run(["umount", "-l", str(place)], check=False)


def test_a_full_disk_then_room_again(small_disk: Path, light: Path) -> None:
    more = '[recording]\nsegment = "1 MB"\nmin_free = "12 MB"\n'
    daemon = Daemon(small_disk / "d", more, slice_text="100 ms")
    text = daemon.settings.read_text().replace('min_free = "100 MB"', 'min_free = "8 MB"')
    daemon.settings.write_text(text)
    filler = small_disk / "filler"
    with daemon:
        told = play(light, daemon.address, "--fast")
        all_of(daemon, told)
        filler.write_bytes(b"0" * (MOUNT_MB - 6) * 1_000_000)
        play(light, daemon.address, "--fast")
        time.sleep(2)
        assert daemon.process is not None
        assert daemon.process.poll() is None
        filler.unlink()
        health = daemon.wait_for(
            lambda health: (
                health.get("received", 0) >= 2 * told["counts"]["tags"]
                and health.get("degraded") == 0
            )
        )
        assert health["history_rows_lost"] == 0
        assert health["recording_not_recorded"] > 0
        assert health["snapshots_skipped"] > 0
        time.sleep(6)  # recording tries again
        play(light, daemon.address, "--fast")
        all_of(daemon, told, rounds=3)
        assert daemon.stop() == 143
    run = package.open_run(daemon.run)
    assert run.health["kept"] == 3 * told["counts"]["tags"]
    starts = run.history("g2_zero")["begin_ps"]
    assert starts.size == np.unique(starts).size
    names = (run.path / "log.jsonl").read_text()
    assert "recording_paused" in names
    assert "results_resumed" in names
