"""Compiled loops of the simulated detectors."""

from __future__ import annotations

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
