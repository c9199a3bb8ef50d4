"""g2 around zero lag under continuous light."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from fractions import Fraction
from typing import Any

from tagstream.estimates import Estimate, Estimator, no_estimate
from tagstream.estimates.intervals import Bounds, poisson_interval
from tagstream.estimates.normalisation import (
    NO_PAIRS,
    ONE_CHANNEL_NOTE,
    distinct_pairs,
    expected_pairs,
    expected_within,
    is_one_channel,
)
from tagstream.settings.measures import CrossCorrelation
from tagstream.settings.measures import G2Zero as G2ZeroSettings
from tagstream.tallies import Sums
from tagstream.units import format_time


class G2Zero(Estimator):
    """Pairs in a window around zero lag over the pairs that independent light would give.

    The window is the largest whole number m of bins that fits, so its width is m bins. Bins are
    centred on multiples of `bin`: an odd m is centred on zero; an even m takes bins -m/2 to
    m/2 - 1 and is centred half a bin before zero, which `method` then says.

    With a signal fraction rho = S / (S + B), g2 = (C - (1 - rho^2)) / rho^2 takes uncorrelated
    background out of the measured C (Brouri et al., Opt. Lett. 25, 1294 (2000)). rho is taken as
    exact: its own uncertainty is not in the interval. Nothing is clipped: a value below zero is
    shown, and a note says whether counting noise explains it.
    """

    unit = "1"

    def __init__(
        self,
        settings: G2ZeroSettings,
        channels: Mapping[str, int],
        tallies: Mapping[str, Any],
    ) -> None:
        self._settings = settings
        self._tally: CrossCorrelation = tallies[settings.tally]
        self._width = (settings.window_ps or self._tally.bin_ps) // self._tally.bin_ps
        self._first = self._tally.bins_each_side - self._width // 2
        self._method = _method(settings, self._tally, self._width)

    def __call__(self, sums: Mapping[str, Sums]) -> Estimate:
        tally, level = sums[self._tally.name], self._settings.level
        counts = int(tally["counts"][self._first : self._first + self._width].sum())
        pairs = expected_pairs(tally, self._tally)
        expected = expected_within(pairs, self._first, self._width)
        if expected <= 0:
            return no_estimate(NO_PAIRS, level=level, method=self._method, unit=self.unit)
        if is_one_channel(self._tally):
            counts, expected = distinct_pairs(counts, expected)
        raw = poisson_interval(counts, level, self._settings.interval).times(1 / expected)
        return self._corrected(counts, counts / expected, raw)

    def _corrected(self, counts: int, measured: float, raw: Bounds) -> Estimate:
        square = (self._settings.signal_fraction or 1.0) ** 2
        value, lower, upper = ((c - (1 - square)) / square for c in (measured, *raw[:2]))
        return Estimate(
            value,
            lower,
            upper,
            self._settings.level,
            self._method,
            self.unit,
            counts,
            "upper-limit" if raw.upper_limit else "two-sided",
            raw_value=measured,
            raw_lower=raw.lower,
            raw_upper=raw.upper,
            note="; ".join(self._notes(value, upper)),
        )

    def _notes(self, value: float, upper: float) -> Iterator[str]:
        if is_one_channel(self._tally):
            yield ONE_CHANNEL_NOTE
        if upper < 0:
            yield "below zero by more than counting noise: is signal_fraction too low?"
        elif value < 0:
            yield "below zero, within counting noise"


def _method(settings: G2ZeroSettings, tally: CrossCorrelation, width: int) -> str:
    text = f"window {format_time(width * tally.bin_ps)} around zero lag"
    if width % 2 == 0:
        text += f", its centre {format_time(Fraction(tally.bin_ps, 2))} before it"
    text += f"; Poisson {settings.interval}; normalised by {tally.normalisation}"
    if settings.signal_fraction is not None:
        text += f"; background removed, signal fraction {settings.signal_fraction:g}"
    return text
