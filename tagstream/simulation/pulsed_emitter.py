"""An emitter excited by short pulses: none, one or two photons per pulse."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from tagstream.simulation.number_laws import AtMostTwo
from tagstream.simulation.pulsed import PulsedSource
from tagstream.simulation.quantities import ShortTimePs

PhotonNumber = Annotated[float, Field(ge=0, le=2, strict=True)]
G2Zero = Annotated[float, Field(ge=0, strict=True, allow_inf_nan=False)]


class PulsedTwoLevel(PulsedSource):
    """Two photons with probability p2 = g2 mu^2 / 2, one with p1 = mu - 2 p2, mu the mean number.

    Each photon leaves after its own exponentially distributed time; pulses are independent.
    """

    photons_per_pulse: PhotonNumber  # mean, at the splitter
    g2_zero: G2Zero
    lifetime_ps: ShortTimePs = Field(0, alias="lifetime")

    @model_validator(mode="after")
    def _check_numbers(self) -> PulsedTwoLevel:
        if self.p_one < -1e-12:
            raise ValueError(
                "`g2_zero` times `photons_per_pulse` of at most 1:"
                " more needs pulses of three photons"
            )
        if self.p_one + self.p_two > 1 + 1e-12:
            raise ValueError(
                "`photons_per_pulse` (mu) and `g2_zero` with mu - g2 mu^2 / 2 of at most 1:"
                " this is the probability that a pulse has any photon"
            )
        return self

    @property
    def p_two(self) -> float:
        """The probability of two photons at the splitter."""
        return self.g2_zero * self.photons_per_pulse**2 / 2

    @property
    def p_one(self) -> float:
        """The probability of one photon at the splitter."""
        return self.photons_per_pulse - 2 * self.p_two

    @property
    def mean_photons(self) -> float:
        """The key photons_per_pulse."""
        return self.photons_per_pulse

    @property
    def number_law(self) -> AtMostTwo:
        """None, one or two."""
        return AtMostTwo(self.g2_zero)

    @property
    def decay_ps(self) -> float:
        """The lifetime."""
        return float(self.lifetime_ps)


class PulsedEmitter(PulsedTwoLevel):
    """The emitter alone."""

    kind: Literal["pulsed-emitter"]
