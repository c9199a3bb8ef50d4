"""The unit that flows from conditioning to the tallies."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True, slots=True)
class Block:
    """Tags in time order and the live interval [begin_ps, end_ps) that they extend.

    A block lies in one live stretch. One that does not `open` a stretch begins where the
    block before it ended. Where coverage is assumed from the tags themselves, the tags that
    open a stretch lie one picosecond before `begin_ps`: they may have partners, but they are
    not counted, since the interval was chosen to start at them.

    times_ps: int64, n, non-decreasing; equal times keep arrival order.
    channels: uint8, n; index into the channels in the order of the settings.
    """

    times_ps: NDArray[np.int64]
    channels: NDArray[np.uint8]
    begin_ps: int
    end_ps: int
    opens: bool = False

    def cut(self, at_ps: int) -> tuple[Block, Block]:
        """Split at `at_ps` (begin_ps < at_ps < end_ps): tags before it, tags from it on."""
        i = int(np.searchsorted(self.times_ps, np.int64(at_ps), side="left"))
        head = Block(self.times_ps[:i], self.channels[:i], self.begin_ps, at_ps, self.opens)
        return head, Block(self.times_ps[i:], self.channels[i:], at_ps, self.end_ps)
