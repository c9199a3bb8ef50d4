"""What all pulsed light has in common: a comb of peaks, and rates counted in pulses."""

from __future__ import annotations

from abc import abstractmethod
from collections.abc import Sequence
from fractions import Fraction
from math import ceil, sqrt

import numpy as np
from numpy.typing import NDArray
from pydantic import Field, model_validator

from tagstream.settings.quantities import PeriodPs
from tagstream.simulation.draws import no_photons, renewals, spread, total_share
from tagstream.simulation.jitter import lag_share
from tagstream.simulation.light import Arm, Light, Photons, Source, joint_sigma_ps
from tagstream.simulation.number_laws import NumberLaw, draw_numbers
from tagstream.simulation.pulses import pulse_range, pulse_times_ps
from tagstream.units import PS_PER_S

REACH = 40  # a lag this many time constants away has no weight in double precision


class PulsedSource(Source):
    """Light in pulses; each photon leaves after its own exponentially distributed time."""

    period_ps: PeriodPs = Field(alias="period")

    @model_validator(mode="after")
    def _check_period(self) -> PulsedSource:
        if self.period_ps < 1 or 2 * self.period_ps.numerator * self.period_ps.denominator > 2**62:
            raise ValueError("`period` of at least 1 ps, written with fewer digits")
        return self

    @property
    @abstractmethod
    def mean_photons(self) -> float:
        """Mean number of photons per pulse at the splitter."""

    @property
    @abstractmethod
    def number_law(self) -> NumberLaw:
        """How the number of photons of a pulse varies."""

    @property
    def while_on(self) -> tuple[float, NumberLaw]:
        """Mean and law of the photons of a pulse while the source is on."""
        return self.mean_photons, self.number_law

    @property
    def pulse_period(self) -> Fraction:
        """The period in ps."""
        return self.period_ps

    @property
    def photon_rate_hz(self) -> float:
        """Mean number of photons per second at the splitter."""
        return self.mean_photons * PS_PER_S / float(self.period_ps)

    @property
    def memory_ps(self) -> float:
        """The lifetime."""
        return self.decay_ps

    @property
    def light_g2_zero(self) -> float:
        """Pairs in one pulse, over pairs in two pulses far apart."""
        return self.number_law.g2

    @property
    def default_window_ps(self) -> float:
        """The whole period."""
        return float(self.period_ps)

    def same_pulse(self, a: Arm, b: Arm) -> float:
        """Pairs of counts in one pulse, over those in two pulses far apart."""
        return self.light_g2_zero

    def other_pulses(self, apart: NDArray[np.int64]) -> NDArray[np.float64]:
        """Pairs in pulses so many apart, not zero, over those in two pulses far apart."""
        return np.ones(apart.shape)

    def light(self, arms: Sequence[Arm]) -> Light:
        """The pulses behind the losses."""
        return PulsedLight(self, arms)

    def g2_measured(
        self, a: Arm, b: Arm, window_ps: float, side_peaks: tuple[int, int] = (1, 8)
    ) -> float:
        """Counts in the window at zero lag over the mean counts in those at the side peaks.

        A lag between photons of pulses m apart follows a two-sided exponential of the lifetime,
        folded with both jitters, around m periods; windows see the tails of all peaks. Dark
        counts lie flat below. Raises ValueError unless 0 < window <= period.
        """
        sides = np.arange(side_peaks[0], side_peaks[1] + 1)
        side = float(np.mean([self.window_counts(a, b, window_ps, int(m)) for m in sides]))
        return self.window_counts(a, b, window_ps, 0) / side

    def window_counts(self, a: Arm, b: Arm, window_ps: float, number: int) -> float:
        """Counts in a window at a peak, over those of two pulses far apart, dark counts included.

        Raises ValueError unless 0 < window <= period.
        """
        period = float(self.period_ps)
        check_window(window_ps, period)
        law = self.decay_ps, joint_sigma_ps(a, b)
        reach = ceil((window_ps / 2 + REACH * sum(law)) / period) + 1
        near = np.arange(-reach, reach + 1)
        weights = np.where(near + number == 0, 1.0, self.other_pulses(near + number))
        shares = lag_share(near * period, window_ps, *law)
        missing = (1 - self.same_pulse(a, b)) * float(np.sum(shares[near + number == 0]))
        return with_dark_counts(
            float(np.sum(weights * shares)) - missing,
            window_ps / period,
            self._light_pairs(a, b),
        )

    def _light_pairs(self, a: Arm, b: Arm) -> float:
        rate = self.photon_rate_hz
        return a.light_fraction(rate) * b.light_fraction(rate)

    def registered_rate_hz(self, arm: Arm) -> float:
        """Counts the pulses that fall into the dead time, as pulsed light needs (not Knoll).

        A pulse gives a tag with probability P unless an earlier tag covers it; k pulses on
        average lie in one dead time. f P / (1 + k P) without dark counts, which are added by
        the same balance of live fractions. Where the dead time ends within a lifetime of a
        pulse k is no whole number, and the result is right to first order in P; so it is where
        pulses are correlated.
        """
        mean, dead = self.mean_photons * arm.share, float(arm.dead_time_ps)
        law = self.decay_ps, sqrt(2) * arm.jitter_sigma_ps
        period = float(self.period_ps)
        apart = np.arange(1, ceil((dead + REACH * sum(law)) / period) + 1)
        shares = lag_share(apart * period, 2 * dead, *law) * self.other_pulses(apart)
        same_pulse = float(lag_share(0.0, 2 * dead, *law))
        click = mean - (mean - self.number_law.any(mean)) * same_pulse
        dead_s, clicks_hz = dead / PS_PER_S, click * PS_PER_S / period
        busy = 1 + float(np.sum(shares)) * click
        balance = busy * (1 + arm.dark_rate_hz * dead_s) - clicks_hz * arm.dark_rate_hz * dead_s**2
        dark_hz = arm.dark_rate_hz * (busy - clicks_hz * dead_s)
        return (clicks_hz + dark_hz) / balance


