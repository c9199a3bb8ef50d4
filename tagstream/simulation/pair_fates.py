"""What becomes of photon pairs whose one half heralds the other, and what detectors make of it.

Of a pair one photon goes to the herald's detector, the other to the splitter. Pairs that nobody
detects are never drawn.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from itertools import chain, combinations
from math import exp
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from tagstream.simulation.light import HERALD, Arm
from tagstream.units import PS_PER_S


class Fates(NamedTuple):
    """Of detected pairs. heralds: uint8, n, index of the herald's arm. signals: of the other."""

    heralds: NDArray[np.uint8]
    signals: NDArray[np.uint8]


NOWHERE = 255  # the photon is not detected


class PairFates:
    """Draws where the photons of a pair are detected, for pairs of which any is."""

    def __init__(self, arms: Sequence[Arm]) -> None:
        firsts, seconds = _choices(arms, herald=True), _choices(arms, herald=False)
        table = [(p * q, i, j) for i, p in firsts for j, q in seconds if (i, j) != (NOWHERE,) * 2]
        chances = np.array([chance for chance, _, _ in table])
        self.p_detected = detected(arms)
        self._bounds = np.cumsum(chances)[:-1] / max(chances.sum(), 1e-300)
        self._heralds = np.array([i for _, i, _ in table], np.uint8)
        self._signals = np.array([j for _, _, j in table], np.uint8)

    def draw(self, count: int, rng: np.random.Generator) -> Fates:
        """The fates of `count` pairs."""
        which = np.searchsorted(self._bounds, rng.random(count), side="right")
        return Fates(self._heralds[which], self._signals[which])


def _choices(arms: Sequence[Arm], herald: bool) -> list[tuple[int, float]]:
    found = [(i, arm.share) for i, arm in enumerate(arms) if (arm.port == HERALD) == herald]
    return [(NOWHERE, 1 - sum(share for _, share in found)), *found]


def detected(arms: Sequence[Arm]) -> float:
    """The probability that any of these arms detects a photon of a pair."""
    herald = sum(arm.share for arm in arms if arm.port == HERALD)
    signal = sum(arm.share for arm in arms if arm.port != HERALD)
    return herald + signal - herald * signal


class Clicks:
    """Probabilities of clicks in one pulse, exact at any efficiency and number of pairs.

    none: the probability that a pulse has no pair when so large a share of pairs is counted
    (for a Poisson number of mean mu: exp(-mu share)). gate_ps: the time of a pulse in which a
    dark count counts as a click.
    """

    def __init__(self, none: Callable[[float], float], gate_ps: float) -> None:
        self._none, self._gate_s = none, gate_ps / PS_PER_S

    def silent(self, arms: Sequence[Arm]) -> float:
        """That none of these arms clicks."""
        dark = sum(arm.dark_rate_hz for arm in arms) * self._gate_s
        return self._none(detected(arms)) * exp(-dark)

    def all_of(self, *arms: Arm) -> float:
        """That all of these arms click: by inclusion and exclusion of those that do not."""
        subsets = chain.from_iterable(combinations(arms, n) for n in range(len(arms) + 1))
        return sum((-1.0) ** len(subset) * self.silent(subset) for subset in subsets)

    def heralded_g2(self, herald: Arm, a: Arm, b: Arm) -> float:
        """P(h, a, b) P(h) / (P(h, a) P(h, b))."""
        single, triple = self.all_of(herald), self.all_of(herald, a, b)
        return triple * single / (self.all_of(herald, a) * self.all_of(herald, b))

    def g2(self, a: Arm, b: Arm) -> float:
        """P(a, b) / (P(a) P(b)): between photons of different kind the ratio C/A of coincidences
        to accidentals."""
        return self.all_of(a, b) / (self.all_of(a) * self.all_of(b))

    def partner_share(self, of: Arm, at: Arm) -> float:
        """P(of, at) / P(of): of the clicks of one arm, those with a partner at the other."""
        return self.all_of(of, at) / self.all_of(of)
