"""A daemon in a process of its own, and senders that play recordings to it."""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path
from types import TracebackType
from typing import Any

import h5py

PAGE_MB = os.sysconf("SC_PAGE_SIZE") / 1e6
LIVE = """
[feed]
kind = "zmq"
address = "{address}"
bind = true
[channels.arm_a]
input = 1
[channels.arm_b]
input = 2
[rolling]
slice = "{slice}"
spans = ["10 s"]
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
name = "live"
min_free = "100 MB"
{more}
"""


def tagstream(*arguments: object, **options: Any) -> subprocess.Popen[str]:
    """The program in a process of its own."""
    command = [sys.executable, "-m", "tagstream", *map(str, arguments)]
    return subprocess.Popen(command, text=True, **options)


class Daemon:
    """`tagstream run` on a ZeroMQ feed, from its start until it was asked to stop.

    folder: where its settings, sockets and results are. more: lines for the settings; address:
    where it receives, absent a socket in the folder.
    """

    def __init__(
        self, folder: Path, more: str = "", address: str = "", slice_text: str = "1 s"
    ) -> None:
        folder.mkdir(parents=True, exist_ok=True)
        self.folder = folder
        self.address = address or f"ipc://{folder}/tags"
        self.settings = folder / "live.toml"
        control = f'[control]\naddress = "ipc://{folder}/control"\n'
        self.settings.write_text(
            LIVE.format(address=self.address, more=control + more, slice=slice_text)
        )
        self.process: subprocess.Popen[str] | None = None

    def start(self, *options: str) -> None:
        """Start it; return once it says that it is there."""
        with (self.folder / "daemon.out").open("a") as output:
            self.process = tagstream(
                "run", *options, self.settings, stdout=output, stderr=subprocess.STDOUT
            )
        self.wait_for(lambda health: "pid_alive" in health and health["state"] != b"starting")

    def wait_for(
        self, told: Callable[[dict[str, Any]], bool], seconds: float = 60.0
    ) -> dict[str, Any]:
        """Until its health says so. Raises RuntimeError when it ended, or never says it."""
        deadline = time.monotonic() + seconds
        while time.monotonic() < deadline:
            health = self.health()
            if health and told(health):
                return health
            self._check()
            time.sleep(0.02)
        raise RuntimeError(f"not within {seconds} s: {self.health()}")

    def _check(self) -> None:
        if self.process is None or self.process.poll() is not None:
            raise RuntimeError((self.folder / "daemon.out").read_text())

    @property
    def run(self) -> Path:
        """The link to its newest run."""
        return self.folder / "runs" / "live"

    def health(self) -> dict[str, Any]:
        """The numbers of health in latest.h5, and the pid of who wrote them."""
        try:
            with h5py.File(self.run / "latest.h5", "r", locking=False) as file:
                entry = file["run"]
                found = {name: node[()] for name, node in entry["health"].items()}
                pid = int(entry["pid"][()])
        except (OSError, KeyError):
            return {}
        if self.process is not None and pid == self.process.pid:
            found["pid_alive"] = pid
        return found

    def memory_mb(self) -> float:
        """Resident memory."""
        assert self.process is not None
        pages = Path(f"/proc/{self.process.pid}/statm").read_text().split()[1]
        return int(pages) * PAGE_MB

    def stop(self, how: signal.Signals = signal.SIGTERM) -> int:
        """Ask it to stop; the exit code."""
        assert self.process is not None
        self.process.send_signal(how)
        return self.process.wait(120)

    def __enter__(self) -> Daemon:
        self.start()
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, _: TracebackType | None
    ) -> None:
        if self.process is not None and self.process.poll() is None:
            self.process.kill()
            self.process.wait()


def play(recording: Path, address: str, *options: str) -> dict[str, Any]:
    """Play a recording to its end; what the sender tells."""
    sender = tagstream("send", recording, address, *options, "--json", stdout=subprocess.PIPE)
    out, _ = sender.communicate()
    if sender.returncode:
        raise RuntimeError(f"the sender ended with {sender.returncode}")
    told: dict[str, Any] = json.loads(out)
    return told