class PromptPulses(PulsedSource):
    """Pulses so short that the dead time of a detector, if it has any, outlasts them.

    Such a detector gives one tag for any number of photons: it clicks.
    """

    def same_pulse(self, a: Arm, b: Arm) -> float:
        """P(both) / (P(a) P(b)) of clicks; of photons, where a detector has no dead time."""
        if min(a.dead_time_ps, b.dead_time_ps) == 0 or min(a.share, b.share) == 0:
            return self.light_g2_zero
        law, means = self.number_law, (self.mean_photons * a.share, self.mean_photons * b.share)
        singly = [law.any(mean) for mean in means]
        return (sum(singly) - law.any(sum(means))) / (singly[0] * singly[1])


def check_window(window_ps: float, period_ps: float) -> None:
    """Raise ValueError for a window that pulsed light cannot have."""
    if not 0 < window_ps <= period_ps:
        raise ValueError("a window longer than zero and no longer than the period")


def with_dark_counts(counts: float, flat: float, light_pairs: float) -> float:
    """Counts of light alone with dark counts, which are flat; light_pairs: f_a f_b."""
    return light_pairs * counts + (1 - light_pairs) * flat


class LitPulses:
    """Draws the numbers of pulses that have any photon, each with probability `p_any`."""

    def __init__(self, period: Fraction, p_any: float) -> None:
        self._period, self._p_any = period, p_any

    def draw(self, begin_ps: int, end_ps: int, rng: np.random.Generator) -> NDArray[np.int64]:
        """Those of the interval, int64, rising."""
        if self._p_any <= 0:
            return np.empty(0, np.int64)
        first, last = pulse_range(self._period, begin_ps, end_ps)

        def intervals(count: int) -> NDArray[np.int64]:
            return np.minimum(rng.geometric(self._p_any, count), last - first + 1)

        at = first - 1 + int(intervals(1)[0])
        return renewals(at, last, intervals, 1 / self._p_any)[0]


class PulsedLight:
    """Draws only pulses of which something is detected; losses keep the law of the numbers."""

    def __init__(self, source: PulsedSource, arms: Sequence[Arm]) -> None:
        self._source, self._arms = source, arms
        at_splitter, law = source.while_on
        mean = at_splitter * total_share(arms)
        self._pulses = LitPulses(source.period_ps, law.any(mean))
        self._tail = law.tail(mean)

    def lit(self, begin_ps: int, end_ps: int, rng: np.random.Generator) -> NDArray[np.int64]:
        """Numbers of the pulses of the interval with a detected photon, rising."""
        return self._pulses.draw(begin_ps, end_ps, rng)

    def draw(self, begin_ps: int, length_ps: int, rng: np.random.Generator) -> Photons:
        """The photons of the pulses of one step."""
        lit = self.lit(begin_ps, begin_ps + length_ps, rng)
        if lit.size == 0:
            return no_photons()
        more = draw_numbers(self._tail, lit.size, rng) - 1
        lit = np.concatenate((lit, np.repeat(lit, more)))
        offsets = (pulse_times_ps(lit, self._source.period_ps) - begin_ps).astype(np.float64)
        offsets += self._source.decay_ps * rng.standard_exponential(lit.size)
        return Photons(offsets, spread(lit.size, self._arms, rng))
