"""The [[tally]] and [[estimate]] sections: one class for each kind."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from tagstream.settings.quantities import (
    Fraction01,
    Name,
    NotNegativeTimePs,
    PeriodPs,
    PositiveTimePs,
)
from tagstream.settings.section import Section

DEFAULT_LEVEL = 0.6827  # the central probability within one standard deviation of a normal law


class CrossCorrelation(Section):
    """Histogram of t_stop - t_start in bins centred on multiples of `bin`."""

    name: Name
    kind: Literal["cross-correlation"]
    start: str
    stop: str
    max_lag_ps: PositiveTimePs = Field(alias="max_lag")
    bin_ps: PositiveTimePs = Field(alias="bin")
    normalisation: Literal["slices", "global"] = "slices"
    split_by: str | None = None  # key of marks: a histogram of its own for each value
    split_limit: Annotated[int, Field(ge=1, le=1000, strict=True)] = 64  # values; then "other"

    @property
    def bins_each_side(self) -> int:
        """K: bins run from -K to K."""
        return self.max_lag_ps // self.bin_ps

    @model_validator(mode="after")
    def _check(self) -> CrossCorrelation:
        if self.max_lag_ps % self.bin_ps:
            low = self.max_lag_ps // self.bin_ps
            good = ", ".join(f"{n * self.bin_ps} ps" for n in (low, low + 1) if n > 0)
            raise ValueError(f"`max_lag` a multiple of `bin`: nearest are {good}")
        if self.bins_each_side > 5_000_000:
            raise ValueError("at most 5 million bins on each side: a longer `bin`")
        return self


class EstimateSection(Section):
    """What every estimate has."""

    name: Name
    level: Annotated[float, Field(gt=0, lt=1)] = DEFAULT_LEVEL
    interval: Literal["mid-p", "exact"] = "mid-p"


class CountRate(EstimateSection):
    """Detections per second of live time."""

    kind: Literal["count-rate"]
    channel: str
    dead_time_model: Literal["none", "non-paralyzable"] = "none"
    dead_time_ps: NotNegativeTimePs | None = Field(None, alias="dead_time")  # absent: the channel's


class G2Zero(EstimateSection):
    """g2 in a window around zero lag, for continuous light."""

    kind: Literal["g2-zero"]
    tally: str
    window_ps: PositiveTimePs | None = Field(None, alias="window")  # absent: one bin
    signal_fraction: Fraction01 | None = None


class G2ZeroPulsed(EstimateSection):
    """Area of the peak at zero lag over the mean area of the side peaks."""

    kind: Literal["g2-zero-pulsed"]
    tally: str
    period_ps: PeriodPs | None = Field(None, alias="period")
    clock: str | None = None
    window_ps: PositiveTimePs = Field(alias="window")
    side_peaks: Annotated[int, Field(ge=1, strict=True)] | tuple[int, int] = (
        8  # how many on each side, or [from, to]
    )

    @property
    def peak_range(self) -> tuple[int, int]:
        """First and last number of the side peaks used on each side."""
        return (1, self.side_peaks) if isinstance(self.side_peaks, int) else self.side_peaks

    @model_validator(mode="after")
    def _check(self) -> G2ZeroPulsed:
        if (self.period_ps is None) == (self.clock is None):
            raise ValueError("either `period` or `clock`")
        first, last = self.peak_range
        if not 1 <= first <= last:
            raise ValueError("`side_peaks` a number, or [from, to] with 1 <= from <= to")
        if self.period_ps is not None and self.window_ps > self.period_ps:
            raise ValueError("`window` no longer than the period")
        return self


TallySettings = CrossCorrelation
EstimateSettings = CountRate | G2Zero | G2ZeroPulsed
TALLY_KINDS: dict[str, type[Section]] = {"cross-correlation": CrossCorrelation}
ESTIMATE_KINDS: dict[str, type[Section]] = {
    "count-rate": CountRate,
    "g2-zero": G2Zero,
    "g2-zero-pulsed": G2ZeroPulsed,
}
