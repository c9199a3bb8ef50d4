"""Photon pairs made by pulses: one photon heralds the other."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from typing import Annotated, Literal

import numpy as np
from pydantic import Field

from tagstream.simulation.draws import no_photons
from tagstream.simulation.light import (
    HERALD,
    REFLECTED,
    TRANSMITTED,
    Arm,
    Light,
    Photons,
    arm_at,
)
from tagstream.simulation.number_laws import Chaotic, NumberLaw, Poissonian, draw_numbers
from tagstream.simulation.pair_fates import NOWHERE, Clicks, Fates, PairFates
from tagstream.simulation.pulsed import LitPulses, PromptPulses
from tagstream.simulation.pulses import pulse_times_ps

Mean = Annotated[float, Field(ge=0, le=10, strict=True)]
LAWS: dict[str, NumberLaw] = {"poisson": Poissonian(), "thermal": Chaotic(1.0)}


class PulsedPairs(PromptPulses):
    """Pairs of prompt photons: a Poisson number in each pulse, or that of one thermal mode.

    The truth is that of clicks, which holds when the dead time of each detector outlasts a pulse
    and ends before the next; a longer one changes it in first order of the clicks per pulse.
    """

    kind: Literal["pulsed-pairs"]
    pairs_per_pulse: Mean
    statistics: Literal["poisson", "thermal"] = "poisson"

    @property
    def ports(self) -> tuple[str, ...]:
        """Those of the splitter, and the herald's detector."""
        return TRANSMITTED, REFLECTED, HERALD

    @property
    def mean_photons(self) -> float:
        """Pairs per pulse: so many photons go to the herald, so many to the splitter."""
        return self.pairs_per_pulse

    @property
    def number_law(self) -> NumberLaw:
        """As the key statistics says."""
        return LAWS[self.statistics]

    def light(self, arms: Sequence[Arm]) -> Light:
        """The detected photons of the pairs."""
        return _PairPulses(self, arms)

    def known(self, arms: Sequence[Arm], window_ps: float) -> dict[str, float]:
        """What a herald makes of it; faint: in the limit of few pairs and weak detection.

        Loudon's g2 for one photon of the pair with the other, and for signals that are heralded.
        """
        if self.pairs_per_pulse == 0:
            return {}
        clicks = Clicks(lambda share: self.number_law.none(self.pairs_per_pulse * share), window_ps)
        herald, a, b = (arm_at(port, arms) for port in (HERALD, TRANSMITTED, REFLECTED))
        known = {"g2_zero_heralded_faint": self._faint_heralded()}
        known["g2_zero_signal_herald_faint"] = self.number_law.g2 + 1 / self.pairs_per_pulse
        if herald and a and b and min(herald.share, a.share, b.share) > 0:
            known["g2_zero_heralded"] = clicks.heralded_g2(herald, a, b)
        return known | dict(_efficiencies(clicks, herald, [a, b]))

    def _faint_heralded(self) -> float:
        """mu (2 + mu) / (1 + mu)^2, or of one thermal mode 2 mu (2 + 3 mu) / (1 + 2 mu)^2."""
        mu = self.pairs_per_pulse
        if self.statistics == "poisson":
            return mu * (2 + mu) / (1 + mu) ** 2
        return 2 * mu * (2 + 3 * mu) / (1 + 2 * mu) ** 2


def _efficiencies(
    clicks: Clicks, herald: Arm | None, signals: list[Arm | None]
) -> Iterator[tuple[str, float]]:
    for arm in signals:
        if herald is None or arm is None or min(herald.share, arm.share) == 0:
            continue
        yield f"heralding_efficiency_{arm.port}", clicks.partner_share(herald, arm)
        yield f"heralding_efficiency_of_{arm.port}", clicks.partner_share(arm, herald)
        yield f"coincidence_to_accidental_ratio_{arm.port}", clicks.g2(herald, arm)


class _PairPulses:
    """Losses keep the law of the number of pairs, so pairs nobody detects are never drawn."""

    def __init__(self, source: PulsedPairs, arms: Sequence[Arm]) -> None:
        self._fates, self._period = PairFates(arms), source.period_ps
        mean = source.pairs_per_pulse * self._fates.p_detected
        self._pulses = LitPulses(source.period_ps, source.number_law.any(mean))
        self._tail = source.number_law.tail(mean)

    def draw(self, begin_ps: int, length_ps: int, rng: np.random.Generator) -> Photons:
        lit = self._pulses.draw(begin_ps, begin_ps + length_ps, rng)
        if lit.size == 0:
            return no_photons()
        lit = np.repeat(lit, draw_numbers(self._tail, lit.size, rng))
        offsets = (pulse_times_ps(lit, self._period) - begin_ps).astype(np.float64)
        return detected_photons(offsets, offsets, self._fates.draw(lit.size, rng))


def detected_photons(
    heralds_ps: np.ndarray[tuple[int], np.dtype[np.float64]],
    signals_ps: np.ndarray[tuple[int], np.dtype[np.float64]],
    fates: Fates,
) -> Photons:
    """The photons of pairs that are detected, given when both of each pair would be."""
    kept = [fate != NOWHERE for fate in fates]
    return Photons(
        np.concatenate((heralds_ps[kept[0]], signals_ps[kept[1]])),
        np.concatenate((fates.heralds[kept[0]], fates.signals[kept[1]])),
    )
