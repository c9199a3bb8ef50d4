"""What a killed process left becomes ordinary files, and says that it was interrupted."""

from __future__ import annotations

import subprocess
import sys
import time
from dataclasses import replace
from pathlib import Path

import h5py
import numpy as np
import pytest

from tagstream.errors import RunBusyError
from tagstream.outputs.folder import RunFolder
from tagstream.outputs.reader import open_run
from tagstream.outputs.recovery import recover
from tagstream.outputs.run_writer import RunWriter
from tests.fakes_outputs import make_header, make_snapshot

KILLS = 30  # in about 20 s; tools/kills kills whole daemons


def killed_after(folder: Path, seconds: float) -> Path:
    """The run of a process that wrote as fast as it could until it was killed."""
    command = [sys.executable, "-m", "tests.outputs.writing", str(folder)]
    with subprocess.Popen(command, stdout=subprocess.PIPE, text=True) as process:
        assert process.stdout is not None
        assert process.stdout.readline() == "ready\n"
        time.sleep(seconds)
        process.kill()
    return folder / "run"


def test_killed_at_random_instants(tmp_path: Path) -> None:
    """One process a kill: latest.h5 opens, the history is never behind it by more than a row."""
    rng = np.random.default_rng(3)
    for number in range(KILLS):
        run = killed_after(tmp_path / str(number), rng.uniform(0, 0.05))
        before = open_run(run)
        assert before.health["state"] in ("starting", "running")
        done = recover(run)
        assert any("interrupted" in text for text in done)
        with h5py.File(run / "history-0001.h5", "r") as file:  # an ordinary file now
            rows = file["run/integers"][:, 0].tolist()
            assert rows == list(range(len(rows)))
            assert file["run/numbers"].shape[0] == len(rows)
        after = open_run(run)
        assert after.health["state"] == "interrupted"
        if "received" in after.health:
            shown = int(after.health["received"]) - 20  # which slice the snapshot shows
            assert -1 <= len(rows) - 1 - shown <= 1
        assert not list(run.glob("*.tmp"))
        assert recover(run) == []


def test_a_run_that_is_written_is_left_alone(tmp_path: Path) -> None:
    folder = RunFolder.create(tmp_path, "run")
    writer = RunWriter(folder, make_header())
    with pytest.raises(RunBusyError):
        recover(folder.path)
    snapshot = make_snapshot()
    writer.close(replace(snapshot, health={**snapshot.health, "state": "finished"}))
    assert recover(folder.path) == []
