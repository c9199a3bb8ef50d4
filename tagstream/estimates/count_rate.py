"""Detections per second, as counted and corrected for dead time."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import Any

from tagstream.errors import SettingsError
from tagstream.estimates import Estimate, Estimator, no_estimate
from tagstream.estimates.intervals import Bounds, poisson_interval
from tagstream.settings.measures import CountRate as CountRateSettings
from tagstream.tallies import Sums
from tagstream.units import PS_PER_S, format_time

FEW_TAGS = 10


class CountRate(Estimator):
    """Rate m = N / T with a Poisson interval.

    With dead_time_model = "non-paralyzable" the true rate n = m / (1 - m tau) (Knoll, Radiation
    Detection and Measurement, ch. 4). The counts of such a detector scatter less than Poisson:
    variance / mean = (1 - m tau)^2 (Muller, Nucl. Instrum. Methods 112, 47 (1973)), so the
    interval is narrowed by 1 - m tau before it is carried through the formula.

    settings.dead_time_ps holds the dead time to use, that of the channel written in by the
    caller where the estimate has none of its own. Raises SettingsError where there is none.
    """

    unit = "Hz"

    def __init__(
        self,
        settings: CountRateSettings,
        channels: Mapping[str, int],
        tallies: Mapping[str, Any],
    ) -> None:
        self._level, self._kind = settings.level, settings.interval
        self._channel = channels[settings.channel]
        self._dead_time_ps = _dead_time_ps(settings)
        self._method = f"counts over live time; Poisson {settings.interval}"
        if self._dead_time_ps:
            dead_time = format_time(self._dead_time_ps)
            self._method += f"; non-paralyzable dead time {dead_time}, its narrowing included"

    def __call__(self, sums: Mapping[str, Sums]) -> Estimate:
        singles = sums["channels"]
        counts, live_time_ps = int(singles["counts"][self._channel]), int(singles["live_time_ps"])
        if live_time_ps == 0:
            return self._none("no live time")
        found = poisson_interval(counts, self._level, self._kind)
        raw = Bounds(found.lower, found.upper, found.upper_limit).times(PS_PER_S / live_time_ps)
        rate = counts * PS_PER_S / live_time_ps
        live_fraction = 1 - rate * self._dead_time_ps / PS_PER_S
        if live_fraction <= 0:
            dead_time = format_time(self._dead_time_ps)
            text = f"{rate:.6g} counts a second are more than this dead time allows ({dead_time})"
            return self._none(text)
        estimate = self._estimate(rate, self._narrowed(rate, raw, live_fraction), raw, counts)
        few = f"only {counts} count{'' if counts == 1 else 's'}" if counts < FEW_TAGS else ""
        return replace(estimate, note=few)

    def _estimate(self, rate: float, narrow: Bounds, raw: Bounds, counts: int) -> Estimate:
        value, lower, upper = (self._true_rate(m) for m in (rate, narrow.lower, narrow.upper))
        return Estimate(
            value,
            lower,
            upper,
            self._level,
            self._method,
            self.unit,
            counts,
            "upper-limit" if raw.upper_limit else "two-sided",
            raw_value=rate,
            raw_lower=raw.lower,
            raw_upper=raw.upper,
        )

    def _narrowed(self, rate: float, raw: Bounds, live_fraction: float) -> Bounds:
        if raw.upper_limit:
            return raw
        lower = rate - (rate - raw.lower) * live_fraction
        return Bounds(lower, rate + (raw.upper - rate) * live_fraction)

    def _true_rate(self, rate: float) -> float:
        """n = m / (1 - m tau); a bound that the dead time forbids has no finite true rate."""
        live_fraction = 1 - rate * self._dead_time_ps / PS_PER_S
        return rate / live_fraction if live_fraction > 0 else float("inf")

    def _none(self, reason: str) -> Estimate:
        return no_estimate(reason, level=self._level, method=self._method, unit=self.unit)


def _dead_time_ps(settings: CountRateSettings) -> int:
    if settings.dead_time_model == "none":
        return 0
    if not settings.dead_time_ps:
        text = f"give dead_time here or in [channels.{settings.channel}]"
        raise SettingsError([f"[[estimate]] {settings.name} dead_time: missing; {text}"])
    return settings.dead_time_ps
