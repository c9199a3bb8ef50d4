"""Quantities with units, exactly: text to integers or fractions, ticks to picoseconds.

Nothing here rounds twice. Time inside the program is int64 picoseconds since the origin of
the run, good for 106 days; a time beyond that is marked, never wrapped.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray

PS_PER_S = 10**12
TIME_LIMIT_PS = 106 * 86_400 * PS_PER_S  # int64 ends at 106.75 days; the rest is head room
BEYOND_LIMIT_PS = TIME_LIMIT_PS + 1  # what a time past the limit becomes; conditioning drops it

_TIME_UNITS = {
    "ps": Fraction(1),
    "ns": Fraction(10**3),
    "us": Fraction(10**6),
    "µs": Fraction(10**6),
    "μs": Fraction(10**6),
    "ms": Fraction(10**9),
    "s": Fraction(10**12),
    "min": Fraction(60 * 10**12),
    "h": Fraction(3600 * 10**12),
    "d": Fraction(86400 * 10**12),
}
_FREQUENCY_UNITS = {
    "Hz": Fraction(1),
    "kHz": Fraction(10**3),
    "MHz": Fraction(10**6),
    "GHz": Fraction(10**9),
}
_BYTE_UNITS = {
    "B": Fraction(1),
    "kB": Fraction(10**3),
    "MB": Fraction(10**6),
    "GB": Fraction(10**9),
    "TB": Fraction(10**12),
}
_QUANTITY = re.compile(
    r"\s*([+-]?(?:\d+(?:\.\d*)?|\.\d+)(?:[eE][+-]?\d+)?)(?:\s*/\s*(\d+))?\s*([A-Za-zµμ]+)\s*"
)


def _parse(text: str, units: dict[str, Fraction], example: str) -> Fraction:
    match = _QUANTITY.fullmatch(text)
    known = ", ".join(unit for unit in units if unit.isascii())
    if match is None:
        raise ValueError(f'a number with a unit ({known}), such as "{example}"')
    number, divisor, unit = match.groups()
    if unit not in units:
        raise ValueError(f'one of the units {known}, as in "{example}"')
    if divisor is not None and int(divisor) == 0:
        raise ValueError(f'a divisor other than zero, as in "{example}"')
    return Fraction(number) / int(divisor or 1) * units[unit]


def parse_time(text: str) -> Fraction:
    """Picoseconds, exactly, from a text such as "12.5 ns" or "1/8192 s".

    Raises ValueError whose message says what would be right.
    """
    return _parse(text, _TIME_UNITS, "12.5 ns")


def parse_frequency(text: str) -> Fraction:
    """Hertz, exactly, from a text such as "80 MHz". Raises ValueError like `parse_time`."""
    return _parse(text, _FREQUENCY_UNITS, "80 MHz")


def parse_bytes(text: str) -> int:
    """Bytes from a text such as "300 MB". Raises ValueError like `parse_time`."""
    return int(_parse(text, _BYTE_UNITS, "300 MB"))


def format_time(ps: Fraction | int) -> str:
    """The shortest exact text of a time: "12.5 ns", "1 min", "1/8192 s"."""
    value = Fraction(ps)
    if value == 0:
        return "0 ps"
    if value.denominator != 1:
        return _format_part_of_ps(value)
    for unit in ("d", "h", "min", "s", "ms", "us", "ns"):
        scaled = value / _TIME_UNITS[unit]
        long_unit = unit in ("d", "h", "min")  # nobody writes 1.5 min
        if abs(scaled) >= 1 and (scaled.denominator == 1 or not long_unit):
            text = _decimal(scaled)
            if text is not None:
                return f"{text} {unit}"
    return f"{int(value)} ps"


def _format_part_of_ps(value: Fraction) -> str:
    """A time that is no whole number of picoseconds, such as "1/8192 s"."""
    for unit in ("s", "ms", "us", "ns"):
        scaled = value / _TIME_UNITS[unit]
        if scaled.numerator == 1:
            return f"1/{scaled.denominator} {unit}"
    text = _decimal(value)
    return f"{text} ps" if text is not None else f"{value.numerator}/{value.denominator} ps"


def format_frequency(hertz: Fraction) -> str:
    """The shortest exact text of a frequency: "80 MHz"."""
    for unit in ("GHz", "MHz", "kHz", "Hz"):
        scaled = hertz / _FREQUENCY_UNITS[unit]
        if (scaled >= 1 or unit == "Hz") and (text := _decimal(scaled)) is not None:
            return f"{text} {unit}"
    return f"{hertz.numerator}/{hertz.denominator} Hz"


def format_bytes(count: int) -> str:
    """The shortest exact text of a number of bytes: "300 MB"."""
    for unit in ("TB", "GB", "MB", "kB"):
        scaled = count / _BYTE_UNITS[unit]
        if scaled >= 1 and (text := _decimal(scaled)) is not None:
            return f"{text} {unit}"
    return f"{count} B"


def _decimal(value: Fraction) -> str | None:
    """`value` as an exact decimal of at most six places, or None."""
    micro = value * 10**6
    if micro.denominator != 1:
        return None
    sign = "-" if value < 0 else ""
    whole, places = divmod(abs(int(micro)), 10**6)
    return sign + f"{whole}.{places:06d}".rstrip("0").rstrip(".")


@dataclass(frozen=True, slots=True)
class TickScale:
    """Native tick counts to picoseconds since the origin, rounding half up once per tag.

    The origin is the first time of the feed, rounded down to a slice, so that a feed counting
    from 1970 or from the last power-up is as good as one that starts at zero.

    tick: the tick in picoseconds. first_ticks: the count that fixes the origin.
    Raises ValueError when 2 * numerator * denominator of `tick` exceeds 2**62: the exact
    product would not fit.
    """

    tick: Fraction
    first_ticks: int
    slice_ps: int
    origin_ps: int = 0  # set by __post_init__: the origin after the feed's own zero

    def __post_init__(self) -> None:
        if 2 * self.tick.numerator * self.tick.denominator > 2**62:
            raise ValueError("a tick whose numerator times denominator, in ps, is below 2**61")
        first_ps = self.first_ticks * self.tick
        object.__setattr__(self, "origin_ps", int(first_ps // self.slice_ps) * self.slice_ps)

    @property
    def origin_ticks(self) -> int:
        """The first tick at or after the origin."""
        return -int(-self.origin_ps // self.tick)

    def moved(self, by_ps: int) -> TickScale:
        """The same scale with all times later by `by_ps`."""
        scale = TickScale(self.tick, self.first_ticks, self.slice_ps)
        object.__setattr__(scale, "origin_ps", self.origin_ps - by_ps)
        return scale

    def to_ps(self, ticks: NDArray[np.int64]) -> NDArray[np.int64]:
        """Times in ps since the origin, int64, same shape as `ticks` (int64).

        With n = q den + r, the exact product n num / den rounded half up is
        q num + (2 r num + den) // (2 den): no intermediate exceeds int64. Counts past the limit
        of 106 days become BEYOND_LIMIT_PS (or its negative).
        """
        num, den = self.tick.numerator, self.tick.denominator
        base_ticks = self.first_ticks // den * den
        shift_ps = base_ticks // den * num - self.origin_ps
        reach = int((TIME_LIMIT_PS - abs(shift_ps)) // self.tick)
        low, high = max(base_ticks - reach, -(2**63)), min(base_ticks + reach, 2**63 - 1)
        if ticks.size == 0:
            return np.empty(0, np.int64)
        inside = int(ticks.min()) >= low and int(ticks.max()) <= high
        times = (ticks if inside else np.clip(ticks, low, high)) - np.int64(base_ticks)
        if den == 1:
            times *= np.int64(num)
        else:
            rest = _split(times, den)  # now the quotient is in `times`
            rest *= np.int64(2 * num)
            rest += np.int64(den)
            _split(rest, 2 * den)
            times *= np.int64(num)
            times += rest
        times += np.int64(shift_ps)
        if not inside:
            times[ticks > high] = BEYOND_LIMIT_PS
            times[ticks < low] = -BEYOND_LIMIT_PS
        return times


def _split(values: NDArray[np.int64], divisor: int) -> NDArray[np.int64]:
    """The rests of a division rounding down; its quotients replace `values`."""
    if divisor & (divisor - 1) == 0:  # a power of two, ten times as fast
        rest = values & np.int64(divisor - 1)
        values >>= np.int64(divisor.bit_length() - 1)
        return rest
    quotient, rest = np.divmod(values, np.int64(divisor))
    values[:] = quotient
    return rest
