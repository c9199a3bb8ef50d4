"""The time in which a pair of a given lag could have been seen."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tagstream.block import Block


class PairTime:
    """Measures, for each lag, the instants t at which [t - |lag|, t] lies in one live stretch.

    A pair belongs to the time of its later tag, so the loss lies at the begin of each stretch;
    away from it the pair time is the live time, for all lags alike.
    """

    def __init__(self, lags_ps: NDArray[np.int64]) -> None:
        self._distance = np.abs(lags_ps)
        self._furthest = int(self._distance.max())
        self._stretch_begin = 0
        self._flat = 0
        self._edge: NDArray[np.int64] | None = None

    def add(self, piece: Block) -> None:
        if piece.opens:
            self._stretch_begin = piece.begin_ps
        if piece.begin_ps >= self._stretch_begin + self._furthest:
            self._flat += piece.end_ps - piece.begin_ps
            return
        first = np.maximum(self._distance + self._stretch_begin, np.int64(piece.begin_ps))
        if self._edge is None:
            self._edge = np.zeros(self._distance.size, np.int64)
        self._edge += np.maximum(np.int64(piece.end_ps) - first, 0)

    def take(self) -> NDArray[np.int64]:
        """Pair time in ps since the last call: () if the same for all lags, else by bin."""
        total = np.asarray(self._flat if self._edge is None else self._edge + self._flat, np.int64)
        self._flat, self._edge = 0, None
        return total
