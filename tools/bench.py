"""Replay speed and peak memory of the whole program, each run in a process of its own.

usage: tools/bench [--tags MILLIONS...] [--runs N] [--folder FOLDER]
"""

from __future__ import annotations

import argparse
import resource
import statistics
import subprocess
import sys
import tempfile
import time
from fractions import Fraction
from pathlib import Path

import numpy as np

from tagstream.recording.writer import RecordingWriter

RATE_HZ = 2e6  # two channels of one million tags a second each
PIECE = 1 << 20
SETTINGS = """
[feed]
kind = "recording"
path = "unused.h5"
[channels.arm_a]
input = 1
delay = "1.2 ns"
[channels.arm_b]
input = 2
[[tally]]
name = "hbt"
kind = "cross-correlation"
start = "arm_a"
stop = "arm_b"
max_lag = "50 ns"
bin = "100 ps"
[[estimate]]
name = "g2_zero"
kind = "g2-zero"
tally = "hbt"
window = "500 ps"
[results]
folder = "runs"
name = "bench"
"""


def make_recording(path: Path, tags: int) -> None:
    """Poisson light on two inputs, in vouched intervals, in bounded memory."""
    rng = np.random.default_rng(1)
    last = 0
    with RecordingWriter(path, tick=Fraction(1)) as writer:
        for first in range(0, tags, PIECE):
            n = min(PIECE, tags - first)
            times = last + np.cumsum(rng.exponential(1e12 / RATE_HZ, n)).astype(np.int64)
            end = int(times[-1]) + 1
            writer.add(times, rng.integers(1, 3, n).astype(np.uint8), last, end)
            last = end


def replay(folder: Path, recording: Path) -> tuple[float, float, float]:
    """(wall seconds, CPU seconds, peak MB) of one replay, from process start to end."""
    before = resource.getrusage(resource.RUSAGE_CHILDREN)
    started = time.perf_counter()
    command = [sys.executable, "-m", "tagstream", "replay", folder / "bench.toml", recording]
    code = (
        "import resource, subprocess, sys; subprocess.run(sys.argv[1:], check=True,"
        " stdout=subprocess.DEVNULL);"
        " print(resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss)"
    )
    done = subprocess.run(
        [sys.executable, "-c", code, *map(str, command)],
        check=True,
        capture_output=True,
        text=True,
    )
    wall = time.perf_counter() - started
    after = resource.getrusage(resource.RUSAGE_CHILDREN)
    cpu = after.ru_utime + after.ru_stime - before.ru_utime - before.ru_stime
    return wall, cpu, int(done.stdout) / 1000


def main() -> None:
    """Print one row per length."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--tags", type=float, nargs="+", default=[2, 20, 200], help="millions")
    parser.add_argument("--runs", type=int, default=5, help="replays of each, after one warm-up")
    parser.add_argument("--folder", type=Path, help="where to keep the recordings")
    arguments = parser.parse_args()
    with tempfile.TemporaryDirectory(dir=arguments.folder) as name:
        folder = Path(name)
        (folder / "bench.toml").write_text(SETTINGS)
        print(f"{'M tags':>8} {'wall s':>8} {'cpu s':>8} {'M tags/s':>9} {'peak MB':>8}")
        for millions in arguments.tags:
            recording = folder / f"{millions:g}.h5"
            make_recording(recording, int(millions * 1e6))
            replay(folder, recording)
            rows = [replay(folder, recording) for _ in range(arguments.runs)]
            wall, cpu, peak = (statistics.median(column) for column in zip(*rows, strict=True))
            print(f"{millions:8g} {wall:8.2f} {cpu:8.2f} {millions / wall:9.1f} {peak:8.0f}")
            recording.unlink()


if __name__ == "__main__":
    main()
