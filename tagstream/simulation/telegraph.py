"""A random telegraph: on and off for exponentially distributed times."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True, slots=True)
class Telegraph:
    """Mean time on before it goes off, and mean time off.

    Its correlation is <x(0) x(t)> / <x>^2 = 1 + depth exp(-|t| / time), x being 1 or 0.
    """

    on_ps: float
    off_ps: float

    @property
    def share(self) -> float:
        """The fraction of the time that it is on: p."""
        return self.on_ps / (self.on_ps + self.off_ps)

    @property
    def depth(self) -> float:
        """(1 - p) / p."""
        return self.off_ps / self.on_ps

    @property
    def time_ps(self) -> float:
        """1 / (1/on + 1/off)."""
        return self.on_ps * self.off_ps / (self.on_ps + self.off_ps)


class TelegraphState:
    """Follows a telegraph, stationary from the start, at given instants only.

    Exact: from one instant to the next, t later, a two-state Markov process keeps its state
    with probability exp(-t / time) and is else drawn anew from its stationary law.
    """

    def __init__(self, telegraph: Telegraph) -> None:
        self._telegraph = telegraph
        self._last_ps, self._is_on = -np.inf, False  # so long ago that it says nothing

    def is_on(
        self, offsets_ps: NDArray[np.float64], length_ps: int, rng: np.random.Generator
    ) -> NDArray[np.bool_]:
        """Whether it is on at each of the rising times within one step of that length."""
        kept = np.exp(-np.diff(offsets_ps, prepend=self._last_ps) / self._telegraph.time_ps)
        anew = rng.random(offsets_ps.size) >= kept
        drawn = rng.random(offsets_ps.size) < self._telegraph.share
        latest = np.maximum.accumulate(np.where(anew, np.arange(offsets_ps.size), -1))
        states = np.where(latest >= 0, drawn[latest], self._is_on)
        if offsets_ps.size:
            self._last_ps, self._is_on = float(offsets_ps[-1]), bool(states[-1])
        self._last_ps -= length_ps
        return states
