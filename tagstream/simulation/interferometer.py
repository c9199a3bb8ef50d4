"""A pulsed single-photon source behind an interferometer with unbalanced arms: five peaks."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from pydantic import Field, model_validator

from tagstream.settings.quantities import PositiveTimePs
from tagstream.simulation.behind_splitter import Outputs
from tagstream.simulation.light import TRANSMITTED, Arm, Light, Photons
from tagstream.simulation.meeting import FIRST, PulsePairs, bunched, bunching_chance
from tagstream.simulation.pulses import pulse_times_ps
from tagstream.simulation.two_pulses import Overlap, TwoPulses


class UnbalancedInterferometer(TwoPulses):
    """Two pulses in each period, as far apart as the arms of the interferometer are unlike.

    Both of its splitters have the transmittance T and reflectance R of the scenario. The short arm
    begins with transmission at the first one. Where the first pulse took the long arm and the
    second the short one they meet and interfere, with (1 - e)^2 of their overlap when the fringe
    contrast is 1 - e. Second photons of a pulse do not interfere. Areas of peaks are true; that
    photons which differ in time do not bunch alike is not modelled.
    """

    kind: Literal["unbalanced-interferometer"]
    separation_ps: PositiveTimePs = Field(alias="separation")  # of the pulses, and of the arms
    contrast: Overlap = 1.0

    @model_validator(mode="after")
    def _check_separation(self) -> UnbalancedInterferometer:
        if 5 * self.separation_ps > self.period_ps:
            raise ValueError("`separation` of at most a fifth of `period`, to tell five peaks")
        return self

    @property
    def memory_ps(self) -> float:
        """The lifetime and the longest way."""
        return self.decay_ps + 2 * self.separation_ps

    @property
    def default_window_ps(self) -> float:
        """As wide as peaks are apart."""
        return float(self.separation_ps)

    @property
    def offsets_ps(self) -> NDArray[np.float64]:
        """Five peaks."""
        return np.arange(-2.0, 3.0) * self.separation_ps

    @property
    def meeting_overlap(self) -> float:
        """(1-e)^2 V of pairs of any two photons."""
        return self.contrast**2 * self.overlap * self.interfering

    def seen_by(self, arms: Sequence[Arm]) -> tuple[Arm, ...]:
        """A photon leaves by one output with T^2 + R^2, by the other with 2 R T."""
        return tuple(replace(arm, share=sum(_ways(arm)) * arm.efficiency) for arm in arms)

    def pairs(self, a: Arm, b: Arm) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """R, T, g, e, V as in Santori et al., Nature 419, 594 (2002); a at "transmitted":

        A1 = R^3 T, A2 = R^3 T (1+2g) + R T^3, A3 = (R^3 T + R T^3)(1+2g) - 2 (1-e)^2 R^2 T^2 V,
        A4 = R^3 T + R T^3 (1+2g), A5 = R T^3. Of unlike periods every peak is the product of
        the mean photons of both detectors.
        """
        t, r = (a.split, a.beside) if a.port == TRANSMITTED else (a.beside, a.split)
        many, strong, weak = 1 + 2 * self.g2_zero, r**3 * t, r * t**3
        third = (strong + weak) * many - 2 * self.meeting_overlap * r**2 * t**2
        central = np.array([strong, strong * many + weak, third, strong + weak * many, weak])
        others = np.convolve(_slots(b), _slots(a)[::-1])
        return central[:: 1 if a.port == TRANSMITTED else -1], others

    def own_pairs(self, arm: Arm) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Pairs of one pulse, 2 g of them, take one way or two; of two pulses they may meet."""
        short, long = _ways(arm)
        same, unlike, g = short**2 + long**2, short * long, self.g2_zero
        meeting = self.meeting_overlap * (arm.split * arm.beside) ** 2
        first, second = unlike, same + 2 * g * unlike
        third = 2 * (g * same + unlike + meeting)
        slots = _slots(arm)
        return np.array([first, second, third, second, first]), np.convolve(slots, slots[::-1])

    def known(self, arms: Sequence[Arm], window_ps: float) -> dict[str, float]:
        """The five peaks in windows, from the first detector of the file to the second.

        hom_visibility_five_peaks: 1 - 2 A3 / (A2 + A4). hom_visibility: V by Santori's formula,
        lower than the key overlap because second photons do not interfere. indistinguishability:
        the key.
        """
        known = {"indistinguishability": self.overlap}
        if len(arms) != 2 or min(arm.share for arm in arms) == 0:
            return known
        comb = self.comb(arms[0], arms[1])
        peaks = [comb.counts(float(at), window_ps) for at in comb.offsets_ps]
        known |= {f"peak_{n}": 2 * p / (peaks[0] + peaks[4]) for n, p in enumerate(peaks, 1)}
        known["hom_visibility_five_peaks"] = 1 - 2 * peaks[2] / (peaks[1] + peaks[3])
        return known | {"hom_visibility": self.overlap * self.interfering}

    def light(self, arms: Sequence[Arm]) -> Light:
        """The photons that leave the interferometer."""
        return _InterferometerLight(self, arms)


def _ways(arm: Arm) -> tuple[float, float]:
    """A photon's probabilities to come to this output by the short and by the long arm."""
    if arm.port == TRANSMITTED:
        return arm.split**2, arm.beside**2
    return arm.split * arm.beside, arm.split * arm.beside


def _slots(arm: Arm) -> NDArray[np.float64]:
    """Mean photons at this output with no, one and two delays: the second pulse has one more."""
    short, long = _ways(arm)
    return np.array([short, short + long, long])


class _InterferometerLight:
    def __init__(self, source: UnbalancedInterferometer, arms: Sequence[Arm]) -> None:
        self._source, self._outputs = source, Outputs(arms)
        two_passes = self._outputs.common * self._outputs.kept
        self._pairs = PulsePairs(source, two_passes)
        r = self._outputs.reflected
        self._chance = bunching_chance(r, 1 - r) * source.overlap * source.contrast**2

    def draw(self, begin_ps: int, length_ps: int, rng: np.random.Generator) -> Photons:
        comers = self._pairs.draw(begin_ps, begin_ps + length_ps, rng)
        count = comers.numbers.size
        long = rng.random(count) < self._outputs.reflected
        reflected = rng.random(count) < self._outputs.reflected
        meets = np.flatnonzero((comers.pulses == FIRST) & long & (comers.partners >= 0))
        meets = meets[~long[comers.partners[meets]]]
        chances = np.full(meets.size, self._chance)
        reflected = bunched(reflected, np.stack((meets, comers.partners[meets])), chances, rng)
        offsets = (pulse_times_ps(comers.numbers, self._source.period_ps) - begin_ps).astype(float)
        offsets += (comers.pulses + long.astype(np.int64)) * float(self._source.separation_ps)
        offsets += self._source.decay_ps * rng.standard_exponential(count)
        return self._outputs.detected(offsets, (long ^ reflected).astype(np.uint8), rng)
