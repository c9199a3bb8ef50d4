"""What every kind of light must offer, and how the detectors look from the splitter."""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from math import hypot
from typing import NamedTuple, Protocol

import numpy as np
from numpy.typing import NDArray

from tagstream.recording.layout import Mark
from tagstream.settings.section import Section

TRANSMITTED, REFLECTED, HERALD = "transmitted", "reflected", "herald"


@dataclass(frozen=True, slots=True)
class Arm:
    """One detector as the light sees it.

    port: the port of the splitter it looks at. share: the probability that a photon at the
    splitter goes to that port and is detected, before dead time. split, beside: what parts of the
    light in one input of the splitter go to this port and to the other. efficiency: of the
    detector alone.
    delay_ps, delay_drift: how much later its tags are, at the start and more in each hour.
    afterpulse_ps: mean time from the end of the dead time to an afterpulse. crosstalk_ps: how
    much later than a count of this detector the other one counts for it.
    """

    port: str
    share: float
    jitter_sigma_ps: float = 0.0
    dead_time_ps: int = 0
    dark_rate_hz: float = 0.0
    split: float = 1.0
    beside: float = 0.0
    efficiency: float = 1.0
    delay_ps: int = 0
    delay_drift: float = 0.0
    afterpulse_probability: float = 0.0
    afterpulse_ps: int = 0
    crosstalk_probability: float = 0.0
    crosstalk_ps: int = 0

    def dimmed(self, factor: float) -> Arm:
        """The same arm when only that fraction of its light is left."""
        return replace(self, share=self.share * factor, efficiency=self.efficiency * factor)

    def light_fraction(self, photon_rate_hz: float) -> float:
        """The fraction of its counts that are photons and not dark counts."""
        photons = photon_rate_hz * self.share
        return photons / (photons + self.dark_rate_hz) if photons > 0 else 0.0


def joint_sigma_ps(a: Arm, b: Arm) -> float:
    """Standard deviation of the jitter of a lag between two arms."""
    return hypot(a.jitter_sigma_ps, b.jitter_sigma_ps)


def arm_at(port: str, arms: Sequence[Arm]) -> Arm | None:
    """The arm at a port of the splitter, if it has a detector."""
    return next((arm for arm in arms if arm.port == port), None)


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
    def decay_ps(self) -> float:
        """Mean time from pulse to photon, of pulsed light."""
        return 0.0

    @property
    @abstractmethod
    def photon_rate_hz(self) -> float:
        """Mean number of photons per second at the splitter."""

    @property
    @abstractmethod
    def memory_ps(self) -> float:
        """The time constant with which the light that `light` begins becomes stationary."""

    @property
    @abstractmethod
    def light_g2_zero(self) -> float | None:
        """g2(0) of the light at the splitter, where that is one number."""

    @property
    def ports(self) -> tuple[str, ...]:
        """Where detectors may be."""
        return TRANSMITTED, REFLECTED

    @property
    def signal_fraction(self) -> float:
        """The fraction of the photons at the splitter that are the emitter's own."""
        return 1.0

    @property
    @abstractmethod
    def default_window_ps(self) -> float:
        """The window for which the truth states g2(0), unless the scenario names another."""

    def seen_by(self, arms: Sequence[Arm]) -> tuple[Arm, ...]:
        """The arms with their shares of all photons; given, of those in one splitter input."""
        return tuple(arms)

    def marks(self, begin_ps: int, end_ps: int) -> tuple[Mark, ...]:
        """What is set during the interval, in order of time: none, unless the source says."""
        return ()

    def known(self, arms: Sequence[Arm], window_ps: float) -> dict[str, float]:
        """Further numbers that a right analysis finds, by name; none, unless the source says."""
        return {}

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
