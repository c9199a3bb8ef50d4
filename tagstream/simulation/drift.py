"""How the light that reaches the detectors changes in the course of a run."""

from __future__ import annotations

from collections.abc import Callable
from math import ceil, pi
from typing import Annotated

import numpy as np
from numpy.typing import ArrayLike, NDArray
from pydantic import Field, model_validator

from tagstream.settings.quantities import PositiveTimePs
from tagstream.settings.section import Section
from tagstream.simulation.light import Photons
from tagstream.units import PS_PER_S

HOUR_PS = 3600 * PS_PER_S
_TURNS, _PER_TURN = 1024, 64
_NODES = 65  # of a table over the factor: rates are smooth in it
Part = Annotated[float, Field(ge=0, lt=1, strict=True)]


class Drift(Section):
    """The [drift] section: the light is multiplied by (1 - fading)^hours [1 + swing sin(2 pi t/T)].

    Photons pass by chance, each for itself, so all correlations stay; dark counts do not drift.
    """

    fading_per_hour: Part = 0.0
    swing: Part = 0.0
    period_ps: PositiveTimePs | None = Field(None, alias="period")

    @model_validator(mode="after")
    def _check(self) -> Drift:
        if (self.swing > 0) != (self.period_ps is not None):
            raise ValueError("`swing` and `period` together, or neither")
        return self

    @property
    def most(self) -> float:
        """No factor is higher."""
        return 1 + self.swing

    def factor(self, times_ps: ArrayLike) -> NDArray[np.float64]:
        """Of the light at the given times; before zero it does not fade yet."""
        times = np.asarray(times_ps, np.float64)
        faded = (1 - self.fading_per_hour) ** (np.maximum(times, 0) / HOUR_PS)
        if self.period_ps is None:
            return faded
        swung: NDArray[np.float64] = 1 + self.swing * np.sin(2 * pi * times / self.period_ps)
        return faded * swung

    def thinned(self, photons: Photons, begin_ps: int, rng: np.random.Generator) -> Photons:
        """The photons that are left of those of light that is brighter by `most`."""
        if self.most == 1 and self.fading_per_hour == 0:
            return photons
        chances = self.factor(photons.offsets_ps + begin_ps) / self.most
        passes = rng.random(chances.size) < chances
        return Photons(photons.offsets_ps[passes], photons.arms[passes])

    def mean(
        self,
        of: Callable[[float], float],
        duration_ps: int,
        weight: Callable[[float], float] = lambda factor: 1.0,
    ) -> float:
        """The mean, over a run, of what depends on the factor, with a weight that does too."""
        if self.most == 1 and self.fading_per_hour == 0:
            return of(1.0)
        factors = self.factor(self._instants(duration_ps))
        nodes = np.linspace(factors.min(), factors.max(), _NODES)
        weights = np.interp(factors, nodes, [weight(float(node)) for node in nodes])
        values = np.interp(factors, nodes, [of(float(node)) for node in nodes])
        return float(np.average(values, weights=weights))

    def _instants(self, duration_ps: int) -> NDArray[np.float64]:
        """Times that stand for the run: all of it, or 256 whole turns of very many."""
        turns = 0.0 if self.period_ps is None else duration_ps / self.period_ps
        if self.period_ps is None or turns <= _TURNS:
            count = max(8 * _PER_TURN, _PER_TURN * ceil(turns))
            return np.linspace(0.5, count - 0.5, count) * (duration_ps / count)
        firsts = np.floor(np.linspace(0, turns - 1, _TURNS // 4))
        phases = (np.arange(_PER_TURN) + 0.5) / _PER_TURN
        instants: NDArray[np.float64] = np.add.outer(firsts, phases).ravel() * self.period_ps
        return instants
