"""Sums of a span made by hand, and the estimators for them."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from tagstream.estimates import Estimator, build_estimator
from tagstream.settings.measures import ESTIMATE_KINDS, CrossCorrelation

S = 10**12
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
