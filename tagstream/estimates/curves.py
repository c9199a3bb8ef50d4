"""Histograms to g2 curves with intervals, bin by bin."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from tagstream.estimates.intervals import garwood
from tagstream.estimates.normalisation import expected_pairs
from tagstream.settings.measures import DEFAULT_LEVEL, CrossCorrelation
from tagstream.tallies import Sums


def g2_curves(
    sums: Sums, tally: CrossCorrelation, level: float = DEFAULT_LEVEL
) -> dict[str, NDArray[np.float64]]:
    """g2, g2_lower, g2_upper, g2_errors and expected_pairs of a cross-correlation, by bin.

    g2 = counts / expected pairs; the bounds are exact Poisson (Garwood) at `level`, g2_errors
    half their distance. nan where no pairs are expected.
    """
    counts = sums["counts"]
    expected = np.broadcast_to(expected_pairs(sums, tally), counts.shape).astype(np.float64)
    lower, upper = garwood(counts, level)
    known = np.where(expected > 0, expected, np.nan)
    return {
        "g2": counts / known,
        "g2_lower": lower / known,
        "g2_upper": upper / known,
        "g2_errors": (upper - lower) / known / 2,
        "expected_pairs": expected,
    }
