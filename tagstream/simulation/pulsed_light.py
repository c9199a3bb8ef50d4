"""Pulses of coherent and of thermal light."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from tagstream.simulation.number_laws import Chaotic, NumberLaw, Poissonian
from tagstream.simulation.pulsed import PromptPulses

Mean = Annotated[float, Field(ge=0, le=100, strict=True)]
Modes = Annotated[float, Field(ge=1, le=1e6, strict=True)]


class PulsedCoherent(PromptPulses):
    """Attenuated laser pulses: a Poisson number of photons in each, g2 = 1."""

    kind: Literal["pulsed-coherent"]
    photons_per_pulse: Mean

    @property
    def mean_photons(self) -> float:
        """The key photons_per_pulse."""
        return self.photons_per_pulse

    @property
    def number_law(self) -> NumberLaw:
        """Poisson."""
        return Poissonian()


class PulsedThermal(PromptPulses):
    """Pulses of thermal light, each its own draw of the intensity: g2 = 1 + 1/modes.

    The Poisson number of an intensity that is exponentially distributed is geometric, so numbers
    are drawn as such, exactly; several modes of equal strength give the negative binomial law.
    """

    kind: Literal["pulsed-thermal"]
    photons_per_pulse: Mean
    modes: Modes = 1.0

    @property
    def mean_photons(self) -> float:
        """The key photons_per_pulse."""
        return self.photons_per_pulse

    @property
    def number_law(self) -> NumberLaw:
        """Negative binomial; of one mode geometric."""
        return Chaotic(self.modes)
