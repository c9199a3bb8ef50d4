"""An emitter excited by short pulses: none, one or two photons per pulse."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from math import ceil, sqrt
from typing import Annotated, Any, Literal

import numpy as np
from numpy.typing import NDArray
from pydantic import Field, model_validator

from tagstream.settings.quantities import PeriodPs
from tagstream.simulation.draws import no_photons, renewals, spread, total_share
from tagstream.simulation.jitter import lag_share
from tagstream.simulation.light import Arm, Light, Photons, Source, joint_sigma_ps
from tagstream.simulation.pulses import pulse_range, pulse_times_ps
from tagstream.simulation.quantities import ShortTimePs
from tagstream.units import PS_PER_S

PhotonNumber = Annotated[float, Field(ge=0, le=2, strict=True)]
_REACH = 40  # a lag this many time constants away has no weight in double precision


class PulsedEmitter(Source):
    """Two photons with probability p2 = g2 mu^2 / 2, one with p1 = mu - 2 p2, mu the mean number.

    Each photon leaves after its own exponentially distributed time; pulses are independent.
    """

    kind: Literal["pulsed-emitter"]
    period_ps: PeriodPs = Field(alias="period")
    photons_per_pulse: PhotonNumber  # mean, at the splitter
    g2_zero: Annotated[float, Field(ge=0, strict=True, allow_inf_nan=False)]
    lifetime_ps: ShortTimePs = Field(0, alias="lifetime")

    @model_validator(mode="after")
    def _check(self) -> PulsedEmitter:
        if self.period_ps < 1 or 2 * self.period_ps.numerator * self.period_ps.denominator > 2**62:
            raise ValueError("`period` of at least 1 ps, written with fewer digits")
        if self.p_one < -1e-12:
            raise ValueError(
                "`g2_zero` times `photons_per_pulse` of at most 1:"
                " more needs pulses of three photons"
            )
        if self.p_one + self.p_two > 1 + 1e-12:
            raise ValueError(
                "`photons_per_pulse` (mu) and `g2_zero` with mu - g2 mu^2 / 2 of at most 1:"
                " this is the probability that a pulse has any photon"
            )
        return self

    @property
    def p_two(self) -> float:
        """The probability of two photons at the splitter."""
        return self.g2_zero * self.photons_per_pulse**2 / 2

    @property
    def p_one(self) -> float:
        """The probability of one photon at the splitter."""
        return self.photons_per_pulse - 2 * self.p_two

    @property
    def pulse_period(self) -> Fraction:
        """The period in ps."""
        return self.period_ps

    @property
    def photon_rate_hz(self) -> float:
        """Mean number of photons per second at the splitter."""
        return self.photons_per_pulse * PS_PER_S / float(self.period_ps)

    @property
    def memory_ps(self) -> float:
        """The lifetime."""
        return float(self.lifetime_ps)

    @property
    def light_g2_zero(self) -> float:
        """Pairs in one pulse, over pairs in two pulses: the key g2_zero."""
        return self.g2_zero

    @property
    def default_window_ps(self) -> float:
        """The whole period."""
        return float(self.period_ps)

    def light(self, arms: Sequence[Arm]) -> Light:
        """The pulses behind the losses."""
        return _PulsedLight(self, arms)

    def g2_measured(
        self, a: Arm, b: Arm, window_ps: float, side_peaks: tuple[int, int] = (1, 8)
    ) -> float:
        """Counts in the window at zero lag over the mean counts in those at the side peaks.

        A lag between photons of pulses m apart follows a two-sided exponential of the lifetime,
        folded with both jitters, around m periods; windows see the tails of all peaks. Dark
        counts lie flat below. Raises ValueError unless 0 < window <= period.
        """
        period = float(self.period_ps)
        if not 0 < window_ps <= period:
            raise ValueError("a window longer than zero and no longer than the period")
        law = float(self.lifetime_ps), joint_sigma_ps(a, b)
        reach = ceil((window_ps / 2 + _REACH * sum(law)) / period) + 1
        comb = float(np.sum(lag_share(np.arange(-reach, reach + 1) * period, window_ps, *law)))
        sides = np.arange(side_peaks[0], side_peaks[1] + 1) * period
        missing = 1 - self.g2_zero  # of the pairs of one pulse
        centre = comb - missing * float(lag_share(0.0, window_ps, *law))
        side = comb - missing * float(np.mean(lag_share(sides, window_ps, *law)))
        rate = self.photon_rate_hz
        fractions = a.light_fraction(rate) * b.light_fraction(rate)
        flat = (1 - fractions) * window_ps / period
        return (fractions * centre + flat) / (fractions * side + flat)

    def registered_rate_hz(self, arm: Arm) -> float:
        """Counts the pulses that fall into the dead time, as pulsed light needs (not Knoll).

        A pulse gives a tag with probability P unless an earlier tag covers it; k pulses on
        average lie in one dead time. f P / (1 + k P) without dark counts, which are added by
        the same balance of live fractions. Where the dead time ends within a lifetime of a
        pulse k is no whole number, and the result is right to first order in P.
        """
        mean, dead = self.photons_per_pulse * arm.share, float(arm.dead_time_ps)
        law = float(self.lifetime_ps), sqrt(2) * arm.jitter_sigma_ps
        period = float(self.period_ps)
        count = ceil((dead + _REACH * sum(law)) / period)
        covered = float(np.sum(lag_share(np.arange(1, count + 1) * period, 2 * dead, *law)))
        same_pulse = float(lag_share(0.0, 2 * dead, *law))
        click = mean - self.g2_zero * mean**2 / 2 * same_pulse
        dead_s, clicks_hz = dead / PS_PER_S, click * PS_PER_S / period
        busy = 1 + covered * click
        balance = busy * (1 + arm.dark_rate_hz * dead_s) - clicks_hz * arm.dark_rate_hz * dead_s**2
        dark_hz = arm.dark_rate_hz * (busy - clicks_hz * dead_s)
        return (clicks_hz + dark_hz) / balance


class _PulsedLight:
    """Draws only pulses of which something is detected.

    With the detected mean mu' the numbers keep their form (p2' = g2 mu'^2 / 2), because losses
    leave g2 unchanged.
    """

    def __init__(self, source: PulsedEmitter, arms: Sequence[Arm]) -> None:
        self._period, self._lifetime_ps, self._arms = source.period_ps, source.lifetime_ps, arms
        mean = source.photons_per_pulse * total_share(arms)
        self._p_two = source.g2_zero * mean**2 / 2
        self._p_any = min(mean - self._p_two, 1.0)

    def draw(self, begin_ps: int, length_ps: int, rng: np.random.Generator) -> Photons:
        if self._p_any <= 0:
            return no_photons()
        lit = self._lit_pulses(begin_ps, begin_ps + length_ps, rng)
        doubles = lit[rng.random(lit.size) * self._p_any < self._p_two]
        lit = np.concatenate((lit, doubles))
        offsets = (pulse_times_ps(lit, self._period) - begin_ps).astype(np.float64)
        offsets += self._lifetime_ps * rng.standard_exponential(lit.size)
        return Photons(offsets, spread(lit.size, self._arms, rng))

    def _lit_pulses(self, begin_ps: int, end_ps: int, rng: np.random.Generator) -> NDArray[Any]:
        """Numbers of the pulses in the interval with a detected photon, int64, rising."""
        first, last = pulse_range(self._period, begin_ps, end_ps)

        def intervals(count: int) -> NDArray[np.int64]:
            return np.minimum(rng.geometric(self._p_any, count), last - first + 1)

        at = first - 1 + int(intervals(1)[0])
        return renewals(at, last, intervals, 1 / self._p_any)[0]
