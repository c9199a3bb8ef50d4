"""Random draws that several kinds of light share."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from math import sqrt
from typing import Any

import numpy as np
from numpy.typing import NDArray

from tagstream.simulation.light import Arm, Photons
from tagstream.units import PS_PER_S


def spread(count: int, arms: Sequence[Arm], rng: np.random.Generator) -> NDArray[np.uint8]:
    """The arm of each of `count` detected photons: each for itself, in proportion to the shares."""
    if count == 0:
        return np.empty(0, np.uint8)
    total = total_share(arms)
    bounds = np.cumsum([arm.share / total for arm in arms[:-1]])
    return np.searchsorted(bounds, rng.random(count), side="right").astype(np.uint8)


def total_share(arms: Sequence[Arm]) -> float:
    """The probability that a photon at the splitter is detected by any arm."""
    return sum(arm.share for arm in arms)


def no_photons() -> Photons:
    """Darkness."""
    return Photons(np.empty(0, np.float64), np.empty(0, np.uint8))


def poisson_photons(
    rate_hz: float, length_ps: int, arms: Sequence[Arm], rng: np.random.Generator
) -> Photons:
    """Detected photons of coherent light whose rate at the splitter is `rate_hz`."""
    expected = rate_hz * total_share(arms) * length_ps / PS_PER_S
    if expected == 0:
        return no_photons()
    count = int(rng.poisson(expected))
    return Photons(rng.random(count) * length_ps, spread(count, arms, rng))


def renewals(
    at: float, end: float, intervals: Callable[[int], NDArray[Any]], mean: float
) -> tuple[NDArray[Any], float]:
    """Events at `at`, `at` + first interval, ...: those before `end`, and the first that is not.

    intervals: draws so many independent intervals, whose mean is `mean`. Intervals drawn past
    the end are thrown away; being independent, they may be drawn anew in the next step.
    """
    batches = []
    while at < end:
        expected = (end - at) / mean
        steps = intervals(int(expected + 4 * sqrt(expected)) + 16)
        times = np.cumsum(np.concatenate((np.asarray([at], steps.dtype), steps)))
        batches.append(times[:-1])
        at = times[-1]
    if not batches:
        return np.asarray([at])[:0], at
    times = np.concatenate((*batches, [at]))
    inside = int(np.searchsorted(times, end, side="left"))
    return times[:inside], times[inside]
