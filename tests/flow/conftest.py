"""Settings files, recordings and calls that the flow tests share."""

from __future__ import annotations

import signal
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest

from tests.flow.program import ROOT, Outcome, call

SETTINGS = """
title = "flow"
[feed]
kind = "simulation"
scenario = "{root}/config/scenarios/emitter-pulsed.toml"
duration = "1 s"
[channels.arm_a]
input = 1
[channels.arm_b]
input = 2
[rolling]
slice = "100 ms"
spans = ["300 ms"]
[[tally]]
name = "hbt"
kind = "cross-correlation"
start = "arm_a"
stop = "arm_b"
max_lag = "250 ns"
bin = "1 ns"
[[estimate]]
name = "g2_zero"
kind = "g2-zero-pulsed"
tally = "hbt"
period = "25 ns"
window = "11 ns"
side_peaks = [3, 9]
[[estimate]]
name = "rate_a"
kind = "count-rate"
channel = "arm_a"
[results]
folder = "runs"
name = "flow"
"""

Caller = Callable[..., Outcome]


@pytest.fixture
def tagstream(capsys: pytest.CaptureFixture[str]) -> Iterator[Caller]:
    """Call the program in this process; its signal handlers are put back afterwards."""
    before = {number: signal.getsignal(number) for number in (signal.SIGINT, signal.SIGTERM)}
    yield lambda *arguments: call(capsys, *arguments)
    for number, handler in before.items():
        signal.signal(number, handler)


@pytest.fixture
def settings(tmp_path: Path) -> Path:
    """A settings file for 1 s of simulated pulsed light; results go to a folder beside it."""
    file = tmp_path / "settings.toml"
    file.write_text(SETTINGS.format(root=ROOT))
    return file


@pytest.fixture
def recording(tmp_path: Path, tagstream: Caller) -> Path:
    """The same light as a recording."""
    path = tmp_path / "recorded.h5"
    scenario = ROOT / "config/scenarios/emitter-pulsed.toml"
    assert tagstream("simulate", scenario, path, "--duration", "1 s").code == 0
    return path
