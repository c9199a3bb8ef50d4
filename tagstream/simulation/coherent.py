"""Coherent light: photons independent of each other."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Literal

import numpy as np
from pydantic import Field

from tagstream.simulation.continuous import ContinuousSource
from tagstream.simulation.draws import poisson_photons
from tagstream.simulation.light import Arm, Light, Photons
from tagstream.simulation.quantities import RateHz


class Coherent(ContinuousSource):
    """A laser far above threshold, or attenuated daylight: g2 = 1 at every lag."""

    kind: Literal["coherent"]
    rate_hz: RateHz = Field(alias="rate")  # at the splitter

    @property
    def photon_rate_hz(self) -> float:
        """Mean number of photons per second at the splitter."""
        return self.rate_hz

    @property
    def memory_ps(self) -> float:
        """None."""
        return 0.0

    def mean_excess(self, window_ps: float, sigma_ps: float) -> float:
        """Zero."""
        return 0.0

    def light(self, arms: Sequence[Arm]) -> Light:
        """Poisson light."""
        return _PoissonLight(self.rate_hz, arms)


class _PoissonLight:
    def __init__(self, rate_hz: float, arms: Sequence[Arm]) -> None:
        self._rate_hz, self._arms = rate_hz, arms

    def draw(self, begin_ps: int, length_ps: int, rng: np.random.Generator) -> Photons:
        return poisson_photons(self._rate_hz, length_ps, self._arms, rng)
