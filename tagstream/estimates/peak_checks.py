"""Whether the peaks of a pulsed histogram can be believed: flat side peaks, no overlap, window."""

from __future__ import annotations

from math import nan
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tagstream.estimates.intervals import garwood, ratio_interval, ratio_p_value
from tagstream.estimates.peaks import PulsedHistogram

DOUBTFUL_P = 0.003  # as rare as three standard deviations: seldom false, seen at every look
HIGHEST_VALLEY = 0.01  # a valley above this part of the peak adds several per cent to g2(0)
SCAN_QUARTERS = range(1, 9)  # widths of the scan, in quarters of the window


def flatness_note(peaks: PulsedHistogram, sides: list[int], width: int) -> str:
    """Says so when near side peaks differ from far ones beyond chance."""
    distances = sorted({abs(p) for p in sides})
    if len(distances) < 2:
        return ""
    middle = distances[(len(distances) - 1) // 2]
    near, near_expected = peaks.areas([p for p in sides if abs(p) <= middle], width)
    far, far_expected = peaks.areas([p for p in sides if abs(p) > middle], width)
    exposure = float(far_expected.sum() / near_expected.sum())
    p = ratio_p_value(int(near.sum()), int(far.sum()), exposure)
    if p >= DOUBTFUL_P or far.sum() == 0:
        return ""
    return f"side peaks not flat: near/far {near.sum() / far.sum() * exposure:.3g} (p {p:.1g})"


def overlap_note(peaks: PulsedHistogram, sides: list[int]) -> str:
    """Says so when the valleys between side peaks are not empty beside the peaks."""
    valley, bounds = valley_depth(peaks, sides, level=0.95)
    if not bounds[0] > HIGHEST_VALLEY:
        return ""
    return f"peaks overlap, or background: valleys at {100 * valley:.2g} % of the peaks"


def valley_depth(
    peaks: PulsedHistogram, sides: list[int], level: float
) -> tuple[float, tuple[float, float]]:
    """Mean height midway between side peaks over that at their centres, and its bounds.

    Both in windows of an eighth of the period. nan where no valley fits in the histogram.
    """
    comb = peaks.comb
    width = max(1, int(comb.period_ps / 8 / comb.bin_ps))
    valleys = [p + 1 for p in sides if p + 2 in sides and comb.fits(p + 1, width)]
    if not valleys:
        return nan, (nan, nan)
    low, low_expected = peaks.areas(valleys, width)
    high, high_expected = peaks.areas(sides, width)
    if high.sum() == 0:
        return nan, (nan, nan)
    exposure = float(high_expected.sum() / low_expected.sum())
    bounds = ratio_interval(int(low.sum()), int(high.sum()), exposure, level)
    return float(low.sum() / high.sum() * exposure), (bounds.lower, bounds.upper)


def peak_profile(
    peaks: PulsedHistogram, sides: list[int], width: int, level: float
) -> dict[str, NDArray[Any]]:
    """Area of every peak in the histogram relative to the mean of the side peaks used.

    peak_number (int64), peak_counts (int64), peak_area, peak_area_lower, peak_area_upper
    (float64, exact Poisson bounds): one entry a peak. flatness_chi2 and flatness_ndf: of the
    side peaks used about their mean. valley_depth: see `valley_depth`.
    """
    positions = peaks.comb.peaks(width)
    counts, expected = peaks.areas(positions, width)
    side_counts, side_expected = peaks.areas(sides, width)
    unit = expected * (side_counts.sum() / side_expected.sum())
    lower, upper = garwood(counts, level)
    mean = side_expected * (side_counts.sum() / side_expected.sum())
    return {
        "peak_number": np.array(positions, np.int64) // 2,
        "peak_counts": counts,
        "peak_area": counts / unit,
        "peak_area_lower": lower / unit,
        "peak_area_upper": upper / unit,
        "flatness_chi2": np.array(float(((side_counts - mean) ** 2 / mean).sum())),
        "flatness_ndf": np.array(len(sides) - 1, np.int64),
        "valley_depth": np.array(valley_depth(peaks, sides, level)[0]),
    }


def window_scan(
    peaks: PulsedHistogram, sides: list[int], width: int, level: float
) -> dict[str, NDArray[Any]]:
    """g2(0) against the width of the window, in quarters of it up to twice it, or the period.

    window_width_ps, window_value, window_lower, window_upper: float64, one entry a width. A
    value that moves with the width tells of overlap, or of light shaped unlike the emission.
    """
    comb = peaks.comb
    widest = max(width, int(comb.period_ps / comb.bin_ps))
    widths = sorted({w for q in SCAN_QUARTERS if 1 <= (w := q * width // 4) <= widest})
    rows = []
    for bins in widths:
        inside = [p for p in sides if comb.fits(p, bins)]
        counts, expected = peaks.areas([0, *inside], bins)
        central, reference = int(counts[0]), int(counts[1:].sum())
        if reference == 0:
            continue
        exposure = float(expected[1:].sum() / expected[0])
        bounds = ratio_interval(central, reference, exposure, level)
        value = central / reference * exposure
        rows.append((float(bins * comb.bin_ps), value, bounds.lower, bounds.upper))
    names = ("window_width_ps", "window_value", "window_lower", "window_upper")
    columns = np.array(rows, np.float64).reshape(-1, len(names)).T
    return dict(zip(names, columns, strict=True))
