"""A two-level emitter under continuous excitation, with coherent background light."""

from __future__ import annotations

from collections.abc import Sequence
from math import sqrt
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from pydantic import Field, model_validator

from tagstream.simulation.continuous import ContinuousSource
from tagstream.simulation.draws import poisson_photons, renewals, spread, total_share
from tagstream.simulation.jitter import mean_decay
from tagstream.simulation.light import Arm, Light, Photons
from tagstream.simulation.quantities import RateHz, TimeConstantPs
from tagstream.units import PS_PER_S


class TwoLevel(ContinuousSource):
    """Excitation at rate k_e, then decay at rate k_r with one photon, and again.

    g2 = 1 - rho^2 exp(-|t|/t0) with 1/t0 = k_e + k_r and rho the fraction of the light that is
    not background; the emitter's own rate is k_e k_r / (k_e + k_r), at most 1/(4 t0).
    """

    rate_hz: RateHz = Field(alias="rate")  # at the splitter, without background
    t0_ps: TimeConstantPs = Field(alias="t0")
    background_hz: RateHz = Field(0.0, alias="background")  # at the splitter

    @model_validator(mode="after")
    def _check(self) -> TwoLevel:
        highest = PS_PER_S / (4 * self.t0_ps)
        if self.rate_hz > highest:
            raise ValueError(
                f"`rate` of at most 1/(4 t0), here {highest / 1e6:.6g} MHz:"
                " a two-level emitter gives no more"
            )
        return self

    @property
    def emitted_hz(self) -> float:
        """Mean number of the emitter's own photons per second at the splitter."""
        return self.rate_hz

    @property
    def photon_rate_hz(self) -> float:
        """Mean number of photons per second at the splitter."""
        return self.emitted_hz + self.background_hz

    @property
    def memory_ps(self) -> float:
        """The width of the dip."""
        return float(self.t0_ps)

    @property
    def signal_fraction(self) -> float:
        """rho: the fraction of the photons at the splitter that are the emitter's own."""
        return self.emitted_hz / self.photon_rate_hz if self.photon_rate_hz > 0 else 0.0

    def mean_excess(self, window_ps: float, sigma_ps: float) -> float:
        """Mean of g2 - 1 over a centred window."""
        return -(self.signal_fraction**2) * mean_decay(window_ps, self.t0_ps, sigma_ps)

    def light(self, arms: Sequence[Arm]) -> Light:
        """The emitter's light and the background, behind the losses."""
        return EmitterLight(self, arms)

    def known(self, arms: Sequence[Arm], window_ps: float) -> dict[str, float]:
        """g2_fit_t1_ps: the width of the dip."""
        return {"g2_fit_t1_ps": float(self.t0_ps)}


class Emitter(TwoLevel):
    """The emitter alone."""

    kind: Literal["emitter"]


class EmitterLight:
    """Intervals between detected photons are the sum of two exponential times.

    Losses keep a renewal process, and its correlation 1 - exp(-|t|/t0), which with the rate
    determines it. So detected photons follow the same law as emitted ones: with the rate r that
    is left, k_e + k_r = 1/t0 and k_e k_r = r/t0 give the two rates of the intervals.
    """

    def __init__(self, source: TwoLevel, arms: Sequence[Arm]) -> None:
        self._arms, self._background_hz = arms, source.background_hz
        detected_per_ps = source.rate_hz * total_share(arms) / PS_PER_S
        total, product = 1 / source.t0_ps, detected_per_ps / source.t0_ps
        slow = 2 * product / (total + sqrt(max(total**2 - 4 * product, 0.0)))
        self._means = (1 / slow, slow / product) if slow > 0 else None
        self._next = 0.0  # from here on the past is forgotten within a few t0

    def draw(self, begin_ps: int, length_ps: int, rng: np.random.Generator) -> Photons:
        """The emitter's photons and those of the background."""
        offsets = self.emitted(length_ps, rng)
        arms = spread(offsets.size, self._arms, rng)
        background = poisson_photons(self._background_hz, length_ps, self._arms, rng)
        return Photons(
            np.concatenate((offsets, background.offsets_ps)),
            np.concatenate((arms, background.arms)),
        )

    def emitted(self, length_ps: int, rng: np.random.Generator) -> NDArray[np.float64]:
        """Offsets of the emitter's own photons that will be detected, rising."""
        if self._means is None:
            return np.empty(0, np.float64)
        longer, shorter = self._means

        def intervals(count: int) -> NDArray[np.float64]:
            sums = longer * rng.standard_exponential(count)
            sums += shorter * rng.standard_exponential(count)
            return sums

        offsets, after = renewals(self._next, length_ps, intervals, longer + shorter)
        self._next = after - length_ps
        return offsets
