"""Blocks for tests of the tallies."""

from __future__ import annotations

import numpy as np

from tagstream.block import Block
from tests.strategies import int64


def block(tags: list[tuple[int, int]], begin_ps: int, end_ps: int, opens: bool = False) -> Block:
    """A block from (time, channel), sorted."""
    times, channels = [t for t, _ in tags], [c for _, c in tags]
    return Block(int64(times), np.array(channels, np.uint8), begin_ps, end_ps, opens)
