"""A three-level emitter under continuous excitation: now and then it is shelved in a dark state."""

from __future__ import annotations

from collections.abc import Sequence
from math import sqrt
from typing import Annotated, Literal

import numpy as np
from numpy.typing import NDArray
from pydantic import Field, model_validator

from tagstream.simulation.continuous import ContinuousSource
from tagstream.simulation.draws import no_photons, renewals, spread, total_share
from tagstream.simulation.jitter import mean_decay
from tagstream.simulation.light import Arm, Light, Photons
from tagstream.simulation.quantities import RateHz, TimeConstantPs
from tagstream.units import PS_PER_S

Shelving = Annotated[float, Field(ge=0, lt=1, strict=True)]


class ShelvingEmitter(ContinuousSource):
    """Excited, then back with a photon or, with probability `shelving`, into the dark state.

    g2 = 1 - (1+a) exp(-|t|/t1) + a exp(-|t|/t2) (Kurtsiefer et al., PRL 85, 290 (2000)). With the
    rates x of excitation, y of leaving the excited state and z of leaving the shelf, 1/t1 and
    1/t2 are the roots of s^2 - (x+y+z) s + z (x+y) + q x y = 0 (q: shelving), from the rate
    equations; a follows from the slope at zero, x over the mean occupation of the excited state.
    """

    kind: Literal["shelving-emitter"]
    rate_hz: RateHz = Field(alias="rate")  # at the splitter
    excitation_ps: TimeConstantPs = Field(alias="excitation_time")
    lifetime_ps: TimeConstantPs = Field(alias="lifetime")
    shelving: Shelving
    shelf_ps: TimeConstantPs = Field(alias="shelf_time")

    @model_validator(mode="after")
    def _check(self) -> ShelvingEmitter:
        total, product = self._sum_and_product
        if total**2 <= 4 * product * (1 + 1e-9):
            raise ValueError(
                "`shelf_time` longer than `excitation_time` and `lifetime`, or less `shelving`:"
                " here g2 would oscillate"
            )
        if self.rate_hz > self.emitted_hz:
            raise ValueError(f"`rate` of at most {self.emitted_hz / 1e6:.6g} MHz: it emits no more")
        return self

    @property
    def _sum_and_product(self) -> tuple[float, float]:
        """Of 1/t1 and 1/t2."""
        x, y, z = 1 / self.excitation_ps, 1 / self.lifetime_ps, 1 / self.shelf_ps
        return x + y + z, z * (x + y) + self.shelving * x * y

    @property
    def emitted_hz(self) -> float:
        """Photons per second that it emits: one over the mean time between two of them."""
        cycle = self.excitation_ps + self.lifetime_ps + self.shelving * self.shelf_ps
        return PS_PER_S * (1 - self.shelving) / cycle

    @property
    def times_ps(self) -> tuple[float, float]:
        """t1 and t2."""
        total, product = self._sum_and_product
        fast = (total + sqrt(total**2 - 4 * product)) / 2
        return 1 / fast, fast / product

    @property
    def bunching(self) -> float:
        """a."""
        fast, slow = (1 / time for time in self.times_ps)
        z = 1 / self.shelf_ps
        return fast * (slow - z) / (z * (fast - slow))

    @property
    def photon_rate_hz(self) -> float:
        """Mean number of photons per second at the splitter."""
        return self.rate_hz

    @property
    def memory_ps(self) -> float:
        """The longer of the two times."""
        return self.times_ps[1]

    def mean_excess(self, window_ps: float, sigma_ps: float) -> float:
        """Mean of g2 - 1 over a centred window."""
        dip, bunching = (mean_decay(window_ps, time, sigma_ps) for time in self.times_ps)
        return self.bunching * bunching - (1 + self.bunching) * dip

    def light(self, arms: Sequence[Arm]) -> Light:
        """The light behind the losses."""
        return _ShelvingLight(self, arms)

    def known(self, arms: Sequence[Arm], window_ps: float) -> dict[str, float]:
        """g2_fit_a, g2_fit_t1_ps, g2_fit_t2_ps."""
        short, long = self.times_ps
        return {"g2_fit_a": self.bunching, "g2_fit_t1_ps": short, "g2_fit_t2_ps": long}


class _ShelvingLight:
    """Draws the whole time from one detected photon to the next.

    In it the emitter goes through N cycles, a geometric number; S of the N - 1 without a
    detected photon were shelved, a binomial one. The times are sums of exponential ones.
    """

    def __init__(self, source: ShelvingEmitter, arms: Sequence[Arm]) -> None:
        self._source, self._arms = source, arms
        share = total_share(arms) * source.rate_hz / source.emitted_hz
        self._detected = (1 - source.shelving) * share  # the probability of it in a cycle
        self._rate_per_ps = source.rate_hz * total_share(arms) / PS_PER_S
        self._next = 0.0

    def draw(self, begin_ps: int, length_ps: int, rng: np.random.Generator) -> Photons:
        if self._detected == 0:
            return no_photons()
        mean = 1 / self._rate_per_ps
        offsets, after = renewals(self._next, length_ps, lambda n: self._intervals(n, rng), mean)
        self._next = after - length_ps
        return Photons(offsets, spread(offsets.size, self._arms, rng))

    def _intervals(self, count: int, rng: np.random.Generator) -> NDArray[np.float64]:
        source = self._source
        cycles = rng.geometric(self._detected, count)
        shelved = rng.binomial(cycles - 1, source.shelving / (1 - self._detected))
        sums = source.excitation_ps * rng.standard_gamma(cycles)
        sums += source.lifetime_ps * rng.standard_gamma(cycles)
        sums += source.shelf_ps * rng.standard_gamma(shelved)
        return sums
