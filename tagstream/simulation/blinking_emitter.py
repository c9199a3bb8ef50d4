"""Emitters that blink: now and then they are dark for a while, whatever the excitation."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from pydantic import Field

from tagstream.simulation.emitter import EmitterLight, TwoLevel
from tagstream.simulation.jitter import mean_decay
from tagstream.simulation.light import Arm, Light
from tagstream.simulation.number_laws import AtMostTwo
from tagstream.simulation.pulsed import PulsedLight
from tagstream.simulation.pulsed_emitter import PulsedTwoLevel
from tagstream.simulation.pulses import pulse_times_ps
from tagstream.simulation.quantities import TimeConstantPs
from tagstream.simulation.telegraph import Telegraph, TelegraphState


class BlinkingEmitter(TwoLevel):
    """A two-level emitter under continuous excitation whose light a random telegraph lets pass.

    The emitter's own g2 = [1 - exp(-|t|/t0)] [1 + (1-p)/p exp(-|t|/tb)], p the fraction of time
    on, 1/tb = 1/on + 1/off: bunched at the blinking time, antibunched at zero.
    """

    kind: Literal["blinking-emitter"]  # `rate` is that while on
    on_ps: TimeConstantPs = Field(alias="on_time")
    off_ps: TimeConstantPs = Field(alias="off_time")

    @property
    def telegraph(self) -> Telegraph:
        """How it blinks."""
        return Telegraph(self.on_ps, self.off_ps)

    @property
    def emitted_hz(self) -> float:
        """The rate while on times the fraction of the time that it is on."""
        return self.rate_hz * self.telegraph.share

    def mean_excess(self, window_ps: float, sigma_ps: float) -> float:
        """Mean of g2 - 1 over a centred window: the product above, term by term."""
        blinks = self.telegraph
        both_ps = 1 / (1 / self.t0_ps + 1 / blinks.time_ps)
        dip, bunching, product = (
            mean_decay(window_ps, scale, sigma_ps)
            for scale in (self.t0_ps, blinks.time_ps, both_ps)
        )
        return self.signal_fraction**2 * (blinks.depth * (bunching - product) - dip)

    def light(self, arms: Sequence[Arm]) -> Light:
        """The light while on, and the background at all times."""
        return _BlinkingLight(self, arms)

    def known(self, arms: Sequence[Arm], window_ps: float) -> dict[str, float]:
        """g2_fit_*: dip t1, bunching a and t2; on_fraction."""
        known = super().known(arms, window_ps)
        return known | {
            "g2_fit_a": self.telegraph.depth,
            "g2_fit_t2_ps": self.telegraph.time_ps,
            "on_fraction": self.telegraph.share,
        }


class PulsedBlinkingEmitter(PulsedTwoLevel):
    """A pulsed emitter that a random telegraph turns on and off.

    Peaks m periods away are 1 + (1-p)/p exp(-m T/tb) times the mean, the central one g2 / p.
    """

    kind: Literal["pulsed-blinking-emitter"]  # numbers of photons are those while on
    on_ps: TimeConstantPs = Field(alias="on_time")
    off_ps: TimeConstantPs = Field(alias="off_time")

    @property
    def telegraph(self) -> Telegraph:
        """How it blinks."""
        return Telegraph(self.on_ps, self.off_ps)

    @property
    def mean_photons(self) -> float:
        """Per pulse, dark pulses included."""
        return self.photons_per_pulse * self.telegraph.share

    @property
    def number_law(self) -> AtMostTwo:
        """Of all pulses, dark ones included: g2 is that against peaks far away."""
        return AtMostTwo(self.g2_zero / self.telegraph.share)

    @property
    def while_on(self) -> tuple[float, AtMostTwo]:
        """As the keys say."""
        return self.photons_per_pulse, AtMostTwo(self.g2_zero)

    def other_pulses(self, apart: NDArray[np.int64]) -> NDArray[np.float64]:
        """The heights of the side peaks, as above."""
        blinks, period = self.telegraph, float(self.period_ps)
        return 1 + blinks.depth * np.exp(-np.abs(apart) * period / blinks.time_ps)

    def light(self, arms: Sequence[Arm]) -> Light:
        """The pulses while on."""
        return _BlinkingPulses(self, arms)

    def known(self, arms: Sequence[Arm], window_ps: float) -> dict[str, float]:
        """g2_zero_near, g2_zero_far: against the next peaks, and against peaks far away."""
        near = float(self.other_pulses(np.array([1]))[0])
        return {
            "g2_zero_near": self.light_g2_zero / near,
            "g2_zero_far": self.light_g2_zero,
            "side_peaks_near_to_far": near,
            "blinking_time_ps": self.telegraph.time_ps,
            "on_fraction": self.telegraph.share,
        }


class _BlinkingLight(EmitterLight):
    def __init__(self, source: BlinkingEmitter, arms: Sequence[Arm]) -> None:
        super().__init__(source, arms)
        self._state = TelegraphState(source.telegraph)

    def emitted(self, length_ps: int, rng: np.random.Generator) -> NDArray[np.float64]:
        offsets = super().emitted(length_ps, rng)
        lit: NDArray[np.float64] = offsets[self._state.is_on(offsets, length_ps, rng)]
        return lit


class _BlinkingPulses(PulsedLight):
    def __init__(self, source: PulsedBlinkingEmitter, arms: Sequence[Arm]) -> None:
        super().__init__(source, arms)
        self._state, self._period = TelegraphState(source.telegraph), source.period_ps

    def lit(self, begin_ps: int, end_ps: int, rng: np.random.Generator) -> NDArray[np.int64]:
        numbers = super().lit(begin_ps, end_ps, rng)
        offsets = (pulse_times_ps(numbers, self._period) - begin_ps).astype(np.float64)
        lit: NDArray[np.int64] = numbers[self._state.is_on(offsets, end_ps - begin_ps, rng)]
        return lit
