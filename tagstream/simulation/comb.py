"""Peaks of a pulsed coincidence histogram, and what windows around any lag hold of them."""

from __future__ import annotations

from dataclasses import dataclass
from math import ceil

import numpy as np
from numpy.typing import NDArray

from tagstream.simulation.jitter import lag_share
from tagstream.simulation.pulsed import REACH, with_dark_counts


@dataclass(frozen=True, slots=True)
class Comb:
    """A cluster of peaks for each period, all alike but the central one.

    offsets_ps: float64, k, of the peaks from the middle of their cluster. central, others: their
    pairs, in any unit. light_pairs: f_a f_b, the part of all pairs that are two photons. law:
    lifetime and joint jitter, in ps.
    """

    period_ps: float
    offsets_ps: NDArray[np.float64]
    central: NDArray[np.float64]
    others: NDArray[np.float64]
    law: tuple[float, float]
    light_pairs: float

    def counts(self, at_ps: float, window_ps: float) -> float:
        """In a window, with the tails of all peaks and dark counts; of a mean period 1."""
        reach = ceil((abs(at_ps) + window_ps / 2 + REACH * sum(self.law)) / self.period_ps) + 2
        clusters = np.arange(-reach, reach + 1)
        weights = np.where(clusters[:, None] == 0, self.central, self.others)
        peaks = clusters[:, None] * self.period_ps + self.offsets_ps
        shares = lag_share(peaks - at_ps, window_ps, *self.law)
        counts = float(np.sum(weights * shares)) / float(np.sum(self.others))
        return with_dark_counts(counts, window_ps / self.period_ps, self.light_pairs)

    def ratio(self, window_ps: float, side_peaks: tuple[int, int]) -> float:
        """Counts in the window at zero over the mean of those at so many periods."""
        sides = range(side_peaks[0], side_peaks[1] + 1)
        return self.counts(0.0, window_ps) / float(
            np.mean([self.counts(n * self.period_ps, window_ps) for n in sides])
        )
