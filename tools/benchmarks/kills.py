"""`tools/kills`: the daemon is killed at random instants, again and again, and goes on."""

from __future__ import annotations

import argparse
import signal
import subprocess
import sys
import tempfile
import time
from datetime import datetime
from pathlib import Path

import h5py
import numpy as np
from light import record, steady_pieces

sys.path.append(str(Path(__file__).parents[2]))
import tagstream as package
from tagstream.outputs.recovery import recover
from tagstream.recording import RecordingReader
from tests.flow.daemon import Daemon, tagstream

RATE = 200_000
PART_S = 60
SLACK_S = 0.2  # the machine may have been busy
RECORDING = '[recording]\nsegment = "2 MB"\nmin_free = "1 MB"\n'


def main() -> None:
    """Kill, look at what is left, resume; print the counts."""
    parser = argparse.ArgumentParser(prog="tools/kills", description=__doc__)
    parser.add_argument("--kills", type=int, default=200)
    parser.add_argument("--longest", type=float, default=2.5, help="seconds until a kill")
    chosen = parser.parse_args()
    rng = np.random.default_rng(1)
    counts = dict.fromkeys(
        ("kills", "latest opens", "behind by more than 1 s", "lost rows", "bad recordings"), 0
    )
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        record(folder / "light.h5", steady_pieces(RATE, PART_S))
        daemon = Daemon(folder / "d", RECORDING, slice_text="100 ms")
        sender = tagstream(
            "send", folder / "light.h5", daemon.address, "--repeat", 10_000,
            stdout=subprocess.DEVNULL,
        )  # fmt: skip
        try:
            for number in range(chosen.kills):
                daemon.start(*(["--resume"] if number else []))
                time.sleep(rng.uniform(0, chosen.longest))
                daemon.stop(signal.SIGKILL)
                _look(daemon.run.resolve(), counts)
        finally:
            sender.kill()
            sender.wait()
        run = package.open_run(daemon.run)
        recover(run.path)
        for segment in sorted(run.path.glob("recording-*.h5")):
            counts["bad recordings"] += _is_bad(segment)
        for key, count in counts.items():
            print(f"{key:<28} {count}")
        print(f"{'restarts, as the run has it':<28} {run.health['restarts']}")
        print(f"{'rows of history':<28} {run.history('g2_zero')['begin_ps'].size}")
        print(f"{'tags counted in the run':<28} {run.health['received']}")
        print(f"{'segments, all readable':<28} {len(list(run.path.glob('recording-*.h5')))}")
        print(f"{'left-over files':<28} {len(list(run.path.glob('*.tmp')))}")


def _look(run: Path, counts: dict[str, int]) -> None:
    counts["kills"] += 1
    with h5py.File(run / "latest.h5", locking=False) as file:
        entry = file["run"]
        counts["latest opens"] += 1
        if "hbt" not in entry:
            return
        slice_ps, end_ps = int(entry["slice_ps"][()]), int(entry["hbt/end_ps"][()])
        updated = datetime.fromisoformat(entry["updated_utc"].asstr()[()]).timestamp()
    rows = package.open_run(run).history("g2_zero")
    last, written = (rows[key][-1] if rows[key].size else 0 for key in ("end_ps", "utc"))
    # At most a slice, or a second of wall time, whichever is longer, is missing from latest.h5.
    counts["behind by more than 1 s"] += written - updated > max(slice_ps / 1e12, 1.0) + SLACK_S
    counts["lost rows"] += end_ps - int(last) > slice_ps


def _is_bad(segment: Path) -> bool:
    try:
        with RecordingReader(segment) as reader:
            return sum(piece.times_ps.size for piece in reader.pieces()) != reader.count
    except Exception as error:
        print(f"{segment}: {error}")
        return True


if __name__ == "__main__":
    main()
