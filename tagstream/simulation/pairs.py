"""Photon pairs made continuously: one photon heralds the other."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from math import exp, hypot
from typing import Literal

import numpy as np
from pydantic import Field

from tagstream.simulation.continuous import ContinuousSource
from tagstream.simulation.draws import no_photons
from tagstream.simulation.jitter import FWHM_PER_SIGMA, lag_share
from tagstream.simulation.light import (
    HERALD,
    REFLECTED,
    TRANSMITTED,
    Arm,
    Light,
    Photons,
    arm_at,
    joint_sigma_ps,
)
from tagstream.simulation.pair_fates import PairFates
from tagstream.simulation.pulsed_pairs import detected_photons
from tagstream.simulation.quantities import RateHz, ShortTimePs
from tagstream.units import PS_PER_S

_REACH = 10  # sigmas of the lag between the photons of a pair


class Pairs(ContinuousSource):
    """Pairs at independent instants; the lag between the two photons is normally distributed.

    The truth holds while dead times are short beside the time between two counts.
    """

    kind: Literal["pairs"]
    rate_hz: RateHz = Field(alias="rate")  # pairs: so many photons to the herald and the splitter
    correlation_fwhm_ps: ShortTimePs = Field(0, alias="correlation_fwhm")

    @property
    def ports(self) -> tuple[str, ...]:
        """Those of the splitter, and the herald's detector."""
        return TRANSMITTED, REFLECTED, HERALD

    @property
    def photon_rate_hz(self) -> float:
        """Mean number of pairs per second."""
        return self.rate_hz

    @property
    def sigma_ps(self) -> float:
        """Standard deviation of the lag between the two photons."""
        return self.correlation_fwhm_ps / FWHM_PER_SIGMA

    @property
    def memory_ps(self) -> float:
        """The spread of a pair."""
        return 2 * _REACH * self.sigma_ps

    def mean_excess(self, window_ps: float, sigma_ps: float) -> float:
        """Zero: the photons at the splitter are independent of each other."""
        return 0.0

    def light(self, arms: Sequence[Arm]) -> Light:
        """The detected photons of the pairs."""
        return _PairLight(self, arms)

    def known(self, arms: Sequence[Arm], window_ps: float) -> dict[str, float]:
        """What a herald makes of it in a coincidence window of that full width, if not zero."""
        herald, a, b = (arm_at(port, arms) for port in (HERALD, TRANSMITTED, REFLECTED))
        if herald is None or window_ps == 0 or self.rate_hz == 0:
            return {}
        near = _Window(self, herald, window_ps)
        known = dict(near.of_pairs(arm for arm in (a, b) if arm))
        if herald.share and a and b and min(a.share, b.share) > 0:
            known["g2_zero_heralded"] = near.heralded_g2(a, b)
        return known


class _Window:
    """Counts in the window around a tag of the herald: at least one by either detector.

    The rest of a Poisson process does not know that one of its pairs was seen, so a partner and
    accidentals, which are Poisson, come independently of each other.
    """

    def __init__(self, source: Pairs, herald: Arm, window_ps: float) -> None:
        self._source, self._herald, self._width_ps = source, herald, window_ps
        self._genuine = herald.light_fraction(source.photon_rate_hz)

    def _partner(self, arm: Arm) -> float:
        """The probability that a herald that is a photon has its partner in the window."""
        sigma = hypot(joint_sigma_ps(self._herald, arm), self._source.sigma_ps)
        return arm.share * float(lag_share(0.0, self._width_ps, 0.0, sigma))

    def _accidentals(self, arm: Arm) -> float:
        rate_hz = self._source.rate_hz * arm.share + arm.dark_rate_hz
        return rate_hz * self._width_ps / PS_PER_S

    def _silent(self, *arms: Arm) -> float:
        """The probability that none of these arms has a count near a herald."""
        partner = self._genuine * sum(self._partner(arm) for arm in arms)
        return (1 - partner) * exp(-sum(self._accidentals(arm) for arm in arms))

    def heralded_g2(self, a: Arm, b: Arm) -> float:
        """N_hab N_h / (N_ha N_hb)."""
        single = 1 - self._silent(a), 1 - self._silent(b)
        both = single[0] + single[1] - (1 - self._silent(a, b))
        return both / (single[0] * single[1])

    def of_pairs(self, signals: Iterator[Arm]) -> Iterator[tuple[str, float]]:
        """Raw heralding efficiency and C/A for each detector."""
        for arm in signals:
            chance = self._accidentals(arm)
            if chance == 0:
                continue
            coincidence = self._genuine * self._partner(arm) + chance
            yield f"heralding_efficiency_{arm.port}", 1 - self._silent(arm)
            yield f"coincidence_to_accidental_ratio_{arm.port}", coincidence / chance


class _PairLight:
    def __init__(self, source: Pairs, arms: Sequence[Arm]) -> None:
        self._fates, self._sigma_ps = PairFates(arms), source.sigma_ps
        self._per_ps = source.rate_hz * self._fates.p_detected / PS_PER_S

    def draw(self, begin_ps: int, length_ps: int, rng: np.random.Generator) -> Photons:
        """Both photons come later by the reach of their lag, so that none is before the step."""
        if self._per_ps == 0:
            return no_photons()
        count = int(rng.poisson(self._per_ps * length_ps))
        heralds = rng.random(count) * length_ps + _REACH * self._sigma_ps
        lags = np.clip(rng.standard_normal(count), -_REACH, _REACH) * self._sigma_ps
        return detected_photons(heralds, heralds + lags, self._fates.draw(count, rng))
