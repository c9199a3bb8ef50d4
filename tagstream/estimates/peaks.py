"""Where the peaks of a pulsed histogram lie, in whole bins, and what they hold."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True, slots=True)
class Comb:
    """Windows of equally many bins around multiples of half a period.

    Positions count half periods: 2 n is peak n, 2 n + 1 the valley after it. A window is the
    group of bins nearest to its centre; of two equally near, the earlier, as in [-w/2, w/2).
    bin_ps, bins_each_side: of the histogram. period_ps: exact.
    """

    bin_ps: int
    bins_each_side: int
    period_ps: Fraction

    def first_bin(self, position: int, width: int) -> int:
        """Index of the first of `width` bins around a position: ceil(centre / bin - width / 2)."""
        num, den = self.period_ps.numerator, self.period_ps.denominator
        twice = position * num - width * den * self.bin_ps
        return self.bins_each_side - (-twice // (2 * den * self.bin_ps))

    def fits(self, position: int, width: int) -> bool:
        """Whether that window lies in the histogram."""
        first = self.first_bin(position, width)
        return first >= 0 and first + width <= 2 * self.bins_each_side + 1

    def peaks(self, width: int) -> list[int]:
        """Positions of the peaks whose windows lie in the histogram, in order."""
        last = int((self.bins_each_side + 1) * self.bin_ps / self.period_ps)
        return [2 * n for n in range(-last, last + 1) if self.fits(2 * n, width)]


class PulsedHistogram:
    """Counts and expected pairs of one span, and where its peaks lie.

    counts: int64, by bin. expected: float64, by bin or () where all bins are alike.
    """

    def __init__(
        self, counts: NDArray[np.int64], expected: NDArray[np.float64], comb: Comb
    ) -> None:
        self.comb = comb
        self._counts = np.concatenate(([0], np.cumsum(counts)))
        self._expected = expected if expected.ndim == 0 else np.append(0.0, np.cumsum(expected))

    def areas(
        self, positions: Sequence[int], width: int
    ) -> tuple[NDArray[np.int64], NDArray[np.float64]]:
        """Counts (int64) and expected pairs (float64) in the windows around `positions`."""
        first = np.array([self.comb.first_bin(p, width) for p in positions], np.int64)
        counts = self._counts[first + width] - self._counts[first]
        if self._expected.ndim == 0:
            return counts, np.full(first.size, float(self._expected) * width)
        return counts, self._expected[first + width] - self._expected[first]
