"""Types of the values in a settings file: text with a unit in the file, exact numbers inside."""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from typing import Annotated, Any

from pydantic import BeforeValidator, Field, PlainSerializer, StringConstraints

from tagstream import units

NAME_PATTERN = r"[a-z][a-z0-9_]{0,30}"


def _text(value: Any, example: str) -> str:
    if not isinstance(value, str):
        raise ValueError(f'a text with a unit, such as "{example}"')
    return value


def _whole_ps(value: Any) -> int:
    if isinstance(value, int) and not isinstance(value, bool) and value == 0:
        return 0
    ps = units.parse_time(_text(value, "12.5 ns"))
    if ps.denominator != 1:
        raise ValueError("a whole number of picoseconds")
    if abs(ps) > units.TIME_LIMIT_PS:
        raise ValueError("a time below 106 days, the limit of 64-bit picoseconds")
    return int(ps)


def _time(least: int | None = None, most: int | None = None) -> Callable[[Any], int]:
    """A converter of text to whole picoseconds from `least` to `most`."""

    def convert(value: Any) -> int:
        ps = _whole_ps(value)
        if least is not None and ps < least:
            raise ValueError(f"a time of at least {units.format_time(least)}")
        if most is not None and ps > most:
            raise ValueError(f"a time of at most {units.format_time(most)}")
        return ps

    return convert


def _tick(value: Any) -> Fraction:
    tick = units.parse_time(_text(value, "1 ps"))
    if tick <= 0:
        raise ValueError('a tick longer than zero, such as "1 ps"')
    return check_tick(tick)


def check_tick(tick_ps: Fraction) -> Fraction:
    """Raise ValueError unless counts of a tick become picoseconds exactly within 64 bits."""
    if 2 * tick_ps.numerator * tick_ps.denominator > 2**62:
        raise ValueError("a tick whose numerator times denominator, in ps, is below 2**61")
    return tick_ps


def _period(value: Any) -> Fraction:
    text = _text(value, "12.5 ns")
    if text.rstrip().endswith("Hz"):
        hertz = units.parse_frequency(text)
        if hertz <= 0:
            raise ValueError('a rate above zero, such as "80 MHz"')
        return Fraction(units.PS_PER_S) / hertz
    period = units.parse_time(text)
    if period <= 0:
        raise ValueError('a period longer than zero, such as "12.5 ns" or "80 MHz"')
    return period


def _count_of_bytes(value: Any) -> int:
    count = units.parse_bytes(_text(value, "300 MB"))
    if count <= 0:
        raise ValueError('a size above zero, such as "300 MB"')
    return count


_as_time = PlainSerializer(units.format_time)
HOUR_PS = 3600 * units.PS_PER_S

TimePs = Annotated[int, BeforeValidator(_time()), _as_time]
PositiveTimePs = Annotated[int, BeforeValidator(_time(least=1)), _as_time]
NotNegativeTimePs = Annotated[int, BeforeValidator(_time(least=0)), _as_time]
DelayPs = Annotated[int, BeforeValidator(_time(least=-HOUR_PS, most=HOUR_PS)), _as_time]
DisorderPs = Annotated[int, BeforeValidator(_time(least=0, most=HOUR_PS)), _as_time]
JumpPs = Annotated[int, BeforeValidator(_time(least=1, most=12 * HOUR_PS)), _as_time]
TickPs = Annotated[Fraction, BeforeValidator(_tick), _as_time]
PeriodPs = Annotated[Fraction, BeforeValidator(_period), _as_time]
Bytes = Annotated[int, BeforeValidator(_count_of_bytes), PlainSerializer(units.format_bytes)]
Name = Annotated[str, StringConstraints(pattern=f"^{NAME_PATTERN}$")]
InputNumber = Annotated[int, Field(ge=0, le=65535, strict=True)]
Fraction01 = Annotated[float, Field(gt=0, le=1)]
