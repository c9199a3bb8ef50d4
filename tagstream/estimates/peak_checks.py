"""Whether the peaks of a pulsed histogram can be believed: flat side peaks, no overlap, window."""

from __future__ import annotations

from math import nan
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tagstream.estimates.intervals import Kind, garwood, ratio_interval, ratio_p_value
from tagstream.estimates.peaks import PulsedHistogram

DOUBTFUL_P = 0.003  # as rare as three standard deviations: seldom false, seen at every look
HIGHEST_VALLEY = 0.01  # of the height of the peaks
MOST_UNLIKE = 10  # windows may lie unlike each other by one part in so many of their width
MOST_ADDED = 0.02  # to g2(0), by a background as high as the valleys
Pooled = tuple[int, float]  # counts and expected pairs of several windows
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


def placing_note(peaks: PulsedHistogram) -> str:
    """Says so when whole bins place the windows of side peaks unlike that at zero lag.

    Windows beside their centres hold less of a peak. With windows of four bins that was 1 % of
    g2(0), of two bins 5 %, of one bin 25 % (two-sided exponential peaks, coarse bins).
    """
    comb, width = peaks.comb, peaks.width
    zero, *others = comb.off_centre_ps([0, *peaks.sides], width)
    unlike = max(abs(other - zero) for other in others)
    if MOST_UNLIKE * unlike <= width * comb.bin_ps:
        return ""
    text = f"windows of side peaks lie up to {unlike:.3g} ps unlike that at zero lag"
    return f"{text}: right would be a shorter bin or a longer window"


def overlap_note(peaks: PulsedHistogram) -> str:
    """Says so when the valleys beside the side peaks are not empty.

    They are held against the height of the peaks, and against their mean over the window: a
    background as high as the valleys adds just that ratio to g2(0), overlap adds less.
    """
    valley, top = _valleys_and_tops(peaks)
    window = _pooled(*peaks.reference)
    if not (_exceeds(valley, top, HIGHEST_VALLEY) or _exceeds(valley, window, MOST_ADDED)):
        return ""
    depth, added = 100 * _ratio(valley, top), _ratio(valley, window)
    text = f"peaks overlap, or background: valleys at {depth:.2g} % of the peaks"
    return f"{text}, adding up to {added:.2g}"


def _ratio(part: Pooled, whole: Pooled) -> float:
    """Counts per expected pair over the same; nan where there are none to compare with."""
    if part[1] <= 0 or whole[0] == 0:
        return nan
    return part[0] / whole[0] * (whole[1] / part[1])


def _exceeds(part: Pooled, whole: Pooled, limit: float) -> bool:
    """Whether `_ratio` is above a limit beyond chance."""
    if not _ratio(part, whole) > limit:
        return False
    return ratio_interval(part[0], whole[0], whole[1] / part[1], 0.95).lower > limit


def _valleys_and_tops(peaks: PulsedHistogram) -> tuple[Pooled, Pooled]:
    """Midway between peaks, and at the centres of the side peaks.

    Both in windows of an eighth of the period: of each side peak its centre and the valley
    beyond it, which a peak at zero lag does not reach.
    """
    comb = peaks.comb
    width = max(1, int(comb.period_ps // (8 * comb.bin_ps)))
    beyond = [p + (1 if p > 0 else -1) for p in peaks.sides]
    valleys = peaks.areas(comb.fitting(beyond, width), width)
    tops = peaks.areas(peaks.sides, width)
    return _pooled(*valleys), _pooled(*tops)


def _pooled(counts: NDArray[np.int64], expected: NDArray[np.float64]) -> Pooled:
    return int(counts.sum()), float(expected.sum())


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
    return {
        "peak_number": np.array(positions, np.int64) // 2,
        "peak_counts": counts,
        "peak_area": counts / unit,
        "peak_area_lower": lower / unit,
        "peak_area_upper": upper / unit,
        "flatness_chi2": np.array(float(np.nansum((side_counts - mean) ** 2 / mean))),
        "flatness_ndf": np.array(np.isfinite(mean).sum() - 1, np.int64),
        "valley_depth": np.array(_ratio(*_valleys_and_tops(peaks))),
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
