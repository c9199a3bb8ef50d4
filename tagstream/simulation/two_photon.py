"""Two equal single-photon sources, one at each input of a splitter."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from pydantic import Field

from tagstream.recording.layout import Mark
from tagstream.settings.quantities import PositiveTimePs
from tagstream.simulation.behind_splitter import Outputs
from tagstream.simulation.light import Arm, Light, Photons
from tagstream.simulation.meeting import FIRST, PulsePairs, bunched, bunching_chance
from tagstream.simulation.pulses import pulse_times_ps
from tagstream.simulation.two_pulses import TwoPulses

KEY, PARALLEL, CROSSED = "polarisation", "parallel", "crossed"


class TwoPhotonInterference(TwoPulses):
    """A pulse in each input each period; their polarisation is parallel or crossed, by turns.

    Parallel photons interfere with the given overlap, crossed ones not at all; marks
    `polarisation` say which it is. Second photons of a pulse do not interfere. The inputs share
    no pulses: so it is also with one source whose pulses are split, and half of them delayed by
    more periods than the analysis looks at.
    """

    kind: Literal["two-photon-interference"]
    alternate_ps: PositiveTimePs | None = Field(None, alias="alternate")  # absent: always parallel

    @property
    def offsets_ps(self) -> NDArray[np.float64]:
        """One peak."""
        return np.zeros(1)

    def seen_by(self, arms: Sequence[Arm]) -> tuple[Arm, ...]:
        """Half of all photons come by each input, and leave by this output with T or with R."""
        return tuple(
            replace(arm, share=(arm.split + arm.beside) / 2 * arm.efficiency) for arm in arms
        )

    def is_parallel(self, time_ps: int) -> bool:
        """The polarisation at a time: parallel first."""
        return self.alternate_ps is None or time_ps // self.alternate_ps % 2 == 0

    def marks(self, begin_ps: int, end_ps: int) -> tuple[Mark, ...]:
        """One at the start, and at each turn."""
        turn = self.alternate_ps or max(end_ps, 1)
        times = range(-(-begin_ps // turn) * turn, end_ps, turn)
        names = {True: PARALLEL, False: CROSSED}
        return tuple(Mark(time, KEY, names[self.is_parallel(time)]) for time in times)

    @property
    def mean_overlap(self) -> float:
        """Of both polarisations when they alternate."""
        return self.overlap if self.alternate_ps is None else self.overlap / 2

    def pairs(self, a: Arm, b: Arm) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Of both polarisations together."""
        return self._pairs_at(a, self.mean_overlap)

    def _pairs_at(
        self, arm: Arm, overlap: float
    ) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """R^2 + T^2 + 2 R T (g - V) against (R + T)^2."""
        r, t = arm.beside, arm.split
        central = r**2 + t**2 + 2 * r * t * (self.g2_zero - overlap * self.interfering)
        return np.array([central]), np.array([(r + t) ** 2])

    def own_pairs(self, arm: Arm) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """g (R^2 + T^2) + 2 R T (1 + V) against (R + T)^2."""
        r, t = arm.beside, arm.split
        both = 1 + self.mean_overlap * self.interfering
        central = self.g2_zero * (r**2 + t**2) + 2 * r * t * both
        return np.array([central]), np.array([(r + t) ** 2])

    def known(self, arms: Sequence[Arm], window_ps: float) -> dict[str, float]:
        """Honest raw visibilities by three definitions, in the window, with dark counts.

        hom_visibility: 1 - A_par / A_cross. hom_visibility_contrast: (A_cross - A_par) /
        (A_cross + A_par). hom_visibility_train: 1 - 2 A_par / A_far. indistinguishability: the
        key overlap; M = (V + g) / (1 - g) (Ollivier et al., PRL 126, 063602 (2021)) gives it from
        the train when nearly every pulse has a photon.
        """
        known = {"indistinguishability": self.overlap}
        if len(arms) != 2 or min(arm.share for arm in arms) == 0:
            return known
        parallel, crossed = (self._ratio(arms, window_ps, v) for v in (self.overlap, 0.0))
        return known | {
            "g2_zero_parallel": parallel,
            "g2_zero_crossed": crossed,
            "hom_visibility": 1 - parallel / crossed,
            "hom_visibility_contrast": (crossed - parallel) / (crossed + parallel),
            "hom_visibility_train": 1 - 2 * parallel,
        }

    def _ratio(self, arms: Sequence[Arm], window_ps: float, overlap: float) -> float:
        """Counts in the window at zero over those at other pulses, at that overlap."""
        comb = replace(self.comb(*arms), central=self._pairs_at(arms[0], overlap)[0])
        return comb.ratio(window_ps, (1, 8))

    def light(self, arms: Sequence[Arm]) -> Light:
        """The photons that leave the splitter."""
        return _TwoPhotonLight(self, arms)


class _TwoPhotonLight:
    def __init__(self, source: TwoPhotonInterference, arms: Sequence[Arm]) -> None:
        self._source, self._outputs = source, Outputs(arms)
        self._pairs = PulsePairs(source, self._outputs.common)
        r = self._outputs.reflected
        self._chance = bunching_chance(r, 1 - r) * source.overlap

    def draw(self, begin_ps: int, length_ps: int, rng: np.random.Generator) -> Photons:
        comers = self._pairs.draw(begin_ps, begin_ps + length_ps, rng)
        pulses_ps = pulse_times_ps(comers.numbers, self._source.period_ps)
        reflected = rng.random(comers.numbers.size) < self._outputs.reflected
        meets = np.flatnonzero((comers.pulses == FIRST) & (comers.partners >= 0))
        chances = np.where(self._parallel(pulses_ps[meets]), self._chance, 0.0)
        reflected = bunched(reflected, np.stack((meets, comers.partners[meets])), chances, rng)
        offsets = (pulses_ps - begin_ps).astype(np.float64)
        offsets += self._source.decay_ps * rng.standard_exponential(offsets.size)
        return self._outputs.detected(offsets, (comers.pulses ^ reflected).astype(np.uint8), rng)

    def _parallel(self, times_ps: NDArray[np.int64]) -> NDArray[np.bool_]:
        turn = self._source.alternate_ps
        if turn is None:
            return np.ones(times_ps.size, np.bool_)
        is_parallel: NDArray[np.bool_] = times_ps // np.int64(turn) % 2 == 0
        return is_parallel
