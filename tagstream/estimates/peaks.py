"""Where the peaks of a pulsed histogram lie, in whole bins, and what they hold."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

Areas = tuple[NDArray[np.int64], NDArray[np.float64]]


@dataclass(frozen=True, slots=True)
class Comb:
    """Windows of equally many bins around multiples of half a period.

    Positions count half periods: 2 n is peak n, 2 n + 1 the valley after it. A window is the
    group of bins nearest to its centre; of two equally near, the earlier.
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

    def sides(self, width: int, first: int, last: int) -> list[int]:
        """Positions of the peaks `first` to `last` whose windows fit on both sides of zero."""
        inside = set(self.peaks(width))
        return sorted(p for p in inside if first <= abs(p) // 2 <= last and -p in inside)

    def needed_lag_ps(self, position: int, width: int) -> int:
        """The shortest max_lag of a histogram that holds a window and its mirror image."""
        above = self.first_bin(position, width) + width - 1 - self.bins_each_side
        below = self.bins_each_side - self.first_bin(-position, width)
        return max(above, below) * self.bin_ps


class PulsedHistogram:
    """Counts and expected pairs of one span around the peaks of a comb.

    counts: int64, by bin. expected: float64, by bin or () where all bins are alike.
    width: of the windows, in bins. sides: positions of the side peaks taken as reference.
    """

    def __init__(
        self,
        counts: NDArray[np.int64],
        expected: NDArray[np.float64],
        comb: Comb,
        width: int,
        sides: Sequence[int],
    ) -> None:
        self.comb, self.width, self.sides = comb, width, sides
        self._counts = np.concatenate(([0], np.cumsum(counts)))
        self._expected = expected if expected.ndim == 0 else np.append(0.0, np.cumsum(expected))

    def areas(self, positions: Sequence[int], width: int) -> Areas:
        """Counts (int64) and expected pairs (float64) in the windows around `positions`."""
        first = np.array([self.comb.first_bin(p, width) for p in positions], np.int64)
        counts = self._counts[first + width] - self._counts[first]
        if self._expected.ndim == 0:
            return counts, np.full(first.size, float(self._expected) * width)
        return counts, self._expected[first + width] - self._expected[first]

    @cached_property
    def central(self) -> tuple[int, float]:
        """Counts and expected pairs of the peak at zero lag."""
        counts, expected = self.areas([0], self.width)
        return int(counts[0]), float(expected[0])

    @cached_property
    def reference(self) -> Areas:
        """Counts and expected pairs of each of the side peaks taken as reference."""
        return self.areas(self.sides, self.width)
