"""What sources have in common whose photons come in two equal pulses each period and interfere."""

from __future__ import annotations

from abc import abstractmethod
from math import sqrt
from typing import Annotated

import numpy as np
from numpy.typing import NDArray
from pydantic import Field

from tagstream.simulation.comb import Comb
from tagstream.simulation.light import Arm, joint_sigma_ps
from tagstream.simulation.pulsed import check_window
from tagstream.simulation.pulsed_emitter import PulsedTwoLevel
from tagstream.units import PS_PER_S

Overlap = Annotated[float, Field(ge=0, le=1, strict=True)]


class TwoPulses(PulsedTwoLevel):
    """Two pulses of the same kind; the keys say what one of them has."""

    overlap: Overlap

    @property
    def photon_rate_hz(self) -> float:
        """Mean number of photons per second, of both pulses."""
        return 2 * self.photons_per_pulse * PS_PER_S / float(self.period_ps)

    @property
    def interfering(self) -> float:
        """The part of the pairs from two pulses of which both can interfere: (p1 + p2)^2 / mu^2."""
        mean = self.photons_per_pulse
        return (self.number_law.any(mean) / mean) ** 2 if mean > 0 else 1.0

    @property
    @abstractmethod
    def offsets_ps(self) -> NDArray[np.float64]:
        """Of the peaks from the middle of their cluster."""

    @abstractmethod
    def pairs(self, a: Arm, b: Arm) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Of two detectors pairs in the central peaks, and in those of two unlike periods."""

    @abstractmethod
    def own_pairs(self, arm: Arm) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """The same of one detector with itself, each pair of photons counted both ways."""

    def comb(self, a: Arm, b: Arm) -> Comb:
        """The histogram of lags from a to b."""
        return self._comb(self.pairs(a, b), joint_sigma_ps(a, b), self._light_pairs(a, b))

    def _comb(
        self,
        pairs: tuple[NDArray[np.float64], NDArray[np.float64]],
        sigma_ps: float,
        light_pairs: float,
    ) -> Comb:
        return Comb(
            float(self.period_ps), self.offsets_ps, *pairs, (self.decay_ps, sigma_ps), light_pairs
        )

    def g2_measured(
        self, a: Arm, b: Arm, window_ps: float, side_peaks: tuple[int, int] = (1, 8)
    ) -> float:
        """Counts in the window at zero over those so many periods away."""
        check_window(window_ps, float(self.period_ps))
        return self.comb(a, b).ratio(window_ps, side_peaks)

    def registered_rate_hz(self, arm: Arm) -> float:
        """r / (1 + M): M counts are expected in the dead time after a count, from the comb.

        Right to first order in the counts per period.
        """
        rate_hz = self.photon_rate_hz * arm.share + arm.dark_rate_hz
        if arm.dead_time_ps == 0 or arm.share == 0:
            return rate_hz / (1 + rate_hz * arm.dead_time_ps / PS_PER_S)
        sigma_ps = sqrt(2) * arm.jitter_sigma_ps
        comb = self._comb(self.own_pairs(arm), sigma_ps, self._light_pairs(arm, arm))
        per_period = rate_hz * float(self.period_ps) / PS_PER_S
        return rate_hz / (1 + per_period * comb.counts(0.0, 2.0 * arm.dead_time_ps) / 2)
