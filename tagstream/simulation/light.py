"""What every kind of light must offer, and how the detectors look from the splitter."""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import hypot
from typing import NamedTuple, Protocol

import numpy as np
from numpy.typing import NDArray

from tagstream.settings.section import Section


@dataclass(frozen=True, slots=True)
class Arm:
    """One detector as the light sees it.

    port: the port of the splitter it looks at. share: the probability that a photon at the
    splitter goes to that port and is detected, before dead time.
    """

    port: str
    share: float
    jitter_sigma_ps: float = 0.0
    dead_time_ps: int = 0
    dark_rate_hz: float = 0.0

    def light_fraction(self, photon_rate_hz: float) -> float:
        """The fraction of its counts that are photons and not dark counts."""
        photons = photon_rate_hz * self.share
        return photons / (photons + self.dark_rate_hz) if photons > 0 else 0.0


def joint_sigma_ps(a: Arm, b: Arm) -> float:
    """Standard deviation of the jitter of a lag between two arms."""
    return hypot(a.jitter_sigma_ps, b.jitter_sigma_ps)


class Photons(NamedTuple):
    """Photons that will be detected, in any order.

    offsets_ps: float64, n, after the beginning of the step, not before it; may pass its end.
    arms: uint8, n, index of the arm.
    """

    offsets_ps: NDArray[np.float64]
    arms: NDArray[np.uint8]


class Light(Protocol):
    """Draws detected photons step by step; remembers what the next step needs.

    Losses are applied before drawing, so that the cost goes with what is detected.
    """

    def draw(self, begin_ps: int, length_ps: int, rng: np.random.Generator) -> Photons: ...


class Source(Section, ABC):
    """The [source] section of a scenario, and all that follows from its keys.

    `g2_measured` and `registered_rate_hz` are what a right analysis of the tags finds.
    """

    @property
    def pulse_period(self) -> Fraction | None:
        """The period in ps of pulsed light, else None."""
        return None

    @property
    @abstractmethod
    def photon_rate_hz(self) -> float:
        """Mean number of photons per second at the splitter."""

    @property
    @abstractmethod
    def memory_ps(self) -> float:
        """The longest time constant: photons much further apart are independent."""

    @property
    @abstractmethod
    def light_g2_zero(self) -> float:
        """g2(0) of the light at the splitter."""

    @property
    def signal_fraction(self) -> float:
        """The fraction of the photons at the splitter that are the emitter's own."""
        return 1.0

    @property
    @abstractmethod
    def default_window_ps(self) -> float:
        """The window for which the truth states g2(0), unless the scenario names another."""

    @abstractmethod
    def light(self, arms: Sequence[Arm]) -> Light:
        """The light behind the losses on the way to `arms`, at the beginning of a run."""

    @abstractmethod
    def g2_measured(self, a: Arm, b: Arm, window_ps: float, side_peaks: tuple[int, int]) -> float:
        """g2(0) between two arms in a centred window of that full width.

        side_peaks: first and last number of the side peaks, for pulsed light.
        """

    @abstractmethod
    def registered_rate_hz(self, arm: Arm) -> float:
        """Tags per second of one arm, dark counts and dead time included."""
