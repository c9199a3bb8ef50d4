"""Quantities and ticks, exactly."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tagstream import units
from tagstream.units import TickScale

TICKS = [Fraction(1), Fraction(81), Fraction(10**12, 8192), Fraction(1000, 3), Fraction(125, 8)]


@pytest.mark.parametrize(
    ("text", "ps"),
    [
        ("12.5 ns", 12_500),
        ("1/8192 s", Fraction(10**12, 8192)),
        ("100ps", 100),
        ("1.5e3 us", 1_500_000_000),
        ("-3 ns", -3_000),
        ("1 min", 60 * 10**12),
        ("2 µs", 2_000_000),
    ],
)
def test_times(text: str, ps: Fraction) -> None:
    assert units.parse_time(text) == ps


@pytest.mark.parametrize("text", ["100", "ns", "1 lightyear", "1/0 s", "1e400 furlongs", ""])
def test_wrong_times_say_what_is_right(text: str) -> None:
    with pytest.raises(ValueError, match=r'such as|as in "12\.5 ns"'):
        units.parse_time(text)


@given(st.integers(-(10**19), 10**19))
def test_a_formatted_time_reads_back_the_same(ps: int) -> None:
    assert units.parse_time(units.format_time(ps)) == ps


@pytest.mark.parametrize("tick", TICKS)
def test_a_formatted_tick_reads_back_the_same(tick: Fraction) -> None:
    assert units.parse_time(units.format_time(tick)) == tick


@pytest.mark.parametrize(
    ("ps", "text"),
    [
        (12_500, "12.5 ns"),
        (60 * 10**12, "1 min"),
        (Fraction(10**12, 8192), "1/8192 s"),
        (0, "0 ps"),
        (90 * 10**12, "90 s"),
    ],
)
def test_times_are_shown_as_people_write_them(ps: Fraction, text: str) -> None:
    assert units.format_time(ps) == text


def test_bytes_and_frequencies() -> None:
    assert units.parse_bytes("300 MB") == 300_000_000
    assert units.format_bytes(300_000_000) == "300 MB"
    assert units.parse_frequency("80 MHz") == 80_000_000
    assert units.format_frequency(Fraction(80_000_000)) == "80 MHz"


@given(
    st.sampled_from(TICKS),
    st.integers(0, 2**62),
    st.lists(st.integers(-(10**9), 10**12), max_size=20),
)
def test_ticks_round_half_up_from_the_exact_product(
    tick: Fraction, first: int, offsets: list[int]
) -> None:
    scale = TickScale(tick, first, 10**12)
    counts = [min(max(first + n, -(2**63)), 2**63 - 1) for n in offsets]
    for count, ps in zip(counts, scale.to_ps(np.array(counts, np.int64)).tolist(), strict=True):
        exact = count * tick - scale.origin_ps
        rounded = (2 * exact.numerator + exact.denominator) // (2 * exact.denominator)
        if abs(exact) <= units.TIME_LIMIT_PS - 10**13:
            assert ps == rounded
        elif abs(exact) > units.TIME_LIMIT_PS + 10**13:
            assert abs(ps) == units.BEYOND_LIMIT_PS


def test_26_days_at_1_8192_s_do_not_overflow() -> None:
    # (2 n num + den) // (2 den) taken at once in int64 would wrap after 26.7 days at this tick.
    tick = Fraction(10**12, 8192)
    days = 100
    count = np.array([days * 86_400 * 8192], np.int64)
    assert TickScale(tick, 0, 10**12).to_ps(count)[0] == days * 86_400 * 10**12


def test_the_limit_is_106_days() -> None:
    scale = TickScale(Fraction(1), 0, 10**12)
    last = 106 * 86_400 * 10**12
    assert list(scale.to_ps(np.array([last, last + 1], np.int64))) == [last, units.BEYOND_LIMIT_PS]


def test_the_origin_is_the_slice_of_the_first_tag() -> None:
    scale = TickScale(Fraction(1), 5_300_000_000_000, 10**12)
    assert scale.origin_ps == 5 * 10**12
    assert scale.origin_ticks == 5 * 10**12
    assert scale.to_ps(np.array([5_300_000_000_000], np.int64))[0] == 300_000_000_000


def test_a_tick_too_fine_for_exact_products_is_refused() -> None:
    with pytest.raises(ValueError, match="below"):
        TickScale(Fraction(2**40, 2**30 + 1), 0, 10**12)


@pytest.mark.parametrize("tick", TICKS)
def test_a_scale_that_is_moved_gives_later_times_as_exactly(tick: Fraction) -> None:
    scale = TickScale(tick, 10**9, 10**12)
    counts = np.arange(10**9, 10**9 + 100, dtype=np.int64)
    days = 105 * 86_400 * 10**12
    assert np.array_equal(scale.moved(days + 1).to_ps(counts), scale.to_ps(counts) + days + 1)
    assert scale.moved(5).moved(-5) == scale
