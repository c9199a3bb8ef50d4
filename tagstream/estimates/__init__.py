"""Stage 4, estimates: integers to numbers with intervals.

An estimate is a pure function of the sums of a span. It knows no tags, kernels or files. One
that cannot be made says why instead of giving a number.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from importlib import import_module
from math import nan
from typing import Any, Literal

from numpy.typing import NDArray

from tagstream.tallies import Sums

Interval = Literal["two-sided", "upper-limit", "none"]


@dataclass(frozen=True, slots=True)
class Estimate:
    """A number with its interval, what it was made from and how.

    interval: "two-sided"; "upper-limit" when no counts were found (lower is the value, 0 before
        corrections, upper a one-sided limit at `level`); "none" when there is no number, and then
        `reason` says why.
    counts: the counts that the number rests on.
    raw_value, raw_lower, raw_upper: before the corrections that `method` names; equal to the
        value where there are none.
    note: what the reader should know before believing it ("" if nothing).
    profile: arrays that show what it was made from (peak areas, window scan), by name.
    """

    value: float
    lower: float
    upper: float
    level: float
    method: str
    unit: str
    counts: int = 0
    interval: Interval = "two-sided"
    reason: str = ""
    raw_value: float = nan
    raw_lower: float = nan
    raw_upper: float = nan
    note: str = ""
    profile: Mapping[str, NDArray[Any]] = field(default_factory=dict)


def no_estimate(reason: str, *, level: float, method: str, unit: str) -> Estimate:
    """The estimate that could not be made."""
    return Estimate(nan, nan, nan, level, method, unit, interval="none", reason=reason)


class Estimator(ABC):
    """Makes one estimate from the sums of one span: tally name -> sums.

    The tally of singles is always there under the name "channels": counts (n_channels),
    live_time_ps () and, of the channels used as clocks, period_sum_ps, period_count and
    missed_count (n_channels; intervals between neighbouring tags of one live stretch).
    unit: of the value; "1" for a plain number.
    """

    unit: str

    @abstractmethod
    def __call__(self, sums: Mapping[str, Sums]) -> Estimate: ...

    def with_profile(self, sums: Mapping[str, Sums]) -> Estimate:
        """The same, with the arrays that show what it was made from."""
        return self(sums)


_KINDS = {
    "count-rate": "tagstream.estimates.count_rate:CountRate",
    "g2-zero": "tagstream.estimates.g2_zero:G2Zero",
    "g2-zero-pulsed": "tagstream.estimates.g2_zero_pulsed:G2ZeroPulsed",
}


def build_estimator(
    settings: Any, channels: Mapping[str, int], tallies: Mapping[str, Any]
) -> Estimator:
    """The estimator for an [[estimate]] section.

    channels: name -> index in the arrays of the singles. tallies: name -> settings of the tally.
    """
    module, name = _KINDS[settings.kind].split(":")
    builder: Callable[..., Estimator] = getattr(import_module(module), name)
    return builder(settings, channels, tallies)


def warm_up() -> None:
    """Load the library of special functions, which takes as long as counting 10^7 tags."""
    import_module("scipy.special")
