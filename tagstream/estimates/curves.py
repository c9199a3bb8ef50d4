"""Histograms to g2 curves with intervals, bin by bin."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tagstream.estimates.intervals import garwood
from tagstream.estimates.normalisation import expected_pairs, is_one_channel
from tagstream.settings.measures import DEFAULT_LEVEL, CrossCorrelation
from tagstream.tallies import Sums


def g2_curves(
    sums: Sums, tally: CrossCorrelation, level: float = DEFAULT_LEVEL
) -> dict[str, NDArray[np.float64]]:
    """g2, g2_lower, g2_upper, g2_errors and expected_pairs of a cross-correlation, by bin.

    g2 = counts / expected pairs; the bounds are exact Poisson (Garwood) at `level`, g2_errors
    half their distance. nan where no pairs are expected. Of one channel with itself, the bin at
    zero lag holds each pair in both orders: its bounds are those of half its counts, doubled.
    """
    counts = sums["counts"]
    expected = np.broadcast_to(expected_pairs(sums, tally), counts.shape).astype(np.float64)
    lower, upper = garwood(counts, level)
    if is_one_channel(tally):
        zero = slice(tally.bins_each_side, tally.bins_each_side + 1)
        once_lower, once_upper = garwood((counts[zero] + 1) // 2, level)
        lower[zero], upper[zero] = 2 * once_lower, 2 * once_upper
    known = np.where(expected > 0, expected, np.nan)
    return {
        "g2": counts / known,
        "g2_lower": lower / known,
        "g2_upper": upper / known,
        "g2_errors": (upper - lower) / known / 2,
        "expected_pairs": expected,
    }
