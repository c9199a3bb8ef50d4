"""Every settings file in config/ works as it stands, with a file of the kind that it describes."""

from __future__ import annotations

import shutil
from collections.abc import Callable
from pathlib import Path

import h5py
import numpy as np
import pytest

import tagstream as package
from tests.flow.conftest import Caller
from tests.flow.program import ROOT

CONFIG = ROOT / "config"
TICKS = np.cumsum(np.random.default_rng(3).integers(1, 4_000, 2_000)).astype(np.int64)
ARMS = np.arange(TICKS.size) % 2


def photon_hdf5(path: Path) -> None:
    with h5py.File(path, "w") as file:
        data = file.create_group("photon_data")
        data.create_dataset("timestamps", data=TICKS, dtype=np.int64)
        data.create_dataset("detectors", data=ARMS, dtype=np.uint8)


def binary_records(path: Path) -> None:
    """25 bits of time, rollovers told by a special record, one gap and one record to pass over."""
    words: list[int] = []
    turns = 0
    for number, (tick, arm) in enumerate(zip(TICKS * 7_000, ARMS, strict=True)):
        new_turns = int(tick) >> 25
        if new_turns > turns:
            words.append(1 << 31 | 63 << 25 | (new_turns - turns))
            turns = new_turns
        if number == 1_000:
            words += [1 << 31 | 62 << 25, 1 << 31 | 5 << 25]
        words.append(int(arm) << 25 | int(tick) & (1 << 25) - 1)
    np.array(words, "<u4").tofile(path)


EMITTER = CONFIG / "scenarios/emitter-cw.toml"
INPUTS: dict[str, Callable[[Path], None]] = {
    "photon-hdf5.toml": photon_hdf5,
    "binary-records.toml": binary_records,
    "csv-events.toml": lambda path: Path(
        shutil.copy(ROOT / "tests/data/two_detector_events.csv", path)
    ).touch(),
}


@pytest.mark.parametrize("name", sorted(path.name for path in CONFIG.glob("*.toml")))
def test_an_example_runs(name: str, tmp_path: Path, tagstream: Caller) -> None:
    sets = ["--set", f'results.folder="{tmp_path}"', "--name", "example"]
    if name in INPUTS:
        file = tmp_path / ("input" + {"p": ".h5", "b": ".bin", "c": ".csv"}[name[0]])
        INPUTS[name](file)
        sets += ["--set", f'feed.path="{file}"']
    elif name == "live.toml":  # simulated light in place of the socket
        light = f'feed={{kind = "simulation", scenario = "{EMITTER}", duration = "2 s"}}'
        sets += ["--set", light, "--set", 'publish.address="tcp://127.0.0.1:*"']
    else:
        sets += ["--set", 'feed.duration="2 s"']
    done = tagstream("run", CONFIG / name, *sets)
    assert done.code == 0, done.err
    run = package.open_run(tmp_path / "example")
    assert run.health["state"] == "finished"
    assert run.health["received"] == run.health["kept"] > 900
    for spans in run.estimates.values():
        assert spans["run"].interval != "none", spans["run"].reason


def test_the_gap_and_the_rollovers_of_binary_records(tmp_path: Path, tagstream: Caller) -> None:
    binary_records(tmp_path / "run.bin")
    sets = [f'results.folder="{tmp_path}"', f'feed.path="{tmp_path / "run.bin"}"']
    words = [word for text in sets for word in ("--set", text)]
    assert tagstream("run", CONFIG / "binary-records.toml", *words).code == 0
    run = package.open_run(tmp_path / "binary-records")
    assert run.health["gaps"] == 1
    # Two stretches, each from its first tag to its last; the tick is 5 ps.
    times = TICKS * 7_000 * 5
    live = (times[999] - times[0]) + (times[-1] - times[1_000])
    assert run.channels["arm_a"]["run"]["live_time_ps"] == live
    # The tags that open a stretch are not counted; both are on arm_a (even numbers).
    assert run.channels["arm_a"]["run"]["counts"] == 998
    assert run.channels["arm_b"]["run"]["counts"] == 1_000
