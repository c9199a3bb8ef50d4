"""g2(0) of pulsed light: the peak at zero lag against the side peaks."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from fractions import Fraction
from typing import Any

import numpy as np

from tagstream.estimates import Estimate, Estimator, no_estimate
from tagstream.estimates import peak_checks as checks
from tagstream.estimates.intervals import ratio_interval
from tagstream.estimates.normalisation import (
    NO_PAIRS,
    ONE_CHANNEL_NOTE,
    expected_pairs,
    is_one_channel,
)
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

    A window is the largest whole number of bins that fits; all have equally many (peaks.Comb
    says which). Side peaks that do not lie in the histogram on both sides are not used.

    Which side peaks are a fair reference is the user's choice: near ones are high when the
    emitter blinks or detectors are dead for several pulses. The note tells when they are not
    flat (near against far half, p below 0.003), when peaks overlap (valley above 1 %, or enough
    to add 0.02) and when whole bins place the windows unlike each other (by a tenth of them).
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
        self._found: tuple[Comb, list[int], str] | None = None

    def __call__(self, sums: Mapping[str, Sums]) -> Estimate:
        return self._estimate(sums, profile=False)

    def with_profile(self, sums: Mapping[str, Sums]) -> Estimate:
        return self._estimate(sums, profile=True)

    def _estimate(self, sums: Mapping[str, Sums], profile: bool) -> Estimate:
        settings = self._settings
        period_ps, clock_note = self._period(sums)
        if period_ps is None:
            return self._none(f"{settings.clock} has no two tags in one live stretch")
        if settings.window_ps > period_ps:
            text = f"{float(period_ps) / 1000:.6g} ns"
            return self._none(f"window longer than the period of {settings.clock}, {text}")
        comb, sides, method = self._layout(period_ps)
        if not sides:
            need = format_time(comb.needed_lag_ps(2 * settings.peak_range[0], self._width))
            return self._none(f"no side peak in range: max_lag of at least {need} is needed")
        found = sums[self._tally.name]
        expected = expected_pairs(found, self._tally)
        one_channel = is_one_channel(self._tally)
        peaks = PulsedHistogram(
            found["counts"], expected, comb, self._width, sides, one_channel=one_channel
        )
        if not (peaks.central[1] > 0 and peaks.reference[1].sum() > 0):
            return self._none(NO_PAIRS)
        if peaks.reference[0].sum() == 0:
            return self._none("no counts in the side peaks")
        notes = (
            ONE_CHANNEL_NOTE if one_channel else "",
            clock_note,
            checks.placing_note(peaks),
            checks.flatness_note(peaks),
            checks.overlap_note(peaks),
        )
        estimate = self._ratio(peaks, method, "; ".join(note for note in notes if note))
        return replace(estimate, profile=self._profile(peaks)) if profile else estimate

    def _ratio(self, peaks: PulsedHistogram, method: str, note: str) -> Estimate:
        settings = self._settings
        central, central_expected = peaks.central
        sides = int(peaks.reference[0].sum())
        exposure = float(peaks.reference[1].sum()) / central_expected
        bounds = ratio_interval(central, sides, exposure, settings.level, settings.interval)
        value = central / sides * exposure
        return Estimate(
            value,
            bounds.lower,
            bounds.upper,
            settings.level,
            method,
            self.unit,
            central,
            "upper-limit" if bounds.upper_limit else "two-sided",
            raw_value=value,
            raw_lower=bounds.lower,
            raw_upper=bounds.upper,
            note=note,
        )

    def _profile(self, peaks: PulsedHistogram) -> dict[str, Any]:
        level, kind = self._settings.level, self._settings.interval
        return {
            **checks.peak_profile(peaks, level),
            **checks.window_scan(peaks, level, kind),
            "period_ps": np.array(float(peaks.comb.period_ps)),
        }

    def _period(self, sums: Mapping[str, Sums]) -> tuple[Fraction | None, str]:
        """The period, given or measured as the mean interval of the clock, and a note on it."""
        if self._clock is None:
            return self._settings.period_ps, ""
        singles = sums["channels"]
        intervals = int(singles["period_count"][self._clock])
        if intervals == 0:
            return None, ""
        missed = int(singles["missed_count"][self._clock])
        period = Fraction(int(singles["period_sum_ps"][self._clock]), intervals)
        if not missed:
            return period, ""
        note = f"{missed} of {intervals} clock intervals are too long: tags are missing"
        return period, f"{note}, the period may be off by some {100 * missed / intervals:.2g} %"

    def _layout(self, period_ps: Fraction) -> tuple[Comb, list[int], str]:
        """Where the peaks are, which sides are used, and the method; kept while nothing changes."""
        comb = Comb(self._tally.bin_ps, self._tally.bins_each_side, period_ps)
        if self._found is None or self._found[0] != comb:
            sides = comb.sides(self._width, *self._settings.peak_range)
            if is_one_channel(self._tally):
                sides = [p for p in sides if p > 0]
            self._found = comb, sides, self._method(period_ps, sides)
        return self._found

    def _method(self, period_ps: Fraction | None, sides: list[int]) -> str:
        settings, tally = self._settings, self._tally
        numbers = [p // 2 for p in sides if p > 0] or settings.peak_range
        text = f"central over mean of side peaks {min(numbers)} to {max(numbers)} on each side"
        text += f"; window {format_time(self._width * tally.bin_ps)}"
        if settings.clock is not None:
            text += f"; period measured from {settings.clock}"
            text += "" if period_ps is None else f", {float(period_ps) / 1000:.6g} ns"
        elif period_ps is not None:
            text += f"; period {format_time(period_ps)}"
        text += f"; conditional binomial {settings.interval}"
        return f"{text}; normalised by {tally.normalisation}"

    def _none(self, reason: str) -> Estimate:
        method = self._method(self._settings.period_ps, [])
        return no_estimate(reason, level=self._settings.level, method=method, unit=self.unit)
