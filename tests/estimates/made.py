"""Sums of a span made by hand, and the estimators for them."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from tagstream.estimates import Estimate, Estimator, build_estimator
from tagstream.settings.measures import ESTIMATE_KINDS, CrossCorrelation

S = 10**12
PERIOD = 12_500
CHANNELS = {"a": 0, "b": 1, "clock": 2}


def tally(bin_: str = "1 ns", max_lag: str = "100 ns", **more: Any) -> CrossCorrelation:
    """A tally called hbt."""
    table = {"name": "hbt", "kind": "cross-correlation", "start": "a", "stop": "b"}
    return CrossCorrelation.model_validate(table | {"bin": bin_, "max_lag": max_lag} | more)


def estimator(chosen: CrossCorrelation, **table: Any) -> Estimator:
    """An estimate called e."""
    kind = table["kind"]
    more = {} if kind == "count-rate" else {"tally": "hbt"}
    settings = ESTIMATE_KINDS[kind].model_validate({"name": "e"} | more | table)
    return build_estimator(settings, CHANNELS, {"hbt": chosen})


def sums(
    counts: ArrayLike,
    expected: ArrayLike = 1.0,
    singles: Sequence[int] = (1_000, 1_000, 0),
    live_time_ps: int = S,
    pair_time_ps: ArrayLike = S,
    periods: tuple[int, int, int] = (0, 0, 0),
) -> dict[str, dict[str, np.ndarray]]:
    """Sums of one span. periods: sum in ps, number, missed, of the clock."""
    clock = np.zeros((3, 3), np.int64)
    clock[2] = periods
    return {
        "channels": {
            "counts": np.array(singles, np.int64),
            "live_time_ps": np.array(live_time_ps),
            "period_sum_ps": clock[:, 0],
            "period_count": clock[:, 1],
            "missed_count": clock[:, 2],
        },
        "hbt": {
            "counts": np.array(counts, np.int64),
            "start_counts": np.array(singles[0]),
            "stop_counts": np.array(singles[1]),
            "live_time_ps": np.array(live_time_ps),
            "pair_time_ps": np.array(pair_time_ps),
            "expected_pairs": np.array(expected, np.float64),
        },
    }


def counts(**at: int) -> np.ndarray:
    """201 bins of 1 ns; `zero`, `plus_1`, `minus_1` and so on set single ones."""
    made = np.zeros(201, np.int64)
    for name, value in at.items():
        sign, _, number = name.partition("_")
        made[100 + {"zero": 0, "plus": 1, "minus": -1}[sign] * int(number or 0)] = value
    return made


def comb_counts(
    areas: dict[int, int], bin_ps: int = 500, bins: int = 250, period_ps: int = PERIOD
) -> NDArray[np.int64]:
    """Peaks one bin wide, peak n of areas[n] counts."""
    made = np.zeros(2 * bins + 1, np.int64)
    for number, area in areas.items():
        made[bins + round(number * period_ps / bin_ps)] += area
    return made


def exponential_comb(
    lifetime_ps: float,
    central: float,
    total: float,
    *,
    bin_ps: int = 100,
    bins: int = 1_000,
    period_ps: int = PERIOD,
) -> NDArray[np.int64]:
    """Expected counts of two-sided exponential peaks (a decay against a decay), rounded."""
    edges = (np.arange(-bins, bins + 2) - 0.5) * bin_ps
    made = np.zeros(2 * bins + 1)
    for number in range(-60, 61):
        x = edges - number * period_ps
        below = np.where(
            x < 0, np.exp(-np.abs(x) / lifetime_ps) / 2, 1 - np.exp(-np.abs(x) / lifetime_ps) / 2
        )
        made += np.diff(below) * (central if number == 0 else 1.0)
    return np.rint(made * total).astype(np.int64)


def pulsed(counts: NDArray[np.int64], expected: object = 1.0, **more: object) -> Estimate:
    table = {"period": "12.5 ns", "window": "3 ns", "side_peaks": 4} | more
    table = {key: value for key, value in table.items() if value is not None}
    chosen = estimator(tally("500 ps", "125 ns"), kind="g2-zero-pulsed", **table)
    return chosen.with_profile(sums(counts, expected, periods=(5 * PERIOD, 5, 0)))  # type: ignore[arg-type]
