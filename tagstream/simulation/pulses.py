"""The times of pulses: pulse n is at n times the exact period, rounded half up once."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

from tagstream.units import TickScale


def pulse_range(period: Fraction, begin_ps: int, end_ps: int) -> tuple[int, int]:
    """First pulse at or after `begin_ps` and first at or after `end_ps`, by their exact times."""
    return -int(-begin_ps // period), -int(-end_ps // period)


def pulse_times_ps(numbers: NDArray[np.int64], period: Fraction) -> NDArray[np.int64]:
    """The times of pulses, int64 ps, same shape as `numbers` (int64).

    Raises ValueError when the exact product would not fit (units.TickScale).
    """
    return TickScale(period, 0, 1).to_ps(numbers)


def clock_times_ps(period: Fraction, divider: int, begin_ps: int, end_ps: int) -> NDArray[np.int64]:
    """The times of every `divider`-th pulse in [begin_ps, end_ps), int64 ps; pulse 0 is one."""
    first, last = pulse_range(period, begin_ps, end_ps)
    numbers = np.arange(-(-first // divider) * divider, last, divider, dtype=np.int64)
    return pulse_times_ps(numbers, period)
