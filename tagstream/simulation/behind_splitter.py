"""Which detector sees a photon that leaves the splitter by one of its two outputs."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from tagstream.simulation.light import REFLECTED, TRANSMITTED, Arm, Photons, arm_at


class Outputs:
    """The two outputs: 0 is where the first input is transmitted to, 1 where it is reflected to.

    Losses common to both are taken before photons are drawn: `common` is the share of photons in
    one input that the better detector sees. What the other one lacks is taken here.
    """

    def __init__(self, arms: Sequence[Arm]) -> None:
        ports = [arm_at(TRANSMITTED, arms), arm_at(REFLECTED, arms)]
        splits = [arm.split if arm else 0.0 for arm in ports]
        self.reflected = splits[1] / sum(splits) if sum(splits) > 0 else 0.0
        efficiencies = np.array([arm.efficiency if arm else 0.0 for arm in ports])
        best = float(efficiencies.max())
        self.kept = sum(splits)  # of one pass through the splitter
        self.common = best * self.kept
        self._relative = efficiencies / best if best > 0 else efficiencies
        self._arms = np.array([arms.index(arm) if arm else 0 for arm in ports], np.uint8)

    def detected(
        self, offsets_ps: NDArray[np.float64], outputs: NDArray[np.uint8], rng: np.random.Generator
    ) -> Photons:
        """The photons at the outputs that the detectors there see."""
        seen = rng.random(outputs.size) < self._relative[outputs]
        return Photons(offsets_ps[seen], self._arms[outputs[seen]])
