"""Ctrl-C and SIGTERM end with a clean close; exit codes tell a supervisor the truth."""

from __future__ import annotations

import json
import signal
import time
from pathlib import Path

import h5py
import pytest

from tests.flow.conftest import Caller
from tests.flow.program import start


def wait_for_results(run: Path, seconds: float = 60.0) -> None:
    """Until the run has written its first finished slice."""
    deadline = time.monotonic() + seconds
    while time.monotonic() < deadline:
        try:
            with h5py.File(run / "latest.h5") as file:
                if file["run/health/state"].asstr()[()] == "running":
                    return
        except (FileNotFoundError, KeyError):
            pass
        time.sleep(0.05)
    raise AssertionError(f"{run} shows no results after {seconds} s")


@pytest.mark.parametrize(("number", "code"), [(signal.SIGINT, 130), (signal.SIGTERM, 143)])
def test_a_signal_ends_with_everything_written(settings: Path, number: int, code: int) -> None:
    run = settings.parent / "runs/flow"
    process = start("run", settings, "--pace", "1", "--set", 'feed.duration="1 h"')
    try:
        wait_for_results(run)
        process.send_signal(number)
        out, err = process.communicate(timeout=30)
    finally:
        process.kill()
    assert process.returncode == code, err
    assert "g2_zero" in out
    with h5py.File(run / "latest.h5") as file:
        assert file["run/health/state"].asstr()[()] == "stopped"
        assert "end_time" in file["run"]
        slices = int(file["run/hbt/end_ps"][()]) // 10**11
    with h5py.File(run / "history-0001.h5") as file:  # an ordinary, closed file
        rows = {d.shape[0] for d in file["run"].values() if getattr(d, "ndim", 0) == 2}
    assert rows == {slices}
    events = [json.loads(line)["event"] for line in (run / "log.jsonl").read_text().splitlines()]
    assert events[-1] == "end"


def test_a_second_signal_ends_at_once(settings: Path) -> None:
    process = start("run", settings, "--pace", "0.001", "--set", 'feed.duration="1 h"')
    try:
        time.sleep(0.5)
        deadline = time.monotonic() + 60
        while process.poll() is None and time.monotonic() < deadline:
            process.send_signal(signal.SIGTERM)
            time.sleep(0.001)
        code = process.wait(timeout=30)
    finally:
        process.kill()
        process.communicate()
    assert code in (1, 143, -signal.SIGTERM)


def test_exit_codes(settings: Path, tmp_path: Path, tagstream: Caller) -> None:
    assert tagstream("--help").code == 0
    assert tagstream("check", settings).code == 0
    assert tagstream("run", tmp_path / "none.toml").code == 2
    assert tagstream("run", settings, "--set", "feed.path=x").code == 2
    assert tagstream("replay", settings, tmp_path / "none.h5").code == 3
    assert tagstream("nonsense").code == 2
    assert tagstream("show", tmp_path / "none").code == 1
    assert not (tmp_path / "runs").exists()
