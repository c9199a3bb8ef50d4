"""Live time: which ordered tags lie in it, and the block that they make.

A live stretch is an interval in which no tag can have been lost. There are two kinds:
`VouchedStretch`, where the source says which interval is complete, and `AssumedStretch`, where
nothing is known and the stretch runs from its first tag to its last.
"""

from __future__ import annotations

from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from tagstream.block import Block


class Stretch(Protocol):
    """`block` turns ordered tags that are final up to `known_to_ps` into the next block.

    It returns the block, or None if live time did not grow, and the number of tags dropped
    because they lie outside live time.
    """

    begin_ps: int | None
    end_ps: int | None

    def block(
        self, times_ps: NDArray[np.int64], channels: NDArray[np.uint8], known_to_ps: int
    ) -> tuple[Block | None, int]: ...


class VouchedStretch:
    """Live from the vouched begin to where the source has vouched so far.

    Delays shift each channel's interval; live is where all of them overlap: from begin +
    largest delay to end + smallest delay, and not before the end of the stretch before it.
    """

    def __init__(self, begin_ps: int) -> None:
        self.begin_ps: int | None = None
        self.end_ps: int | None = None
        self._first_ps = begin_ps

    def block(
        self, times_ps: NDArray[np.int64], channels: NDArray[np.uint8], known_to_ps: int
    ) -> tuple[Block | None, int]:
        start = self._first_ps if self.end_ps is None else self.end_ps
        i = int(np.searchsorted(times_ps, np.int64(start)))
        j = max(i, int(np.searchsorted(times_ps, np.int64(known_to_ps))))
        dropped = int(times_ps.size) - (j - i)
        if known_to_ps <= start:
            return None, dropped
        opens = self.end_ps is None
        if opens:
            self.begin_ps = start
        self.end_ps = known_to_ps
        return Block(times_ps[i:j], channels[i:j], start, known_to_ps, opens), dropped


class AssumedStretch:
    """Live from just after the first tag to the last one; see `Block` for the opening tags."""

    def __init__(self, not_before_ps: int) -> None:
        self.begin_ps: int | None = None
        self.end_ps: int | None = None
        self._not_before_ps = not_before_ps

    def block(
        self, times_ps: NDArray[np.int64], channels: NDArray[np.uint8], known_to_ps: int
    ) -> tuple[Block | None, int]:
        i = int(np.searchsorted(times_ps, np.int64(self._not_before_ps)))
        times_ps, channels = times_ps[i:], channels[i:]
        if times_ps.size == 0:
            return None, i
        opens = self.end_ps is None
        start = int(times_ps[0]) + 1 if self.end_ps is None else self.end_ps
        if opens:
            self.begin_ps = start
        self.end_ps = max(start, int(times_ps[-1]) + 1)
        return Block(times_ps, channels, start, self.end_ps, opens), i
