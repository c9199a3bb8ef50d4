"""The daemon live: from a ZeroMQ socket to estimates in latest.h5, sender on the same machine."""

from __future__ import annotations

import statistics
import subprocess
import sys
import time
from pathlib import Path
from typing import Any

from daemon import Daemon, play, tagstream
from light import pair_pieces, record, steady_pieces
from measure import table

TAGS = 10**8
SETTLE_S = 2.0  # how long after the last tag results are waited for


def throughput(folder: Path, recording: Path, runs: int) -> dict[str, Any]:
    """Tags per second, as fast as the daemon takes them, with and without what it can do."""
    rows, figures = [], {}
    for name, feed, more, options in _cases(folder):
        found = [
            _through(folder / f"{name.replace(' ', '-')}-{i}", recording, (feed, more), options)
            for i in range(runs)
        ]
        speed = statistics.median(one["M tags/s"] for one in found)
        dropped = sum(one["dropped"] for one in found)
        figures[name] = {"M tags/s": speed, "dropped": dropped}
        rows.append([name, f"{speed:.0f}", str(dropped)])
    table("live, as fast as it goes: ZeroMQ to results", ["case", "M tags/s", "dropped"], rows)
    return figures


def _cases(folder: Path) -> list[tuple[str, str, str, tuple[str, ...]]]:
    recording = '[recording]\nsegment = "400 MB"\nmin_free = "100 MB"\nkeep = "800 MB"'
    keys = folder / "keys"
    subprocess.run(
        [sys.executable, "-m", "tagstream", "keys", str(keys)], check=True, capture_output=True
    )
    # one pair of keys for both ends will do for measuring
    return [
        ("plain", "", "", ()),
        ("recording", "", recording, ()),
    ]


def _through(
    folder: Path, recording: Path, settings: tuple[str, str], options: tuple[str, ...]
) -> dict[str, float]:
    feed, more = settings
    with Daemon(folder, feed, more) as daemon:
        began = time.monotonic()
        told = play(recording, daemon.address, "--fast", *options)
        while int(daemon.health().get("received", 0)) < told["counts"]["tags"]:
            time.sleep(0.02)
            if time.monotonic() - began > 120:
                raise RuntimeError(f"tags are missing: {daemon.health()}")
        seconds = told["seconds"]
        health = daemon.health()
        daemon.stop()
    dropped = sum(int(n) for name, n in health.items() if name.startswith("dropped_"))
    return {"M tags/s": told["counts"]["tags"] / seconds / 1e6, "dropped": dropped}


def latency(folder: Path, seconds: int = 60) -> dict[str, Any]:
    """From the arrival of a tag to its estimate on the disk, at 10 million tags a second."""
    recording = folder / "steady.h5"
    record(recording, steady_pieces(10_000_000, seconds))
    with Daemon(folder / "latency") as daemon:
        sender = tagstream("send", recording, daemon.address, stdout=subprocess.DEVNULL)
        sender.wait()
        time.sleep(SETTLE_S)
        health = daemon.health()
        daemon.stop()
    figures = {key: float(health[key]) for key in ("latency_median_s", "latency_p99_s")}
    rows = [[f"{value:.3f}" for value in figures.values()]]
    table("latency at 10 M tags/s, slices of 1 s", ["median s", "99th percentile s"], rows)
    return figures


def run(folder: Path, runs: int = 5) -> dict[str, Any]:
    """Print the tables; return the figures."""
    recording = folder / "pair.h5"
    record(recording, pair_pieces(TAGS))
    return {
        "throughput": throughput(folder, recording, runs),
        "latency": latency(folder),
    }
