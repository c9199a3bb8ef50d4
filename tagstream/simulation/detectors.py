"""Detectors: photons to tags, with jitter, delay, dark counts, dead time, and the native tick."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from math import ceil

import numpy as np
from numpy.typing import NDArray

from tagstream.simulation.kernels import fill_survivors, fill_triggered
from tagstream.simulation.light import Arm, Photons
from tagstream.units import PS_PER_S

_JITTER_REACH = 10  # sigmas; beyond lie 1.5e-23 of a normal law, which are moved to the edge
_LONG_AGO_PS = -(2**62)
_FARTHEST_PS = 10**6  # that a delay drifts; then it stays
_HOUR_PS = 3600 * PS_PER_S


class Detectors:
    """The detectors of all arms. `dead_time` carries its state from piece to piece.

    reach_ps: how much earlier than its photon a tag may be. Light must be drawn so far ahead.
    """

    def __init__(self, arms: Sequence[Arm]) -> None:
        self._sigmas_ps = np.array([arm.jitter_sigma_ps for arm in arms], np.float64)
        self._dark_rates_hz = np.array([arm.dark_rate_hz for arm in arms], np.float64)
        self._dead_times_ps = np.array([arm.dead_time_ps for arm in arms], np.int64)
        self._delays_ps = np.array([arm.delay_ps for arm in arms], np.float64)
        self._drifts = np.array([arm.delay_drift for arm in arms], np.float64) / _HOUR_PS
        self._last_ps = np.full(len(arms), _LONG_AGO_PS, np.int64)
        early = _FARTHEST_PS if self._drifts.min() < 0 else 0
        self.reach_ps = ceil(_JITTER_REACH * self._sigmas_ps.max()) + early

    def respond(
        self, photons: Photons, begin_ps: int, length_ps: int, rng: np.random.Generator
    ) -> tuple[NDArray[np.int64], NDArray[np.uint8]]:
        """Times (int64 ps, any order) and arms of the counts of one step.

        begin_ps, length_ps: the step for which the photons were drawn.
        """
        offsets, arms = photons
        if self._sigmas_ps.any():
            jitter = rng.standard_normal(offsets.size)
            np.clip(jitter, -_JITTER_REACH, _JITTER_REACH, out=jitter)
            offsets = offsets + self._sigmas_ps[arms] * jitter
        if self._delays_ps.any() or self._drifts.any():
            offsets = offsets + self._delay_ps(offsets + begin_ps, arms)
        dark_counts = rng.poisson(self._dark_rates_hz * (length_ps / PS_PER_S))
        dark_arms = np.repeat(np.arange(dark_counts.size, dtype=np.uint8), dark_counts)
        offsets = np.concatenate((offsets, rng.random(dark_arms.size) * length_ps))
        times_ps = np.floor(offsets).astype(np.int64) + np.int64(begin_ps)
        return times_ps, np.concatenate((arms, dark_arms))

    def _delay_ps(
        self, times_ps: NDArray[np.float64], arms: NDArray[np.uint8]
    ) -> NDArray[np.float64]:
        drifted = np.clip(self._drifts[arms] * times_ps, -_FARTHEST_PS, _FARTHEST_PS)
        delays: NDArray[np.float64] = self._delays_ps[arms] + drifted
        return delays

    def dead_time(self, times_ps: NDArray[np.int64], arms: NDArray[np.uint8]) -> NDArray[np.bool_]:
        """Which tags of a piece, in time order, are registered; bool, n."""
        survives = np.empty(times_ps.size, np.bool_)
        fill_survivors(times_ps, arms, self._dead_times_ps, self._last_ps, survives)
        return survives

    def triggered_dead_time(
        self, times_ps: NDArray[np.int64], arms: NDArray[np.uint8], causes: NDArray[np.int64]
    ) -> NDArray[np.bool_]:
        """The same where tags may have been triggered by others (kernels.fill_triggered)."""
        survives = np.empty(times_ps.size, np.bool_)
        fill_triggered(times_ps, arms, causes, self._dead_times_ps, self._last_ps, survives)
        return survives


def floor_to_tick(times_ps: NDArray[np.int64], tick: Fraction) -> NDArray[np.int64]:
    """The time in ps of the last tick at or before each time: its exact product, half up.

    With t = q num + r the tick is q den + (r den) // num: no intermediate exceeds int64.
    """
    num, den = tick.numerator, tick.denominator
    if num == den:
        return times_ps
    quotient, rest = np.divmod(times_ps, np.int64(num))
    if den == 1:
        return times_ps - rest
    ticks = rest * np.int64(den) // np.int64(num)
    return quotient * np.int64(num) + (2 * num * ticks + den) // (2 * den)
