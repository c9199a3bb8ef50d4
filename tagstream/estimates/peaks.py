"""Where the peaks of a pulsed histogram lie, in whole bins, and what they hold."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from tagstream.estimates.normalisation import distinct_pairs

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
        return self.first_bins([position], width)[0]

    def first_bins(self, positions: Sequence[int], width: int) -> list[int]:
        """The same of many positions. Python integers: a measured period has many digits."""
        num, den = self.period_ps.numerator, self.period_ps.denominator
        half_window, whole = width * den * self.bin_ps, 2 * den * self.bin_ps
        return [self.bins_each_side - (half_window - p * num) // whole for p in positions]

    def off_centre_ps(self, positions: Sequence[int], width: int) -> list[float]:
        """How far windows lie beside their centres: at most half a bin."""
        half_period = float(self.period_ps) / 2
        middle = (width - 1) / 2 - self.bins_each_side  # of a window that begins at bin 0
        return [
            abs((first + middle) * self.bin_ps - p * half_period)
            for p, first in zip(positions, self.first_bins(positions, width), strict=True)
        ]

    def fits(self, position: int, width: int) -> bool:
        """Whether that window lies in the histogram."""
        return bool(self.fitting([position], width))

    def fitting(self, positions: Sequence[int], width: int) -> list[int]:
        """Those whose windows lie in the histogram."""
        end = 2 * self.bins_each_side + 1 - width
        firsts = self.first_bins(positions, width)
        return [p for p, first in zip(positions, firsts, strict=True) if 0 <= first <= end]

    def peaks(self, width: int) -> list[int]:
        """Positions of the peaks whose windows lie in the histogram, in order."""
        last = int((self.bins_each_side + 1) * self.bin_ps / self.period_ps)
        return self.fitting(range(-2 * last, 2 * last + 1, 2), width)

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
    one_channel: start and stop are one channel. Then `sides` are to be above zero alone, since
    the lags below mirror them, and the window around zero is halved (see `distinct_pairs`).
    """

    def __init__(
        self,
        counts: NDArray[np.int64],
        expected: NDArray[np.float64],
        comb: Comb,
        width: int,
        sides: Sequence[int],
        *,
        one_channel: bool = False,
    ) -> None:
        self.comb, self.width, self.sides = comb, width, sides
        self._one_channel = one_channel
        self._counts = np.concatenate(([0], np.cumsum(counts)))
        self._expected = expected if expected.ndim == 0 else np.append(0.0, np.cumsum(expected))

    def areas(self, positions: Sequence[int], width: int) -> Areas:
        """Counts (int64) and expected pairs (float64) in the windows around `positions`."""
        first = np.array(self.comb.first_bins(positions, width), np.int64)
        counts = self._counts[first + width] - self._counts[first]
        if self._expected.ndim == 0:
            expected = np.full(first.size, float(self._expected) * width)
        else:
            expected = self._expected[first + width] - self._expected[first]
        if self._one_channel and 0 in positions:
            at = positions.index(0)
            counts[at], expected[at] = distinct_pairs(int(counts[at]), float(expected[at]))
        return counts, expected

    @cached_property
    def central(self) -> tuple[int, float]:
        """Counts and expected pairs of the peak at zero lag."""
        counts, expected = self.areas([0], self.width)
        return int(counts[0]), float(expected[0])

    @cached_property
    def reference(self) -> Areas:
        """Counts and expected pairs of each of the side peaks taken as reference."""
        return self.areas(self.sides, self.width)
