"""The whole program: processes of its own, from start to end."""

from __future__ import annotations

import os
import re
import statistics
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

from light import SECOND, laser_pieces, pair_pieces, record
from measure import table

PAIR = """
[feed]
kind = "recording"
path = "unused.h5"
[channels.arm_a]
input = 1
delay = "{a}"
[channels.arm_b]
input = 2
delay = "{b}"
[[tally]]
name = "hbt"
kind = "cross-correlation"
start = "arm_a"
stop = "arm_b"
max_lag = "{lag}"
bin = "100 ps"
{more}
[results]
folder = "runs"
name = "bench"
"""
CW = '[[estimate]]\nname = "g2_zero"\nkind = "g2-zero"\ntally = "hbt"\nwindow = "500 ps"'
PULSED = (
    "[channels.clock]\ninput = 0\n[[estimate]]\nname = 'g2_zero'\nkind = 'g2-zero-pulsed'\n"
    "tally = 'hbt'\nclock = 'clock'\nwindow = '3 ns'\nside_peaks = 8"
)
TAGS = 10**8  # in each recording of the table
SPREADS = (("no delay", "0 ns", "0 ns"), ("1 us", "0 ns", "1 us"), ("10 us", "0 ns", "10 us"))


class Replay:
    """One replay in a process of its own: seconds from first read to last write, peak memory."""

    def __init__(self, settings: Path, recording: Path) -> None:
        code = (
            "import resource, subprocess, sys; done = subprocess.run(sys.argv[1:], check=True,"
            " capture_output=True, text=True); print(done.stdout);"
            " print('peak', resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss)"
        )
        command = [sys.executable, "-m", "tagstream", "replay", str(settings), str(recording)]
        began = time.perf_counter()
        done = subprocess.run(
            [sys.executable, "-c", code, *command], check=True, capture_output=True, text=True
        )
        self.process_s = time.perf_counter() - began
        tags, took = re.findall(r"^(\d+) tags in ([\d.]+) s", done.stdout, re.MULTILINE)[0]
        self.tags, self.work_s = int(tags), float(took)
        self.peak_mb = int(re.findall(r"^peak (\d+)", done.stdout, re.MULTILINE)[0]) / 1000


def replays(settings: Path, recording: Path, runs: int) -> list[Replay]:
    """Several, after one that is not counted."""
    return [Replay(settings, recording) for _ in range(runs + 1)][1:]


def run(folder: Path, runs: int = 5) -> dict[str, Any]:
    """Print the table of replays; return the figures."""
    makers: dict[str, Callable[[int], Any]] = {
        "2 x 1 M/s": lambda disorder: pair_pieces(TAGS, disorder),
        "laser 80 + 2 x 10 M/s": lambda disorder: laser_pieces(TAGS * SECOND // 10**8, disorder),
    }
    rows, figures = [], {}
    for name, make in makers.items():
        pair = name.startswith("2 x")
        lag, more, rate = ("50 ns", CW, 2e6) if pair else ("125 ns", PULSED, 1e8)
        ordered = None
        for disorder in (0, 500_000):
            recording = folder / "light.h5"
            record(recording, make(disorder))
            for words, a, b in SPREADS if disorder == 0 else SPREADS[:1]:
                settings = folder / "bench.toml"
                settings.write_text(PAIR.format(a=a, b=b, lag=lag, more=more))
                found = replays(settings, recording, runs)
                work = statistics.median(one.work_s for one in found)
                speed = found[0].tags / work / 1e6
                ordered = ordered or speed
                case = f"{name}, {'0.5 us disorder' if disorder else words}"
                peak = max(one.peak_mb for one in found)
                figures[case] = {"M tags/s": speed, "peak MB": peak}
                rows.append(
                    [
                        case,
                        f"{speed:.0f}",
                        f"{ordered / speed:.2f}",
                        f"{speed * 1e6 / rate:.1f}",
                        f"{peak:.0f}",
                    ]
                )
            recording.unlink()
    heads = ["replay, results written", "M tags/s", "ordered/this", "stream s/s", "peak MB"]
    table("whole program, from the first tag read to all results written", heads, rows)
    return figures


def memory(folder: Path, counts: list[int]) -> dict[str, Any]:
    """Peak memory and speed against the length of a recording."""
    rows, figures = [], {}
    settings = folder / "bench.toml"
    settings.write_text(PAIR.format(a="0 ns", b="0 ns", lag="50 ns", more=CW))
    for count in counts:
        recording = folder / "light.h5"
        record(recording, pair_pieces(count))
        found = replays(settings, recording, 3 if count < 10**9 else 1)
        work = statistics.median(one.work_s for one in found)
        peak = max(one.peak_mb for one in found)
        figures[f"{count:.0e}"] = {"peak MB": peak, "M tags/s": count / work / 1e6}
        rows.append([f"{count:.0e}", f"{peak:.0f}", f"{count / work / 1e6:.0f}"])
        recording.unlink()
    table("length of a recording", ["tags", "peak MB", "M tags/s"], rows)
    return figures


def start(folder: Path, runs: int = 5) -> dict[str, Any]:
    """Seconds to the first answer of the program."""
    settings = folder / "bench.toml"
    settings.write_text(PAIR.format(a="0 ns", b="0 ns", lag="50 ns", more=CW))
    recording = folder / "short.h5"
    record(recording, pair_pieces(100_000))
    replay = ["replay", str(settings), str(recording)]
    cases = {
        "tagstream --help": (["--help"], None),
        "tagstream check": (["check", str(settings)], None),
        "first results, kernels cached": (replay, None),
        "first results ever": (replay, folder / "empty"),
    }
    rows, figures = [], {}
    for name, (arguments, cache) in cases.items():
        times = []
        for number in range(runs + 1):
            environment = dict(os.environ)
            if cache is not None:
                environment["NUMBA_CACHE_DIR"] = str(cache / str(number))
                (cache / str(number)).mkdir(parents=True)
            began = time.perf_counter()
            command = [sys.executable, "-m", "tagstream", *arguments]
            subprocess.run(command, check=True, capture_output=True, env=environment)
            times.append(time.perf_counter() - began)
        figures[name] = statistics.median(times[1:])
        rows.append([name, f"{figures[name]:.2f}"])
    table("start, whole process", ["what", "seconds"], rows)
    return figures
