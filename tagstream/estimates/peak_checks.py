"""Whether the peaks of a pulsed histogram can be believed: flat side peaks, no overlap, window."""

from __future__ import annotations

from math import nan
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tagstream.estimates.intervals import Kind, garwood, ratio_interval, ratio_p_value
from tagstream.estimates.peaks import PulsedHistogram

DOUBTFUL_P = 0.003  # as rare as three standard deviations: seldom false, seen at every look
HIGHEST_VALLEY = 0.01  # a valley above this part of the peak adds several per cent to g2(0)
SCAN_QUARTERS = range(1, 9)  # widths of the scan, in quarters of the window


def flatness_note(peaks: PulsedHistogram) -> str:
    """Says so when near side peaks differ from far ones beyond chance."""
    number = np.abs(np.array(peaks.sides)) // 2
    near = 2 * number <= number.min() + number.max()
    counts, expected = peaks.reference
    near_counts, far_counts = int(counts[near].sum()), int(counts[~near].sum())
    near_expected, far_expected = float(expected[near].sum()), float(expected[~near].sum())
    if near_expected <= 0 or far_expected <= 0:  # also where all are near: one peak a side
        return ""
    exposure = far_expected / near_expected
    p = ratio_p_value(near_counts, far_counts, exposure)
    if p >= DOUBTFUL_P:
        return ""
    ratio = f"{near_counts / far_counts * exposure:.3g}" if far_counts else "infinite"
    return f"side peaks not flat: near/far {ratio} (p {p:.1g})"


def overlap_note(peaks: PulsedHistogram) -> str:
    """Says so when the valleys beside the side peaks are not empty."""
    low, high, exposure = _valleys(peaks)
    if high == 0 or low * exposure <= HIGHEST_VALLEY * high:
        return ""
    if ratio_interval(low, high, exposure, 0.95).lower <= HIGHEST_VALLEY:
        return ""
    depth = 100 * low / high * exposure
    return f"peaks overlap, or background: valleys at {depth:.2g} % of the peaks"


def _valleys(peaks: PulsedHistogram) -> tuple[int, int, float]:
    """Counts midway between peaks, at the centres of side peaks, and their exposure ratio.

    Both in windows of an eighth of the period: of each side peak its centre and the valley
    beyond it, which a peak at zero lag does not reach. (0, 0, nan) where no valley fits.
    """
    comb = peaks.comb
    width = max(1, int(comb.period_ps / 8 / comb.bin_ps))
    beyond = (p + (1 if p > 0 else -1) for p in peaks.sides)
    low, low_expected = peaks.areas([p for p in beyond if comb.fits(p, width)], width)
    high, high_expected = peaks.areas(peaks.sides, width)
    if low_expected.sum() <= 0:
        return 0, 0, nan
    return int(low.sum()), int(high.sum()), float(high_expected.sum() / low_expected.sum())


def peak_profile(peaks: PulsedHistogram, level: float) -> dict[str, NDArray[Any]]:
    """Area of every peak in the histogram relative to the mean of the side peaks used.

    peak_number (int64), peak_counts (int64), peak_area, peak_area_lower, peak_area_upper
    (float64, exact Poisson bounds; nan where no pairs are expected): one entry a peak.
    flatness_chi2 and flatness_ndf: of the side peaks used about their mean. valley_depth: height
    midway between side peaks over that at their centres, nan if no valley fits.
    """
    positions = peaks.comb.peaks(peaks.width)
    counts, expected = peaks.areas(positions, peaks.width)
    side_counts, side_expected = peaks.reference
    per_pair = side_counts.sum() / side_expected.sum()
    unit = np.where(expected > 0, expected, nan) * per_pair
    mean = np.where(side_expected > 0, side_expected, nan) * per_pair
    lower, upper = garwood(counts, level)
    low, high, exposure = _valleys(peaks)
    return {
        "peak_number": np.array(positions, np.int64) // 2,
        "peak_counts": counts,
        "peak_area": counts / unit,
        "peak_area_lower": lower / unit,
        "peak_area_upper": upper / unit,
        "flatness_chi2": np.array(float(np.nansum((side_counts - mean) ** 2 / mean))),
        "flatness_ndf": np.array(np.isfinite(mean).sum() - 1, np.int64),
        "valley_depth": np.array(low / high * exposure if high else nan),
    }


def window_scan(peaks: PulsedHistogram, level: float, kind: Kind) -> dict[str, NDArray[Any]]:
    """g2(0) against the width of the window, in quarters of it up to twice it, or the period.

    window_width_ps, window_value, window_lower, window_upper: float64, one entry a width. A
    value that moves with the width tells of overlap, or of light shaped unlike the emission.
    """
    comb, width = peaks.comb, peaks.width
    widest = max(width, int(comb.period_ps / comb.bin_ps))
    widths = sorted({w for q in SCAN_QUARTERS if 1 <= (w := q * width // 4) <= widest})
    rows = []
    for bins in widths:
        inside = [p for p in peaks.sides if comb.fits(p, bins) and comb.fits(-p, bins)]
        counts, expected = peaks.areas([0, *inside], bins)
        central, reference = int(counts[0]), int(counts[1:].sum())
        if reference == 0 or expected[0] <= 0:
            continue
        exposure = float(expected[1:].sum() / expected[0])
        bounds = ratio_interval(central, reference, exposure, level, kind)
        value = central / reference * exposure
        rows.append((float(bins * comb.bin_ps), value, bounds.lower, bounds.upper))
    names = ("window_width_ps", "window_value", "window_lower", "window_upper")
    columns = np.array(rows, np.float64).reshape(-1, len(names)).T
    return dict(zip(names, columns, strict=True))
