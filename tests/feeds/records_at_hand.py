"""Records for tests of live feeds, and what a feed makes of them."""

from __future__ import annotations

import os
from collections.abc import Callable, Iterator
from typing import Any

import numpy as np

from tagstream.feeds import IDLE, Arrivals, LiveFeed

# 4 bytes: time in ns (16 bits), input (4 bits); bit 31 rollover, bits 31 and 30 gap.
LAYOUT: dict[str, Any] = {
    "record_bytes": 4,
    "tick": "1 ns",
    "time_bits": [0, 16],
    "channel_bits": [16, 4],
    "marker": [
        {"where": [[31, 1], [30, 1]], "equals": [1, 1], "means": "gap"},
        {"where": [31, 1], "equals": 1, "means": "rollover", "count": [0, 16]},
    ],
}
GAP, ROLLOVER = 3 << 30, 1 << 31
SLICE_PS = 10**9


def tag(time: int, channel: int = 1) -> int:
    """A tag as a number."""
    return channel << 16 | time


def data(*numbers: int) -> bytes:
    """Records as bytes."""
    return np.array(numbers, "<u4").tobytes()


def until(pieces: Iterator[Arrivals], enough: Callable[[list[Arrivals]], bool]) -> list[Arrivals]:
    """Pieces that are not idle, until there are enough; fails when a thousand were idle."""
    found: list[Arrivals] = []
    idle = 0
    while idle < 1000:
        piece = next(pieces)
        if piece is IDLE:
            idle += 1
        else:
            found.append(piece)
        if enough(found):
            return found
    raise AssertionError(f"nothing more came after {len(found)} pieces")


def tags_until(pieces: Iterator[Arrivals], count: int) -> list[Arrivals]:
    """Pieces with at least `count` tags."""
    return until(pieces, lambda found: sum(p.times_ps.size for p in found) >= count)


def idle_until(pieces: Iterator[Arrivals], feed: LiveFeed, **counts: int) -> None:
    """Let a feed look around until its link says so."""
    until(pieces, lambda _: all(feed.link[name] == value for name, value in counts.items()))


def fill(descriptor: int, *parts: bytes) -> None:
    """Write to a pipe and close it."""
    with os.fdopen(descriptor, "wb", buffering=0) as pipe:
        for part in parts:
            pipe.write(part)
