"""Types of the values in a scenario: those of the settings, within what can be simulated."""

from __future__ import annotations

from fractions import Fraction
from typing import Annotated, Any

from pydantic import AfterValidator, BeforeValidator, Field

from tagstream import units
from tagstream.settings.quantities import NotNegativeTimePs, PositiveTimePs, TickPs

_HIGHEST_HZ = 10**12  # one per picosecond: beyond, a tag has no time of its own

_LONGEST_TICK_PS = 10**9  # also of the time in which ticks and picoseconds meet


def _rate(value: Any) -> float:
    if not isinstance(value, str):
        raise ValueError('a text with a unit, such as "250 kHz"')
    hertz = units.parse_frequency(value)
    if not 0 <= hertz <= _HIGHEST_HZ:
        raise ValueError("a rate from 0 Hz to 1000 GHz")
    return float(hertz)


def _short(ps: int) -> int:
    if ps > units.PS_PER_S:
        raise ValueError("a time of at most 1 s")
    return ps


def _tick(tick: Fraction) -> Fraction:
    if not 1 <= tick <= _LONGEST_TICK_PS or tick.numerator > _LONGEST_TICK_PS:
        raise ValueError("a tick from 1 ps to 1 ms, written with few digits")
    return tick


RateHz = Annotated[float, BeforeValidator(_rate)]
Share = Annotated[float, Field(ge=0, le=1, strict=True)]
ShortTimePs = Annotated[NotNegativeTimePs, AfterValidator(_short)]
TimeConstantPs = Annotated[PositiveTimePs, AfterValidator(_short)]
CoarseTickPs = Annotated[TickPs, AfterValidator(_tick)]
