"""The daemon live: from a ZeroMQ socket to estimates in latest.h5, sender on the same machine."""

from __future__ import annotations

import json
import statistics
import subprocess
import sys
import time
from pathlib import Path
from typing import Any

from light import pair_pieces, record, steady_pieces
from measure import table

sys.path.append(str(Path(__file__).parents[2]))
from tests.flow.daemon import Daemon, tagstream

LIGHT = 20_000_000  # tags that are made ready, and sent ROUNDS times
ROUNDS = 8
MESSAGE = 1 << 17
RECORDING = '[recording]\nsegment = "400 MB"\nmin_free = "100 MB"\nkeep = "800 MB"\n'
WAIT = '[conditioning]\noverload = "wait"\n'  # the sender can wait: nothing is to be left out


def throughput(folder: Path, runs: int) -> dict[str, Any]:
    """Tags per second, as fast as the daemon takes them, with and without what it can do."""
    recording, keys = folder / "pair.h5", folder / "keys"
    record(recording, pair_pieces(LIGHT))
    subprocess.run(
        [sys.executable, "-m", "tagstream", "keys", str(keys)], check=True, capture_output=True
    )
    secured = f'[security]\nkeys = "{keys}"\nauthorised = "{keys}/authorised"\n'
    port = "tcp://127.0.0.1:5579"
    cases = {
        "plain, ipc": ("", WAIT, []),
        "plain, tcp": (port, WAIT, []),
        "recording, ipc": ("", WAIT + RECORDING, []),
        "CURVE, tcp": (port, WAIT + secured, [keys / "server.public", keys]),
    }
    rows, figures = [], {}
    for number, (name, (address, more, secrets)) in enumerate(cases.items()):
        found = []
        for i in range(runs):
            place = folder / f"{number}-{i}"
            found.append(_through(Daemon(place, more, address), recording, secrets))
        speed = statistics.median(one["M tags/s"] for one in found)
        lost = sum(one["lost"] for one in found)
        figures[name] = {"M tags/s": speed, "lost": lost}
        rows.append([name, f"{speed:.0f}", str(lost)])
    heads = ["live, messages of 2^17 tags", "M tags/s", "dropped or not recorded"]
    table("from the socket to results, as fast as it goes", heads, rows)
    return figures


def _through(daemon: Daemon, recording: Path, secrets: list[Path]) -> dict[str, float]:
    """From the first message sent to the last tag counted."""
    with daemon:
        sender = [sys.executable, Path(__file__).with_name("sender.py"), recording]
        options = [daemon.address, str(ROUNDS), str(MESSAGE), *secrets]
        done = subprocess.run([*sender, *options], check=True, capture_output=True, text=True)
        told = json.loads(done.stdout)
        health = daemon.wait_for(lambda h: h.get("received", 0) >= told["tags"], 120)
        daemon.stop()
    lost = sum(int(count) for name, count in health.items() if name.startswith("dropped_"))
    lost += int(health.get("recording_not_recorded", 0))
    return {"M tags/s": told["tags"] / told["seconds"] / 1e6, "lost": lost}


def latency(folder: Path, seconds: int = 20, repeat: int = 6) -> dict[str, Any]:
    """From the arrival of a tag to its estimate on the disk, at 10 million tags a second."""
    recording = folder / "steady.h5"
    record(recording, steady_pieces(10_000_000, seconds))
    with Daemon(folder / "latency") as daemon:
        sender = tagstream(
            "send", recording, daemon.address, "--repeat", repeat, stdout=subprocess.DEVNULL
        )
        sender.wait()
        time.sleep(2.0)
        health = daemon.health()
        daemon.stop()
    figures = {key: float(health[key]) for key in ("latency_median_s", "latency_p99_s")}
    figures["slices"] = float(seconds * repeat)
    rows = [[f"{value:.3f}" for value in figures.values()]]
    table("latency at 10 M tags/s, slices of 1 s", ["median s", "99th percentile s", "of"], rows)
    return figures


def run(folder: Path, runs: int = 5) -> dict[str, Any]:
    """Print the tables; return the figures."""
    return {"throughput": throughput(folder, runs), "latency": latency(folder)}
