"""Thermal light: bunched, because its intensity fluctuates."""

from __future__ import annotations

from collections.abc import Sequence
from math import ceil
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from pydantic import Field

from tagstream.simulation.continuous import ContinuousSource
from tagstream.simulation.draws import no_photons, renewals, spread, total_share
from tagstream.simulation.jitter import mean_decay
from tagstream.simulation.kernels import fill_intensities
from tagstream.simulation.light import Arm, Light, Photons
from tagstream.simulation.quantities import RateHz, TimeConstantPs
from tagstream.units import PS_PER_S

_BRIGHTEST = 16  # means; e^-16 = 1.1e-7 of the light is above it and is cut
_TRIALS = 1 << 17  # in one go, to bound memory


class Thermal(ContinuousSource):
    """One mode of chaotic light with a Lorentzian spectrum: g2 = 1 + exp(-2 |t|/tc) (Loudon)."""

    kind: Literal["thermal"]
    rate_hz: RateHz = Field(alias="rate")  # at the splitter
    coherence_ps: TimeConstantPs = Field(alias="coherence_time")

    @property
    def photon_rate_hz(self) -> float:
        """Mean number of photons per second at the splitter."""
        return self.rate_hz

    @property
    def memory_ps(self) -> float:
        """None: the field begins in its stationary law."""
        return 0.0

    def mean_excess(self, window_ps: float, sigma_ps: float) -> float:
        """Mean of g2 - 1 over a centred window; without jitter tc/w (1 - exp(-w/tc))."""
        return mean_decay(window_ps, self.coherence_ps / 2, sigma_ps)

    def light(self, arms: Sequence[Arm]) -> Light:
        """Photons of a fluctuating intensity."""
        return _ThermalLight(self, arms)

    def known(self, arms: Sequence[Arm], window_ps: float) -> dict[str, float]:
        """coherence_time_ps."""
        return {"coherence_time_ps": float(self.coherence_ps)}


class _ThermalLight:
    """Photons at the intensity of a complex Ornstein-Uhlenbeck field (a Cox process).

    Trials are a Poisson process of `_BRIGHTEST` times the mean rate; the field, a Markov
    process, is sampled at the trials alone, exactly, whatever lies between them, and a trial
    becomes a photon with probability intensity / `_BRIGHTEST`. Bias: the intensity above that
    is cut, 1.1e-7 of the rate and 2e-6 of g2(0). The cost is 16 trials for a detected photon.
    """

    def __init__(self, source: Thermal, arms: Sequence[Arm]) -> None:
        self._arms, self._coherence_ps = arms, source.coherence_ps
        self._trials_per_ps = source.rate_hz * total_share(arms) / PS_PER_S * _BRIGHTEST
        self._field = np.zeros(2)
        self._last_ps = -np.inf  # so long ago that the field says nothing

    def draw(self, begin_ps: int, length_ps: int, rng: np.random.Generator) -> Photons:
        if self._trials_per_ps == 0:
            return no_photons()
        parts = ceil(length_ps * self._trials_per_ps / _TRIALS)
        bounds = np.linspace(0, length_ps, parts + 1)
        chosen = [self._photons(bounds[i], bounds[i + 1], rng) for i in range(parts)]
        offsets = np.concatenate(chosen)
        self._last_ps -= length_ps
        return Photons(offsets, spread(offsets.size, self._arms, rng))

    def _photons(self, begin: float, end: float, rng: np.random.Generator) -> NDArray[np.float64]:
        mean = 1 / self._trials_per_ps

        def intervals(count: int) -> NDArray[np.float64]:
            return mean * rng.standard_exponential(count)

        trials, _ = renewals(begin + float(intervals(1)[0]), end, intervals, mean)
        intensities = self._intensities(trials, rng)
        chosen: NDArray[np.float64] = trials[rng.random(trials.size) * _BRIGHTEST < intensities]
        return chosen

    def _intensities(
        self, trials: NDArray[np.float64], rng: np.random.Generator
    ) -> NDArray[np.float64]:
        intensities = np.empty(trials.size)
        if trials.size:
            steps = np.diff(trials, prepend=self._last_ps) / self._coherence_ps
            normals = rng.standard_normal((trials.size, 2))
            fill_intensities(steps, normals, self._field, intensities)
            self._last_ps = float(trials[-1])
        return intensities
