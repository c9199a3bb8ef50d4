"""g2(0) of pulsed light: the peak at zero lag against the side peaks."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tagstream.estimates import Estimate, Estimator, no_estimate
from tagstream.estimates import peak_checks as checks
from tagstream.estimates.intervals import ratio_interval
from tagstream.estimates.normalisation import expected_pairs
from tagstream.estimates.peaks import Comb, PulsedHistogram
from tagstream.settings.measures import CrossCorrelation
from tagstream.settings.measures import G2ZeroPulsed as G2ZeroPulsedSettings
from tagstream.tallies import Sums
from tagstream.units import format_time


class G2ZeroPulsed(Estimator):
    """Counts of the central peak over the mean of the side peaks, in equal windows.

    g2(0) = (C_0 / E_0) / (sum C_n / sum E_n), C the counts in a window and E the pairs that
    independent light would give in it, so that edges of live time and drifting rates are allowed
    for. Given C_0 + sum C_n the central count is binomial: its interval gives that of the ratio.
    No central counts give an upper limit.

    Which side peaks are a fair reference is the user's choice: near ones are high when the
    emitter blinks or detectors are dead for several pulses. The note tells when they are not
    flat (near against far half, p below 0.003) and when peaks overlap (valley above 1 %).
    """

    unit = "1"

    def __init__(
        self,
        settings: G2ZeroPulsedSettings,
        channels: Mapping[str, int],
        tallies: Mapping[str, Any],
    ) -> None:
        self._settings = settings
        self._tally: CrossCorrelation = tallies[settings.tally]
        self._clock = None if settings.clock is None else channels[settings.clock]
        self._width = settings.window_ps // self._tally.bin_ps
        self._found: tuple[Comb, list[int]] | None = None
        self._fixed_method = self._describe(settings.period_ps)

    def __call__(self, sums: Mapping[str, Sums]) -> Estimate:
        period_ps, clock_note = self._period(sums)
        if period_ps is None:
            return self._none("the clock channel has no two tags in one live stretch")
        histogram = self._histogram(sums, period_ps)
        sides = self._sides(histogram.comb)
        if not sides:
            reach = self._settings.peak_range[0] * period_ps + self._settings.window_ps / 2
            need = format_time(int(reach))
            return self._none(f"no side peak in range: max_lag of at least {need} is needed")
        counts, expected = histogram.areas([0, *sides], self._width)
        if counts[1:].sum() == 0:
            return self._none("no counts in the side peaks")
        notes = [
            clock_note,
            checks.flatness_note(histogram, sides, self._width),
            checks.overlap_note(histogram, sides),
        ]
        estimate = self._ratio(counts, expected, period_ps)
        return replace(estimate, note="; ".join(note for note in notes if note))

    def with_profile(self, sums: Mapping[str, Sums]) -> Estimate:
        estimate = self(sums)
        period_ps, _ = self._period(sums)
        if estimate.interval == "none" or period_ps is None:
            return estimate
        histogram = self._histogram(sums, period_ps)
        sides, level = self._sides(histogram.comb), self._settings.level
        profile = {
            **checks.peak_profile(histogram, sides, self._width, level),
            **checks.window_scan(histogram, sides, self._width, level),
            "period_ps": np.array(float(period_ps)),
        }
        return replace(estimate, profile=profile)

    def _ratio(
        self, counts: NDArray[np.int64], expected: NDArray[np.float64], period_ps: Fraction
    ) -> Estimate:
        settings = self._settings
        central, sides = int(counts[0]), int(counts[1:].sum())
        exposure = float(expected[1:].sum() / expected[0])
        bounds = ratio_interval(central, sides, exposure, settings.level, settings.interval)
        value = central / sides * exposure
        return Estimate(
            value,
            bounds.lower,
            bounds.upper,
            settings.level,
            self._method(period_ps),
            self.unit,
            central,
            "upper-limit" if bounds.upper_limit else "two-sided",
            raw_value=value,
            raw_lower=bounds.lower,
            raw_upper=bounds.upper,
        )

    def _period(self, sums: Mapping[str, Sums]) -> tuple[Fraction | None, str]:
        """The period, given or measured as the mean interval of the clock, and a note on it."""
        if self._clock is None:
            return self._settings.period_ps, ""
        singles = sums["channels"]
        intervals = int(singles["period_count"][self._clock])
        if intervals == 0:
            return None, ""
        missed = int(singles["missed_count"][self._clock])
        note = (
            f"{missed} of {intervals} clock intervals are too long: tags of the clock are missing"
        )
        period = Fraction(int(singles["period_sum_ps"][self._clock]), intervals)
        return period, note if missed else ""

    def _histogram(self, sums: Mapping[str, Sums], period_ps: Fraction) -> PulsedHistogram:
        tally = self._tally
        found = sums[tally.name]
        comb = Comb(tally.bin_ps, tally.bins_each_side, period_ps)
        return PulsedHistogram(found["counts"], expected_pairs(found, tally), comb)

    def _sides(self, comb: Comb) -> list[int]:
        """Positions of the side peaks of the settings that lie in the histogram."""
        if self._found is None or self._found[0] != comb:
            first, last = self._settings.peak_range
            inside = [p for p in comb.peaks(self._width) if first <= abs(p) // 2 <= last]
            self._found = comb, inside
        return self._found[1]

    def _method(self, period_ps: Fraction | None) -> str:
        return self._fixed_method if self._clock is None else self._describe(period_ps)

    def _describe(self, period_ps: Fraction | None) -> str:
        settings = self._settings
        first, last = settings.peak_range
        window = format_time(self._width * self._tally.bin_ps)
        text = f"central over mean of side peaks {first} to {last} on each side; window {window}"
        if settings.clock is not None:
            text += f"; period measured from {settings.clock}"
            text += "" if period_ps is None else f", {float(period_ps) / 1000:.6g} ns"
        elif period_ps is not None:
            text += f"; period {format_time(period_ps)}"
        return f"{text}; conditional binomial {settings.interval}"

    def _none(self, reason: str) -> Estimate:
        method = self._method(None)
        return no_estimate(reason, level=self._settings.level, method=method, unit=self.unit)
