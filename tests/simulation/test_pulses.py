from __future__ import annotations

from fractions import Fraction
from math import floor

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tagstream.simulation.pulses import clock_times_ps, pulse_range, pulse_times_ps

periods = st.fractions(min_value=2, max_value=10**7, max_denominator=1000)


@given(periods, st.integers(-(10**12), 10**17), st.integers(0, 10**8))
def test_pulses_of_neighbouring_intervals_are_each_there_once(
    period: Fraction, begin: int, length: int
) -> None:
    first, last = pulse_range(period, begin, begin + length)
    assert (first - 1) * period < begin <= first * period
    assert (last - 1) * period < begin + length <= last * period


@given(periods, st.integers(-(10**9), 10**9))
def test_pulse_times_are_rounded_half_up_once(period: Fraction, number: int) -> None:
    assert pulse_times_ps(np.array([number]), period)[0] == floor(number * period + Fraction(1, 2))


def test_pulse_times_after_days() -> None:
    period = Fraction(10**12, 76_123_456)  # 76.123456 MHz
    number = 100 * 86_400 * 76_123_456  # exactly 100 days
    assert pulse_times_ps(np.array([number, number + 1]), period).tolist() == [
        100 * 86_400 * 10**12,
        100 * 86_400 * 10**12 + 13137,  # 13136.56 ps
    ]


@pytest.mark.parametrize("divider", [1, 2, 7])
def test_clock_marks_every_nth_pulse_whatever_the_pieces(divider: int) -> None:
    period = Fraction(25, 2)
    whole = clock_times_ps(period, divider, -300, 1000)
    parts = [clock_times_ps(period, divider, a, a + 100) for a in range(-300, 1000, 100)]
    assert np.concatenate(parts).tolist() == whole.tolist()
    assert 0 in whole
    assert whole.tolist() == [
        floor(n * period + Fraction(1, 2)) for n in range(-24, 80) if n % divider == 0
    ]
