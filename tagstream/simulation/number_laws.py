"""How many photons, or pairs, a pulse has. Losses change the mean of each law and nothing else.

So whatever a detector makes of the pulses follows from the probability of no photon at all.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import dataclass
from math import exp, expm1, log1p

import numpy as np
from numpy.typing import NDArray
from scipy.special import betainc, gammainc

_NEVER = 1e-17  # a number this improbable is not drawn


class NumberLaw(ABC):
    """A law of photon numbers, closed under loss."""

    @property
    @abstractmethod
    def g2(self) -> float:
        """<n (n - 1)> / <n>^2."""

    @abstractmethod
    def none(self, mean: float) -> float:
        """The probability that a pulse has no photon."""

    @abstractmethod
    def any(self, mean: float) -> float:
        """The probability that a pulse has any, also where it is tiny."""

    @abstractmethod
    def tail(self, mean: float) -> NDArray[np.float64]:
        """The probabilities of more than 1, 2, ... photons in a pulse that has any."""


def draw_numbers(
    tail: NDArray[np.float64], count: int, rng: np.random.Generator
) -> NDArray[np.int64]:
    """Photon numbers of `count` pulses that have any, int64."""
    return 1 + np.searchsorted(-tail, -rng.random(count), side="left").astype(np.int64)


@dataclass(frozen=True, slots=True)
class AtMostTwo(NumberLaw):
    """Two photons with probability g2 mean^2 / 2, else one or none."""

    of_two: float  # g2

    @property
    def g2(self) -> float:
        """As given."""
        return self.of_two

    def none(self, mean: float) -> float:
        """1 - mean + g2 mean^2 / 2."""
        return 1 - self.any(mean)

    def any(self, mean: float) -> float:
        """mean - g2 mean^2 / 2."""
        return min(mean - self.of_two * mean**2 / 2, 1.0)

    def tail(self, mean: float) -> NDArray[np.float64]:
        """One number: that of two photons."""
        any_ = self.any(mean)
        return np.array([self.of_two * mean**2 / 2 / any_ if any_ > 0 else 0.0])


@dataclass(frozen=True, slots=True)
class Poissonian(NumberLaw):
    """Photons independent of each other."""

    @property
    def g2(self) -> float:
        """1."""
        return 1.0

    def none(self, mean: float) -> float:
        """exp(-mean)."""
        return exp(-mean)

    def any(self, mean: float) -> float:
        """1 - exp(-mean)."""
        return -expm1(-mean)

    def tail(self, mean: float) -> NDArray[np.float64]:
        """Of the Poisson law."""
        numbers = np.arange(1, int(mean + 20 * mean**0.5) + 60)
        return _worth_drawing(gammainc(numbers + 1, mean), self.any(mean))


@dataclass(frozen=True, slots=True)
class Chaotic(NumberLaw):
    """Thermal light in so many modes of equal strength: the negative binomial law.

    One mode is the geometric (Bose-Einstein) law. g2 = 1 + 1/modes.
    """

    modes: float

    @property
    def g2(self) -> float:
        """1 + 1/modes."""
        return 1 + 1 / self.modes

    def none(self, mean: float) -> float:
        """(1 + mean / modes)^-modes."""
        return exp(-self.modes * log1p(mean / self.modes))

    def any(self, mean: float) -> float:
        """One minus that."""
        return -expm1(-self.modes * log1p(mean / self.modes))

    def tail(self, mean: float) -> NDArray[np.float64]:
        """Of the negative binomial law."""
        numbers = np.arange(1, int(60 * (mean + 1)) + 60)
        above = betainc(numbers + 1, self.modes, mean / (mean + self.modes))
        return _worth_drawing(above, self.any(mean))


def _worth_drawing(above: NDArray[np.float64], any_: float) -> NDArray[np.float64]:
    tail = above / any_ if any_ > 0 else np.zeros_like(above)
    return tail[: max(1, int(np.searchsorted(-tail, -_NEVER)))]
