"""Compiled loops of the simulated detectors."""

from __future__ import annotations

from math import exp, expm1, sqrt
from typing import Any

from numpy.typing import NDArray

from tagstream.compiled import kernel


@kernel
def fill_survivors(
    times_ps: NDArray[Any],
    arms: NDArray[Any],
    dead_times_ps: NDArray[Any],
    last_ps: NDArray[Any],
    survives: NDArray[Any],
) -> None:
    """Mark the tags that a non-paralyzable dead time leaves: those at least it after the last.

    times_ps: int64, n, non-decreasing. arms: uint8, n. dead_times_ps: int64, one per arm.
    last_ps: int64, one per arm, time of the last tag that survived; updated, so that the next
    piece goes on from it. survives: bool, n, filled.
    """
    for i in range(times_ps.size):
        arm = arms[i]
        alive = times_ps[i] - last_ps[arm] >= dead_times_ps[arm]
        survives[i] = alive
        if alive:
            last_ps[arm] = times_ps[i]


@kernel
def fill_triggered(
    times_ps: NDArray[Any],
    arms: NDArray[Any],
    causes: NDArray[Any],
    dead_times_ps: NDArray[Any],
    last_ps: NDArray[Any],
    survives: NDArray[Any],
) -> None:
    """As `fill_survivors`, where a tag may need another one, and needs that it survived.

    causes: int64, n, position of the tag that triggered this one, before it; -1: none.
    """
    for i in range(times_ps.size):
        arm = arms[i]
        alive = times_ps[i] - last_ps[arm] >= dead_times_ps[arm]
        if causes[i] >= 0:
            alive = alive and survives[causes[i]]
        survives[i] = alive
        if alive:
            last_ps[arm] = times_ps[i]


@kernel
def fill_intensities(
    steps: NDArray[Any], normals: NDArray[Any], field: NDArray[Any], intensities: NDArray[Any]
) -> None:
    """Follow a complex Gaussian field whose correlation decays as exp(-time), mean intensity 1.

    steps: float64, n, times between one sample and the next, the first since `field`. normals:
    float64, n x 2, standard normal. field: float64, 2, updated. intensities: float64, n, filled.
    """
    real, imaginary = field[0], field[1]
    for i in range(steps.size):
        kept = exp(-steps[i])
        fresh = sqrt(-expm1(-2 * steps[i]) / 2)
        real = kept * real + fresh * normals[i, 0]
        imaginary = kept * imaginary + fresh * normals[i, 1]
        intensities[i] = real * real + imaginary * imaginary
    field[0], field[1] = real, imaginary
