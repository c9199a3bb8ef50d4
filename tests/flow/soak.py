"""The daemon under steady load for a while: memory, drops, latency."""

from __future__ import annotations

import subprocess
import time
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from tests.flow.daemon import Daemon, tagstream

LOOK_S = 1.0
SETTLED = 0.25  # the first quarter is left out of the slope: caches fill, spans grow


@dataclass(frozen=True, slots=True)
class Soaked:
    """What was found.

    slope_mb_per_h: of memory, after the first quarter. growth_mb: from the second third of the
    time to the last one, by their medians; dropped, gaps, sessions: of the health.
    """

    seconds: float
    tags: int
    dropped: int
    gaps: int
    sessions: int
    memory_mb: float
    slope_mb_per_h: float
    growth_mb: float
    latency_median_s: float
    latency_p99_s: float

    def lines(self) -> list[str]:
        """For people."""
        rate = self.tags / self.seconds / 1e6
        return [
            f"{self.tags} tags in {self.seconds:.0f} s, {rate:.2f} million a second",
            f"dropped {self.dropped}; gaps {self.gaps}, of {self.sessions} sessions of the sender",
            f"memory {self.memory_mb:.0f} MB at the end, {self.slope_mb_per_h:+.2f} MB an hour",
            f"latency to the disk: median {self.latency_median_s:.3f} s,"
            f" 99th percentile {self.latency_p99_s:.3f} s, with slices of 1 s",
        ]


def soak(folder: Path, recording: Path, repeat: int, more: str = "") -> Soaked:
    """Play a recording `repeat` times at its own pace to a daemon."""
    memory: list[tuple[float, float]] = []
    with Daemon(folder, more) as daemon:
        began = time.monotonic()
        sender = tagstream(
            "send", recording, daemon.address, "--repeat", repeat, stdout=subprocess.DEVNULL
        )
        while sender.poll() is None:
            memory.append((time.monotonic() - began, daemon.memory_mb()))
            time.sleep(LOOK_S)
        seconds = time.monotonic() - began
        time.sleep(2.5)
        health = daemon.health()
        daemon.stop()
    times, sizes = np.array(memory).T
    late = times > SETTLED * times[-1]
    third = times.size // 3
    growth = float(np.median(sizes[2 * third :]) - np.median(sizes[third : 2 * third]))
    slope = float(np.polyfit(times[late], sizes[late], 1)[0]) * 3600
    dropped = sum(int(count) for name, count in health.items() if name.startswith("dropped_"))
    return Soaked(
        seconds,
        int(health["received"]),
        dropped,
        int(health["gaps"]),
        int(health["sessions"]),
        float(sizes[-1]),
        slope,
        growth,
        float(health["latency_median_s"]),
        float(health["latency_p99_s"]),
    )
