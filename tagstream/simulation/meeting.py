"""Two photons that meet at a splitter, and the pulses that bring them.

A pulse of a single-photon source has one photon, which interferes, or with it a second one, which
does not: it was emitted later or elsewhere. Losses do not know which is which.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from tagstream.simulation.pulsed import LitPulses
from tagstream.simulation.pulsed_emitter import PulsedTwoLevel

FIRST, SECOND = 0, 1  # the two pulses, or inputs, of a meeting


class Comers(NamedTuple):
    """Photons that come to a splitter.

    numbers: int64, n, of the period. pulses: uint8, n, FIRST or SECOND. partners: int64, n,
    position of the photon of the other pulse with which it would interfere, -1: none.
    """

    numbers: NDArray[np.int64]
    pulses: NDArray[np.uint8]
    partners: NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class Survivors:
    """Probabilities of what losses leave of one pulse."""

    first_only: float
    second_only: float
    both: float

    @classmethod
    def of(cls, one: float, two: float, share: float) -> Survivors:
        """Of a pulse that has one or two photons so often, each left with probability `share`."""
        lone = two * share * (1 - share)
        return cls(one * share + lone, lone, two * share**2)

    @property
    def chances(self) -> NDArray[np.float64]:
        """Of nothing, the one that interferes, the other, and both: bits of the position."""
        some = self.first_only, self.second_only, self.both
        return np.array([1 - sum(some), *some])


class PulsePairs:
    """Draws periods of two equal pulses of which something is detected."""

    def __init__(self, source: PulsedTwoLevel, share: float) -> None:
        chances = Survivors.of(source.p_one, source.p_two, share).chances
        joint = np.outer(chances, chances).ravel()[1:]  # position: 4 x FIRST + SECOND
        p_any = float(joint.sum())
        self._pulses = LitPulses(source.period_ps, p_any)
        self._bounds = np.cumsum(joint)[:-1] / max(p_any, 1e-300)

    def draw(self, begin_ps: int, end_ps: int, rng: np.random.Generator) -> Comers:
        """The photons of all periods that begin in the interval."""
        lit = self._pulses.draw(begin_ps, end_ps, rng)
        codes = 1 + np.searchsorted(self._bounds, rng.random(lit.size), side="right")
        groups = [np.flatnonzero(codes >> bit & 1) for bit in (2, 0, 3, 1)]
        firsts, seconds = groups[:2]  # the photons that interfere, of both pulses
        numbers = np.concatenate([lit[group] for group in groups])
        pulses = [np.full(group.size, n % 2, np.uint8) for n, group in enumerate(groups)]
        partners = np.full(numbers.size, -1, np.int64)
        _, in_first, in_second = np.intersect1d(
            firsts, seconds, assume_unique=True, return_indices=True
        )
        in_second = in_second + firsts.size
        partners[in_first], partners[in_second] = in_second, in_first
        return Comers(numbers, np.concatenate(pulses), partners)


def bunched(
    reflected: NDArray[np.bool_],
    meets: NDArray[np.int64],
    chances: NDArray[np.float64],
    rng: np.random.Generator,
) -> NDArray[np.bool_]:
    """Whether each photon is reflected, when two and two of them interfere.

    meets: int64, 2 x m, positions of the two. reflected: drawn for each photon alone, with the
    same probability R (T = 1 - R; losses apart). chances: for each meeting 2 R T M / (R^2 + T^2),
    M the overlap. Two photons from different inputs leave by different outputs when both are or
    neither is reflected. So large a part of these coincidences becomes two photons in one output:
    R^2 + T^2 - 2 R T M are left, and each output has two with R T (1 + M), as two-photon
    interference makes it (Hong, Ou, Mandel, PRL 59, 2044 (1987)).
    """
    first, second = meets
    apart = reflected[first] == reflected[second]
    joins = apart & (rng.random(first.size) < chances)
    changed = np.where(rng.random(first.size) < 0.5, first, second)[joins]
    after = reflected.copy()
    after[changed] = ~after[changed]
    return after


def bunching_chance(reflectance: float, transmittance: float) -> float:
    """2 R T / (R^2 + T^2): the highest visibility that a splitter allows."""
    squares = reflectance**2 + transmittance**2
    return 2 * reflectance * transmittance / squares if squares > 0 else 0.0
